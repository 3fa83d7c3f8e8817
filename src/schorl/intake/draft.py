"""What is known so far while a laboratory file is read."""

from __future__ import annotations

from dataclasses import dataclass, field

from schorl.findings import Finding, finding
from schorl.model.record import Recognition


@dataclass
class Draft:
    """What is known so far while a file is read; findings are gathered, not raised."""

    source: str
    findings: list[Finding] = field(default_factory=list)
    recognised: list[Recognition] = field(default_factory=list)

    def note(self, code: str, what: str, hint: str = "", *, where: str = "") -> None:
        """Add a finding about the file or a place in it."""
        place = f"{self.source}, {where}" if where else self.source
        self.findings.append(finding(code, where=place, what=what, hint=hint))

    def saw(self, what: str, where: str, how: str) -> None:
        """Add a recognition."""
        self.recognised.append(Recognition(what=what, where=f"{self.source}, {where}", how=how))

    @property
    def broken(self) -> bool:
        """Whether an error was found."""
        return any(one.stops for one in self.findings)

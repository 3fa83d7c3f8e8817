"""How a run that cannot go on says so.

Every error that a person can cause carries findings (place, value, way out) and an exit code.
One place, the command line, turns them into words; anything else that escapes is a bug of ours.
"""

from __future__ import annotations

from enum import IntEnum
from typing import TYPE_CHECKING, Protocol

if TYPE_CHECKING:
    from collections.abc import Sequence


class Exit(IntEnum):
    """Exit codes of the command line."""

    DONE = 0
    ANSWER_IS_NO = 1
    USAGE = 2
    NOT_UNDERSTOOD = 3
    NO_HONEST_ANSWER = 4
    NOT_WRITTEN = 5
    OUR_BUG = 70
    INTERRUPTED = 130
    TERMINATED = 143


class Found(Protocol):
    """What this module needs to know of a finding (the class itself lives one floor up)."""

    @property
    def what(self) -> str:
        """The problem, with the offending value."""

    @property
    def exit(self) -> int:
        """Exit code that this finding forces; 0 where it does not stop a run."""


class SchorlError(Exception):
    """Root of all errors that are explained to a person instead of traced back.

    Parameters
    ----------
    findings
        One or more findings; those that stop a run decide the exit code, the lowest first
        (input that cannot be understood is said before input that has no safe answer).
    exit_code
        Used where no finding forces one.
    """

    def __init__(
        self, findings: Sequence[Found], *, exit_code: int = Exit.NO_HONEST_ANSWER
    ) -> None:
        self.findings = tuple(findings)
        forced = sorted(found.exit for found in self.findings if found.exit)
        self.exit_code = int(forced[0]) if forced else int(exit_code)
        super().__init__("; ".join(found.what for found in self.findings))


class Refusal(SchorlError):
    """The input was understood, but there is no honest or safe answer, or it was not understood."""


class UsageProblem(SchorlError):
    """A command or setting is wrong."""

    def __init__(self, findings: Sequence[Found]) -> None:
        super().__init__(findings, exit_code=Exit.USAGE)


class OutputProblem(SchorlError):
    """Output could not be written, or read back differently."""

    def __init__(self, findings: Sequence[Found]) -> None:
        super().__init__(findings, exit_code=Exit.NOT_WRITTEN)


class OwnFault(SchorlError):
    """Our own output cannot be trusted (the second opinion disagreed): a bug of ours."""

    def __init__(self, findings: Sequence[Found]) -> None:
        super().__init__(findings, exit_code=Exit.OUR_BUG)

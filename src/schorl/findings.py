"""Findings: what a check noticed, in a form that people and programs can read.

The words that stay the same for a code (severity, exit code, explanation) stand in the TOML files
of ``schorl/catalogue``; place, value and way out come from the caller. ``schorl explain CODE``
prints the catalogue's entry.
"""

from __future__ import annotations

import tomllib
from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum
from functools import lru_cache
from importlib.resources import files


class Severity(StrEnum):
    """How much a finding matters."""

    ERROR = "error"
    WARNING = "warning"
    NOTE = "note"


@dataclass(frozen=True, slots=True, kw_only=True)
class CatalogueEntry:
    """What is always true of a finding code."""

    code: str
    severity: Severity
    exit: int
    title: str
    explanation: str
    way_out: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """One thing a check noticed: where, what (with the offending value), and the way out."""

    code: str
    severity: Severity
    exit: int
    where: str
    what: str
    hint: str

    @property
    def stops(self) -> bool:
        """Whether a prescription may not be made while this stands."""
        return self.severity is Severity.ERROR


@lru_cache(maxsize=1)
def catalogue() -> dict[str, CatalogueEntry]:
    """All finding codes, by code.

    Raises
    ------
    ValueError
        A code stands in two files: a fault of the package, not of a user.
    """
    entries: dict[str, CatalogueEntry] = {}
    folder = files("schorl") / "catalogue"
    for source in sorted(folder.iterdir(), key=lambda item: item.name):
        if not source.name.endswith(".toml"):
            continue
        for code, words in tomllib.loads(source.read_text(encoding="utf-8")).items():
            if code in entries:
                raise ValueError(f"finding code {code} stands twice in the catalogue")
            entries[code] = _entry(code, words)
    return entries


def _entry(code: str, words: dict[str, object]) -> CatalogueEntry:
    return CatalogueEntry(
        code=code,
        severity=Severity(str(words["severity"])),
        exit=int(str(words.get("exit", 0))),
        title=str(words["title"]),
        explanation=str(words["explanation"]),
        way_out=str(words["way_out"]),
    )


def finding(code: str, *, where: str, what: str, hint: str = "") -> Finding:
    """Make a finding of a known code.

    Parameters
    ----------
    code
        A code of the catalogue; an unknown one is a ``KeyError`` (a fault of the package).
    where
        Place: file, row, sample, zone.
    what
        The problem in words, with the offending value.
    hint
        The way out, as something that can be typed or done; the catalogue's where left empty.
    """
    entry = catalogue()[code]
    return Finding(
        code=code,
        severity=entry.severity,
        exit=entry.exit,
        where=where,
        what=what,
        hint=hint or entry.way_out,
    )


def errors_among(findings: Iterable[Finding]) -> tuple[Finding, ...]:
    """The findings that stop a run."""
    return tuple(found for found in findings if found.stops)

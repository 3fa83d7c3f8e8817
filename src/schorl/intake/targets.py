"""A table of one's own targets: crop, clay from, clay below, target."""

from __future__ import annotations

from pathlib import Path

from schorl.intake.guards import Unreadable, checked_bytes, refuse
from schorl.intake.quantities import read_cell
from schorl.model.reading import Reading

COLUMNS = ("crop", "clay_from_pct", "clay_below_pct", "target_mg_kg")


def read_own_targets(path: Path) -> Reading[tuple[tuple[str, float, float, float], ...]]:
    """Read a CSV with the columns crop, clay_from_pct, clay_below_pct, target_mg_kg."""
    import csv

    try:
        lines = checked_bytes(path).decode("utf-8-sig", errors="replace").splitlines()
        reader = csv.DictReader(lines)
        if set(COLUMNS) - set(reader.fieldnames or ()):
            raise refuse("IN-HEADER", path, f"the columns must be {', '.join(COLUMNS)}")
        rows = [_row(path, number, row) for number, row in enumerate(reader, start=2)]
    except Unreadable as problem:
        return Reading(value=None, findings=(problem.found,))
    return Reading(value=tuple(rows))


def _row(path: Path, line: int, row: dict[str, str]) -> tuple[str, float, float, float]:
    figures = [read_cell(row[one] or "", decimal_comma=False).value for one in COLUMNS[1:]]
    if any(one is None or one < 0 for one in figures) or not 0 < (figures[2] or 0) <= 5:
        raise refuse("IN-NOT-NUMBER", path, f"line {line}: `{row}` is no row of targets")
    low, high, target = (float(one or 0.0) for one in figures)
    return row["crop"].strip(), low, high, target

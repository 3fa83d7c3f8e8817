"""Figures of agronomy with their sources: CSV files of this package, loaded and checked once.

Every row has an id, a unit, a source and a status: READ (at its source), READ_SECONDARY (in a copy
or in public code that quotes it), MEMORY (recalled, unverified), COMPUTED, PROPOSAL (of this
program) or COMMON_PRACTICE_NO_SOURCE (a fact of the trade).
"""

from __future__ import annotations

import csv
from collections.abc import Mapping
from functools import lru_cache
from importlib.resources import files
from importlib.resources.abc import Traversable
from types import MappingProxyType

STATUSES = frozenset(
    {"READ", "READ_SECONDARY", "MEMORY", "COMPUTED", "PROPOSAL", "COMMON_PRACTICE_NO_SOURCE"}
)
Row = Mapping[str, str]


def _folder() -> Traversable:
    return files("schorl") / "agronomy" / "tables"


@lru_cache(maxsize=1)
def table_names() -> tuple[str, ...]:
    """Names of all tables."""
    names = [one.name for one in _folder().iterdir() if one.name.endswith(".csv")]
    return tuple(sorted(name.removesuffix(".csv") for name in names))


@lru_cache(maxsize=32)
def table(name: str) -> tuple[Row, ...]:
    """Rows of a table, in order.

    Raises
    ------
    ValueError
        A row has no unit column, source or known status, or an id stands twice: a fault of the
        package.
    """
    text = (_folder() / f"{name}.csv").read_text(encoding="utf-8")
    rows = tuple(MappingProxyType(dict(row)) for row in csv.DictReader(text.splitlines()))
    seen: set[str] = set()
    for row in rows:
        if row["id"] in seen:
            raise ValueError(f"table {name}: id `{row['id']}` stands twice")
        if row["status"] not in STATUSES or not row["source"] or "unit" not in row:
            raise ValueError(f"table {name}: row `{row['id']}` lacks unit, source or status")
        seen.add(row["id"])
    return rows


@lru_cache(maxsize=512)
def row_of(name: str, row_id: str) -> Row:
    """One row by its id (KeyError where there is none)."""
    for row in table(name):
        if row["id"] == row_id:
            return row
    raise KeyError(f"table {name} has no row `{row_id}`")


def limit(row_id: str) -> float:
    """A single figure of the table of limits."""
    return float(row_of("limits", row_id)["value"])


def trace(name: str, row_id: str, value: float) -> dict[str, str]:
    """A figure as a report shows it: where it stands, its status and source."""
    row = row_of(name, row_id)
    return {
        "table": name,
        "row": row_id,
        "value": f"{value:g}",
        "unit": row["unit"],
        "status": row["status"],
        "source": row["source"],
    }

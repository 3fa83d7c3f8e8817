"""Figures of machines and mixes with their sources: CSV files of this package, checked once.

Columns and status words are those of the tables of agronomy, so that both can be shown alike.
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
    return files("schorl") / "machinery" / "tables"


@lru_cache(maxsize=1)
def table_names() -> tuple[str, ...]:
    """Names of all tables."""
    names = [one.name for one in _folder().iterdir() if one.name.endswith(".csv")]
    return tuple(sorted(name.removesuffix(".csv") for name in names))


@lru_cache(maxsize=16)
def table(name: str) -> Mapping[str, Row]:
    """Rows of a table by their id, in order.

    Raises
    ------
    ValueError
        A row lacks unit, source or a known status, or an id stands twice: a fault of the package.
    """
    text = (_folder() / f"{name}.csv").read_text(encoding="utf-8")
    rows: dict[str, Row] = {}
    for row in csv.DictReader(text.splitlines()):
        if row["id"] in rows:
            raise ValueError(f"table {name}: id `{row['id']}` stands twice")
        if row["status"] not in STATUSES or not row["source"] or not row["unit"]:
            raise ValueError(f"table {name}: row `{row['id']}` lacks unit, source or status")
        rows[row["id"]] = MappingProxyType(dict(row))
    return MappingProxyType(rows)


def machine_limit(row_id: str) -> float:
    """A single figure of the table of machine limits."""
    return float(table("machine_limits")[row_id]["value"])


def trace(name: str, row_id: str) -> dict[str, str]:
    """A figure as a report shows it: where it stands, its status and source."""
    row = table(name)[row_id]
    return {
        "table": name,
        "row": row_id,
        "value": row["value"],
        "unit": row["unit"],
        "status": row["status"],
        "source": row["source"],
    }

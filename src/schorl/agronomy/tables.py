"""Figures of agronomy with their sources: CSV files of this package, loaded and checked once.

What a row must have, and the words for how far it was checked, stand in
:mod:`schorl.model.sourced`; what each table must hold in :mod:`schorl.agronomy.schemas`.
"""

from __future__ import annotations

from functools import lru_cache
from importlib.resources import files
from importlib.resources.abc import Traversable

from schorl.agronomy.schemas import SCHEMAS
from schorl.model.sourced import STATUSES, Row, read_rows, traced

__all__ = ["STATUSES", "Row", "limit", "row_of", "table", "table_names", "trace"]


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
        The table breaks its schema: a fault of the package.
    """
    text = (_folder() / f"{name}.csv").read_text(encoding="utf-8")
    return read_rows(name, text, SCHEMAS.get(name))


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
    return traced(name, row_of(name, row_id), f"{value:g}")

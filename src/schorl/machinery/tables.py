"""Figures of machines and mixes with their sources: CSV files of this package, checked once.

Columns and status words are those of the tables of agronomy, so that both can be shown alike.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache
from importlib.resources import files
from importlib.resources.abc import Traversable
from types import MappingProxyType

from schorl.model.sourced import Column, Row, Schema, number, read_rows, traced, words

__all__ = ["SCHEMAS", "Row", "machine_limit", "table", "table_names", "trace"]

_COMPOUND = words(
    "boric acid",
    "disodium tetraborate decahydrate (borax)",
    "disodium tetraborate pentahydrate",
    "disodium octaborate tetrahydrate",
)
#: What each table must hold besides id, unit, source, status and address.
SCHEMAS: Mapping[str, Schema] = MappingProxyType(
    {
        "machine_limits": Schema(columns={"value": number(0, 10_000)}),
        "nozzles": Schema(
            columns={"value": number(0.1, 40), "colour": Column(needed=False)},
            units=frozenset({"L/min at 3 bar"}),
        ),
        "solids": Schema(
            columns={
                "aliases": Column(needed=False),
                "boron_pct": number(5, 35),
                "value": number(0.5, 4),
            },
            units=frozenset({"g/cm3 of the crystal", "g/cm3 of the solid"}),
        ),
        "solubility": Schema(
            columns={
                "compound": _COMPOUND,
                "temperature_c": number(-1, 100),
                "value": number(0.1, 600),
            },
            units=frozenset({"% w/w of the saturated solution", "g/L"}),
        ),
    }
)


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
        The table breaks its schema: a fault of the package.
    """
    text = (_folder() / f"{name}.csv").read_text(encoding="utf-8")
    return MappingProxyType({row["id"]: row for row in read_rows(name, text, SCHEMAS.get(name))})


def machine_limit(row_id: str) -> float:
    """A single figure of the table of machine limits."""
    return float(table("machine_limits")[row_id]["value"])


def trace(name: str, row_id: str) -> dict[str, str]:
    """A figure as a report shows it: where it stands, its status and source."""
    row = table(name)[row_id]
    return traced(name, row, row["value"])

"""Extraction methods of soil boron, found by the names laboratories write."""

from __future__ import annotations

from functools import lru_cache

from schorl.agronomy.tables import Row, table

HOT_WATER = "hot water"
NOT_NAMED = "not named"  # a published table that does not say how its boron was extracted


def _plain(name: str) -> str:
    return " ".join(name.lower().replace("_", " ").replace("-", " ").split())


@lru_cache(maxsize=1)
def _by_name() -> dict[str, Row]:
    return {
        _plain(name): row
        for row in table("methods")
        for name in (row["id"], *row["aliases"].split("|"))
        if name
    }


def method_row(name: str) -> Row | None:
    """The row of a method or alias, whatever its capitals and hyphens; None if not known."""
    return _by_name().get(_plain(name))


def same_method(one: str, other: str) -> bool:
    """Whether two names mean one extraction."""
    first, second = method_row(one), method_row(other)
    if first is None or second is None:
        return _plain(one) == _plain(other)
    return first["id"] == second["id"]


def is_hot_water(name: str) -> bool:
    """Whether the limits of this program belong to the method."""
    row = method_row(name)
    return row is not None and row["limits_apply"] == "yes"

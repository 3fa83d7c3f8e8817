"""Crops: need, tolerance and caps, found by name or alias."""

from __future__ import annotations

import difflib
import re
from dataclasses import dataclass

from schorl.agronomy.tables import Row, table
from schorl.errors import UsageProblem
from schorl.findings import finding


@dataclass(frozen=True, slots=True, kw_only=True)
class Crop:
    """One row of the crops table."""

    name: str
    need: str  # "high", "medium", "low"
    tolerance: str
    rate_cap_kg_ha: float
    ceiling_class: str  # "texture", "sensitive", "very sensitive"
    sensitive_next: bool
    perennial: bool
    status: str


def crop_named(name: str, *, option: str = "--crop") -> Crop:
    """The crop of that name or alias, whatever its capitals, in the plural or sown in any season.

    Raises
    ------
    UsageProblem
        An unknown crop, with the nearest names (exit 2).
    """
    wanted = " ".join(name.lower().split())
    bare = re.sub(r"^(winter|spring|summer|autumn) ", "", wanted)
    for one in dict.fromkeys((wanted, bare, bare.removesuffix("s"))):
        for row in table("crops"):
            if one in _names(row):
                return _crop(row)
    known = [one for row in table("crops") for one in _names(row)]
    near = difflib.get_close_matches(wanted, known, n=3, cutoff=0.4)
    nearest = f"nearest: {', '.join(near)}; " if near else ""
    raise UsageProblem(
        [
            finding(
                "RATE-CROP",
                where="job",
                what=f"`{name}` is not a crop of the table",
                hint=f"{nearest}`schorl tables crops` lists them all; give `{option} NAME`",
            )
        ]
    )


def _names(row: Row) -> list[str]:
    return [row["id"].lower(), *(one.lower() for one in row["aliases"].split("|") if one)]


def _crop(row: Row) -> Crop:
    return Crop(
        name=row["id"],
        need=row["need"],
        tolerance=row["tolerance"],
        rate_cap_kg_ha=float(row["rate_cap_kg_ha"]),
        ceiling_class=row["ceiling_class"],
        sensitive_next=row["sensitive_next"] == "yes",
        perennial=row["perennial"] == "yes",
        status=row["status"],
    )


def removal_row(name: str) -> Row | None:
    """The row of the boron that a tonne of a crop's harvest takes away; None where there is none."""
    wanted = crop_named(name).name
    return next((row for row in table("removal") if row["id"] == wanted), None)


def removal_g_t(name: str) -> float | None:
    """Boron that a tonne of harvest of a crop takes away, grams; None where no row says."""
    row = removal_row(name)
    return None if row is None else float(row["g_b_t"])

"""Leaf, sap and brix checks in season, and what they say of a zone."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class LeafVerdict(StrEnum):
    """What a zone's leaves say of a foliar pass."""

    WARRANTED = "foliar pass warranted"
    NOT = "no foliar pass"
    UNDECIDED = "not decided"
    TOXIC = "too much boron in the leaves"


@dataclass(frozen=True, slots=True, kw_only=True)
class TissueSample:
    """One check of plants, in a zone by number or at a place (east, north in metres).

    Boron is mg/kg of dry matter: ``leaf`` of the part that the range is for, ``young`` and ``old``
    leaves of the same plants. ``below_limit`` says that ``leaf`` is a reporting limit. Brix is in
    degrees, of the youngest leaves in the evening and on the next morning.
    """

    name: str
    zone: int | None = None
    place_m: tuple[float, float] | None = None
    leaf: float | None = None
    below_limit: bool = False
    young: float | None = None
    old: float | None = None
    brix_evening: float | None = None
    brix_morning: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class LeafRange:
    """Boron in a plant part, mg/kg dry matter; None where the source has no such end.

    ``row`` names the row of the table of leaves, or says whose own range it is.
    """

    part: str
    stage: str
    deficient_below: float | None
    sufficient_from: float | None
    toxic_above: float | None
    row: str
    status: str
    source: str


@dataclass(frozen=True, slots=True, kw_only=True)
class ZoneLeaves:
    """The evidence of one zone and what follows from it.

    ``leaf`` and ``leaf_error`` are mean and standard error, mg/kg dry matter; ``gap`` is (old less
    young) over old; ``brix_fall`` evening less morning; NaN where not measured. ``dose_kg_ha`` is
    the boron of a pass after every limit, before the machine.
    """

    zone: int
    samples: int
    leaf: float
    leaf_error: float
    gap: float
    brix_fall: float
    verdict: LeafVerdict
    why: str
    dose_kg_ha: float = 0.0

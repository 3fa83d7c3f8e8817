"""Management zones: areas that get one rate."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from types import MappingProxyType

import numpy as np

from schorl.model.arrays import Counts, Floats, lock, locked
from schorl.model.field import Area


class ZoneKind(StrEnum):
    """Why an area is a zone of its own."""

    ZONE = "zone"
    HOT_SPOT = "hot spot"
    KEEP_OFF = "keep-off"


@dataclass(frozen=True, slots=True, kw_only=True)
class Zone:
    """One zone: its number (kept through the seasons), its area in the field's metres."""

    number: int
    kind: ZoneKind
    geometry: Area
    area_ha: float


@dataclass(frozen=True, slots=True, kw_only=True)
class CountFigure:
    """What a number of zones would do: one row of the table behind the choice.

    ``saving`` is the share of the best flat rate's expected loss that the best map with ``count``
    zones saves after every limit; ``saving_low`` and ``saving_high`` its range. The indices are
    information only.
    """

    count: int
    saving: float
    saving_low: float
    saving_high: float
    indices: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, eq=False, kw_only=True)
class ZoneMap:
    """Zones that cover the field exactly once.

    ``labels`` ``(n_cells,)`` is the position in ``zones`` of the zone each cell centre lies in.
    ``doubt`` ``(n_cells,)``, 0 sure to 1 unsure, or empty where not defined; ``sureness`` one
    figure a zone (mean membership) in the order of ``zones``.
    ``count`` counts the zones of kind ZONE; ``reason`` is the plain sentence behind the choice.
    """

    zones: tuple[Zone, ...]
    labels: Counts
    count: int
    reason: str
    origin: str  # "one flat rate", "clusters", "sample zones", "kept", "own layer"
    heading_deg: float
    doubt: Floats = field(default_factory=lambda: np.empty(0))
    sureness: tuple[float, ...] = ()
    structure_p: float | None = None  # permutation test of need and soil, or of sample zones
    table: tuple[CountFigure, ...] = ()
    classes_found: int | None = None  # mixture on the samples; None where it was not asked
    too_narrow_ha: float = 0.0  # area a machine cannot follow
    centres: Mapping[str, tuple[float, ...]] = field(default_factory=dict)
    retired_numbers: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        lock(self, doubt=self.doubt)
        object.__setattr__(self, "labels", locked(self.labels, np.intp))
        object.__setattr__(self, "centres", MappingProxyType(dict(self.centres)))

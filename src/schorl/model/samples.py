"""Laboratory samples: what was measured, where, over which soil."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date
from types import MappingProxyType

import numpy as np

from schorl.model.arrays import Counts, Flags, Floats, locked
from schorl.model.field import Area

#: Properties a sample set may carry, with the unit they are held in.
PROPERTY_UNITS: Mapping[str, str] = MappingProxyType(
    {
        "boron": "mg/kg",  # mg/L of soil where Campaign.per_volume
        "organic_matter": "%",
        "clay": "%",
        "sand": "%",
        "ph": "pH",
        "bulk_density": "g/cm3",
        "stones": "% by volume",
        "calcium": "mg/kg",
        "total_boron": "mg/kg",
    }
)


@dataclass(frozen=True, eq=False, kw_only=True)
class Measured:
    """One property at the samples.

    ``values`` has shape ``(n,)``, NaN where missing, in the unit of ``PROPERTY_UNITS``; where
    ``below_limit`` is true the value is the reporting limit and the truth lies below it.
    """

    values: Floats
    below_limit: Flags
    column: str = ""
    unit_read: str = ""

    def __post_init__(self) -> None:
        object.__setattr__(self, "values", locked(self.values))
        object.__setattr__(self, "below_limit", locked(self.below_limit, np.bool_))

    @property
    def known(self) -> Flags:
        """Where there is a value or a reporting limit, shape ``(n,)``."""
        return np.isfinite(self.values)


@dataclass(frozen=True, slots=True, kw_only=True)
class Campaign:
    """How and when the samples were taken and analysed.

    ``method`` is the boron extraction ("hot water", "mehlich-3", ...), ``depth_cm`` the sampling
    depth, ``lab_relative_sd`` the laboratory's repeatability for boron as a share of the value, None
    where nobody said.
    """

    method: str
    depth_cm: float
    sampled_on: date | None = None
    laboratory: str = ""
    per_volume: bool = False
    lab_relative_sd: float | None = None


@dataclass(frozen=True, eq=False, kw_only=True)
class SampleSet:
    """The samples of one season in the field's metres.

    ``east_north_m`` has shape ``(n, 2)``: the point, or a point inside a sample zone. ``kind`` is
    "point", "cores" or "zone" a sample; ``areas`` holds the polygon of a sample zone, else None;
    ``core_points_m`` the listed core positions ``(k, 2)`` of a "cores" sample, else None.
    ``cores`` ``(n,)`` counts the cores of each composite.
    ``constants`` are field constants declared instead of measured ({"clay": 22.0}).
    """

    ids: tuple[str, ...]
    east_north_m: Floats
    properties: Mapping[str, Measured]
    kind: tuple[str, ...]
    cores: Counts
    campaign: Campaign
    areas: tuple[Area | None, ...] = ()
    core_points_m: tuple[Floats | None, ...] = ()
    constants: Mapping[str, float] = field(default_factory=dict)
    source: str = ""

    def __post_init__(self) -> None:
        object.__setattr__(self, "east_north_m", locked(self.east_north_m))
        object.__setattr__(self, "cores", locked(self.cores, np.intp))
        object.__setattr__(self, "properties", MappingProxyType(dict(self.properties)))
        object.__setattr__(self, "constants", MappingProxyType(dict(self.constants)))
        if not self.areas:
            object.__setattr__(self, "areas", (None,) * len(self.ids))
        if not self.core_points_m:
            object.__setattr__(self, "core_points_m", (None,) * len(self.ids))

    def __len__(self) -> int:
        """Number of samples."""
        return len(self.ids)

    @property
    def zone_samples(self) -> bool:
        """Whether every sample is a composite of a sample zone."""
        return bool(self.kind) and all(kind == "zone" for kind in self.kind)

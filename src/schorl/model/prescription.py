"""The rates: boron per cell distribution, rate per zone, totals, outlook and machine figures."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from types import MappingProxyType

import numpy as np

from schorl.model.arrays import Flags, Floats, lock, locked
from schorl.model.zones import ZoneMap


class Limit(StrEnum):
    """What ruled a zone's rate."""

    NEED = "need"
    RATE_CAP = "rate cap"
    ABSOLUTE = "absolute limit"
    CARRY_OVER = "carry-over"
    CHANCE_OF_EXCESS = "chance of excess"
    SOIL_CEILING = "soil ceiling"
    HOT_SPOT = "hot spot"
    KEEP_OFF = "keep-off"
    MACHINE = "machine"
    LEAST_WORTH = "least rate worth giving"
    LOWERED = "lowered by a person"
    NOTHING = "nothing"


@dataclass(frozen=True, eq=False, kw_only=True)
class CellNeed:
    """What the soil of each cell asks for and tolerates, shape ``(n_cells,)`` each.

    ``need_mean_kg_ha`` and ``need_sd_kg_ha`` describe the need D = (T - B) F after credits (it may
    be negative). ``boron_location``/``boron_sd`` and ``boron_log`` give the decision distribution
    of the soil test. ``mass_need`` and ``mass_ceiling`` are kg B/ha for 1 mg/kg over the depth of
    the need and of incorporation. ``hot`` marks cells that must not be treated.
    """

    need_mean_kg_ha: Floats
    need_sd_kg_ha: Floats
    boron_mg_kg: Floats
    boron_location: Floats
    boron_sd: Floats
    boron_log: bool
    target_mg_kg: Floats
    ceiling_mg_kg: Floats
    mass_need: Floats
    mass_ceiling: Floats
    rate_cap_kg_ha: Floats  # after placement, crop and what this season has had already
    hot: Flags

    def __post_init__(self) -> None:
        names = (
            "need_mean_kg_ha",
            "need_sd_kg_ha",
            "boron_mg_kg",
            "boron_location",
            "boron_sd",
            "target_mg_kg",
            "ceiling_mg_kg",
            "mass_need",
            "mass_ceiling",
            "rate_cap_kg_ha",
        )
        lock(self, **{name: getattr(self, name) for name in names})
        object.__setattr__(self, "hot", locked(self.hot, np.bool_))


@dataclass(frozen=True, slots=True, kw_only=True)
class Outlook:
    """Chance and area short of the target and over the ceiling, before and after."""

    short_before: float
    short_after: float  # as if 30 % of the applied boron shows in the next test
    over_before: float
    over_after: float  # as if all applied boron stays
    short_before_ha: float = 0.0
    short_after_ha: float = 0.0
    over_before_ha: float = 0.0
    over_after_ha: float = 0.0
    loss_kg: float = 0.0  # expected kg B short plus kg B in excess over the area


@dataclass(frozen=True, slots=True, kw_only=True)
class ZoneRate:
    """What one zone gets and why; position i belongs to ``ZoneMap.zones[i]``."""

    zone: int
    area_ha: float
    boron_mean_mg_kg: float
    boron_sd_mg_kg: float  # of the zone's mean
    clay_pct: float
    organic_matter_pct: float
    target_mg_kg: float
    ceiling_mg_kg: float
    need_kg_ha: float  # loss-optimal rate before limits
    boron_kg_ha: float
    product_rate: float  # kg/ha or L/ha of what leaves the machine
    ruled_by: Limit
    limits_kg_ha: Mapping[str, float]  # every limit that was tried, in kg B/ha
    outlook: Outlook
    doubled_pass_mg_kg: float
    samples: int
    why: str
    rests_on: str = ""  # rows of the tables behind what ruled, with how far each was checked


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanValue:
    """The value of zoning: expected loss for three plans, on the same cells."""

    plan: str  # "zones", "best flat rate", "rate per cell"
    boron_kg: float
    loss_kg: float
    short_ha: float
    over_ha: float
    cost: float | None = (
        None  # boron and expected loss in the job's currency, where prices are given
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class MachinePoint:
    """Machine figures at one rate (lowest, mean, highest)."""

    name: str
    product_rate: float
    figures: Mapping[str, float]  # e.g. feed_kg_min, catch_g, catch_ml, granules_m2, pressure_bar


@dataclass(frozen=True, slots=True, kw_only=True)
class MachinePlan:
    """What the contractor sets and loads."""

    points: tuple[MachinePoint, ...]
    loads: float
    per_load: float
    order: float  # product to order, spare included
    facts: Mapping[str, float | str] = field(default_factory=dict)
    advice: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False, kw_only=True)
class Prescription:
    """The whole answer: zones with rates and totals.

    ``unit`` is "kg" or "L" of what leaves the machine; product rate is per hectare.
    """

    zone_map: ZoneMap
    rates: tuple[ZoneRate, ...]
    boron_kg: float
    product_total: float
    unit: str
    boron_pct: float | None
    boron_g_l: float | None
    field_outlook: Outlook
    value: tuple[PlanValue, ...]
    machine: MachinePlan
    saving: tuple[float, float, float] | None = None  # low, middle, high share of loss saved
    advice: tuple[str, ...] = ()  # splitting, carriers, pH, lime: plain sentences
    sources: tuple[Mapping[str, str], ...] = ()  # figures used, as model.sourced.traced

    def __post_init__(self) -> None:
        object.__setattr__(
            self, "sources", tuple(MappingProxyType(dict(row)) for row in self.sources)
        )


@dataclass(frozen=True, eq=False, kw_only=True)
class PlanOutcome:
    """What a plan would do after every limit and machine step.

    ``rates_kg_ha`` ``(k,)`` boron for labels 0 to k - 1; ``loss_kg`` expected kg B short plus
    excess over the whole field (untreated cells included), costs weighted.
    """

    rates_kg_ha: Floats
    loss_kg: float

    def __post_init__(self) -> None:
        lock(self, rates_kg_ha=self.rates_kg_ha)

"""What a job decides, as frozen values; the job file and the command line both end here."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date
from enum import StrEnum

from schorl.model.field import Area
from schorl.model.profile import Profile
from schorl.units import UnitSystem


class Form(StrEnum):
    """What leaves the machine."""

    GRANULE = "granule"
    SPRAY = "spray"


class Placement(StrEnum):
    """Where the boron lands."""

    BROADCAST = "broadcast"
    INCORPORATED = "incorporated"
    BAND = "band"
    SEED_ROW = "seed row"
    FOLIAR = "foliar"
    FERTIGATION = "fertigation"


class Interpretation(StrEnum):
    """How a soil test becomes a target."""

    CROP_NEED = "crop need"
    TEXTURE_LINE = "texture line"
    CLASS_TABLE = "class table"
    OWN = "own"


@dataclass(frozen=True, slots=True, kw_only=True)
class Override:
    """A limit set otherwise by a named person; shown in every output."""

    what: str  # "alfalfa season limit", "soil ceiling", "band cap", ...
    value: float
    unit: str
    person: str
    reason: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class AppliedBoron:
    """Boron already given, of any origin.

    ``kg_ha`` is one figure for the field, or ``areas`` gives polygons in the field's metres with
    their own kg B/ha. ``on`` decides whether the soil test has already seen it; ``this_season``
    whether it counts against the season's limits.
    """

    on: date | None
    kg_ha: float
    form: str = ""
    areas: tuple[tuple[Area, float], ...] = ()
    this_season: bool = False
    source: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class CropSettings:
    """Crop, interpretation and everything that lowers or raises the need."""

    crop: str
    next_crop: str = ""  # empty counts as sensitive
    interpretation: Interpretation = Interpretation.CROP_NEED
    region: str = ""  # preset of the class table
    own_targets: tuple[tuple[str, float, float, float], ...] = ()  # crop, clay from, clay to, T
    target_mg_kg: float | None = None
    ceiling_mg_kg: float | None = None
    cost_ratio: float = 1.0  # a kg short over a kg in excess
    maintenance_yield_t_ha: float | None = None
    drainage_mm: float | None = None
    water_boron_mg_l: float = 0.0
    irrigation_mm: float = 0.0
    manure_boron_kg_ha: float = 0.0
    bulk_density_g_cm3: float | None = None
    sand_pct: float | None = None
    texture: str = ""
    stones_pct: float = 0.0
    incorporation_cm: float | None = None
    lime_last_year: bool = False
    drought: bool = False
    applied: tuple[AppliedBoron, ...] = ()
    confirmed_high: tuple[str, ...] = ()  # samples at or above the ceiling, repeated or struck out
    price_boron_per_kg: float | None = None
    price_yield_per_kg_short: float | None = None
    currency: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Product:
    """The boron product, as its label says."""

    form: Form
    name: str = ""
    compound: str = ""
    boron_pct: float | None = None  # % w/w
    boron_g_l: float | None = None  # liquids
    density_kg_l: float | None = None
    bulk_density_kg_l: float | None = None  # granules, loose
    granule_mm: float | None = None
    granule_density_g_cm3: float | None = None
    price_per_unit: float | None = None
    bag_kg: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Machine:
    """A spreader or sprayer, described by numbers."""

    working_width_m: float = 24.0
    sections: int = 1
    least_rate: float | None = None  # product kg/ha or L/ha
    most_rate: float | None = None
    step: float | None = None
    speed_km_h: float = 10.0
    rate_change_s: float = 3.0
    delay_s: float = 0.0
    spread_cv_pct: float = 15.0
    hopper_kg: float | None = None
    tank_l: float | None = None
    can_do_zero: bool = True
    carrier: str = ""
    carrier_rate_kg_ha: float | None = None
    carrier_may_vary: bool | None = None
    blend_pct: float | None = None  # boron product in the blend with the carrier, % by weight
    headland_m: float = 0.0
    first_pass: str = ""
    nozzle_size: str = ""
    nozzle_spacing_m: float = 0.5
    pressure_low_bar: float = 1.5
    pressure_high_bar: float = 6.0
    pulse_width_ratio: float | None = None
    mix_g_b_l: float | None = None
    water_l_ha: float | None = None
    water_temperature_c: float | None = None
    events: int = 1  # fertigation


@dataclass(frozen=True, slots=True, kw_only=True)
class ExtraLayer:
    """A further layer for zoning, already on the field's cells or at points."""

    name: str
    east_north_m: tuple[tuple[float, float], ...] = ()
    values: tuple[float, ...] = ()
    weight: float = 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class ZoneSettings:
    """How zones are drawn."""

    count: int | None = None  # None: the gate decides
    soil_only: bool = False
    heading_deg: float | None = None  # direction of travel, degrees from north
    least_area_ha: float = 0.25
    redraw: bool = False  # krige through zone composites into new zones
    kept: tuple[tuple[int, Area], ...] = ()  # zones of an earlier pack, numbers kept
    retired_numbers: tuple[int, ...] = ()
    own_layer: tuple[tuple[int, Area], ...] = ()
    extras: tuple[ExtraLayer, ...] = ()
    keep_off: tuple[Area, ...] = ()
    keep_off_m: float = 0.0  # strip inside the boundary


@dataclass(frozen=True, slots=True, kw_only=True)
class RunSettings:
    """A whole job, resolved: no paths, nothing left to guess."""

    field_name: str
    season: str
    crop: CropSettings
    product: Product
    placement: Placement
    machine: Machine = field(default_factory=Machine)
    zoning: ZoneSettings = field(default_factory=ZoneSettings)
    cell_m: float | None = None
    units: UnitSystem = UnitSystem.METRIC
    seed: int = 0
    made_on: date | None = None
    prepared_by: str = ""
    overrides: tuple[Override, ...] = ()
    profile: Profile | None = None  # what the controller takes; None: everything

"""Two seasons of one field: what a pack brings into a comparison, and what comes out of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from schorl.findings import Finding
from schorl.model.arrays import Counts, Flags, Floats, lock
from schorl.model.field import Area, CellGrid
from schorl.model.samples import SampleSet
from schorl.model.settings import AppliedBoron


@dataclass(frozen=True, slots=True, kw_only=True)
class SeasonZone:
    """A zone of one season's pack, its area in the comparison's metres.

    ``soil_mass`` is kg B/ha for 1 mg/kg over the depth of the need, None in packs that do not say;
    ``limits_kg_ha`` holds every limit the rate was held to.
    """

    number: int
    kind: str
    area: Area
    area_ha: float
    boron_mg_kg: float
    boron_kg_ha: float
    product_rate: float
    product_unit: str
    soil_mass: float | None = None
    limits_kg_ha: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, eq=False, kw_only=True)
class SeasonPack:
    """What a comparison needs of one season's pack, in one metric system.

    ``surfaces`` holds estimates per cell of ``grid``, shape ``(n_cells,)``. ``applied`` is what
    was really given after the samples were taken, None where only the prescription is known.
    ``identity`` is the checksum of the pack's manifest: the same pack has the same one.
    """

    field_name: str
    season: str
    crs: str
    boundary: Area
    grid: CellGrid
    samples: SampleSet
    surfaces: Mapping[str, Floats]
    zones: tuple[SeasonZone, ...]
    origin: str
    heading_deg: float
    working_width_m: float
    crop: str
    identity: str
    retired_numbers: tuple[int, ...] = ()
    removed_kg_ha: float | None = None  # boron the crop took away
    applied: AppliedBoron | None = None
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        object.__setattr__(self, "surfaces", MappingProxyType(dict(self.surfaces)))

    @property
    def when(self) -> tuple[str, str, str]:
        """What seasons are put in order by: date of sampling, name of the season, identity."""
        on = self.samples.campaign.sampled_on
        return on.isoformat() if on else "", self.season, self.identity


@dataclass(frozen=True, eq=False, kw_only=True)
class SitePairs:
    """Sites sampled in both seasons: positions in either sample set and their boron, ``(n,)``."""

    before: Counts
    after: Counts
    before_mg_kg: Floats
    after_mg_kg: Floats
    east_north_m: Floats  # (n, 2)

    def __post_init__(self) -> None:
        lock(
            self, before=self.before, after=self.after, before_mg_kg=self.before_mg_kg,
            after_mg_kg=self.after_mg_kg, east_north_m=self.east_north_m,
        )  # fmt: skip

    def __len__(self) -> int:
        """Number of pairs."""
        return len(self.before)

    @property
    def change_mg_kg(self) -> Floats:
        """Later less earlier, ``(n,)``."""
        return self.after_mg_kg - self.before_mg_kg


@dataclass(frozen=True, slots=True, kw_only=True)
class Shift:
    """Change of the whole field's mean, and whether it looks like the laboratory's doing.

    ``low`` and ``high`` bound the 95 % interval. ``relative`` is of the earlier mean, ``in_sd`` of
    the earlier samples' standard deviation. ``correlation`` and ``concordance`` (Lin 1989,
    Biometrics 45:255-268) are NaN without revisited sites. ``warning`` is empty or a sentence.
    """

    mean: float
    low: float
    high: float
    relative: float
    in_sd: float
    sites: int
    correlation: float
    concordance: float
    warning: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class ZoneChange:
    """Change of mean boron in one zone: a test, its interval, and how small a change would show.

    ``test`` is "same sites", "new sites", "one composite each" or "too few samples"; the figures
    are NaN in the last case. ``p_adjusted`` is Holm's over the zones tested.
    """

    zone: int
    before: float
    after: float
    change: float
    low: float
    high: float
    p: float
    p_adjusted: float
    real: bool
    samples: int
    test: str
    least_detectable: float


@dataclass(frozen=True, eq=False, kw_only=True)
class ChangeMap:
    """Kriged change at the same sites, per cell of ``grid``: ``(n_cells,)`` each, mg/kg.

    ``real`` marks cells whose change passes at a false-discovery rate of 10 %
    (Benjamini & Hochberg 1995).
    """

    grid: CellGrid
    change_mg_kg: Floats
    sd_mg_kg: Floats
    p_adjusted: Floats
    real: Flags
    pattern: str
    real_ha: float

    def __post_init__(self) -> None:
        lock(
            self, change_mg_kg=self.change_mg_kg, sd_mg_kg=self.sd_mg_kg,
            p_adjusted=self.p_adjusted, real=self.real,
        )  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class Moved:
    """Ground that lies in another zone than its match of the season before."""

    before: int
    after: int
    area: Area
    area_ha: float


@dataclass(frozen=True, eq=False, kw_only=True)
class ZonesMoved:
    """Zones of both seasons against each other on the common ground.

    ``before``/``after`` are zone numbers in the order of the table ``transition_ha``; ``kept`` maps
    a later zone's number to the number it carries on (a new one where it has no match). The
    agreement figures come with ``by_chance``: what new samples alone would give where nothing has
    changed (kappa and adjusted Rand index; NaN where that cannot be simulated).
    """

    before: tuple[int, ...]
    after: tuple[int, ...]
    transition_ha: Floats
    kept: Mapping[int, int]
    retired: tuple[int, ...]
    moved: tuple[Moved, ...]
    moved_ha: float
    adjusted_rand: float
    kappa: float
    quantity: float
    allocation: float
    by_chance: tuple[float, float] = (float("nan"), float("nan"))

    def __post_init__(self) -> None:
        lock(self, transition_ha=self.transition_ha)
        object.__setattr__(self, "kept", MappingProxyType(dict(self.kept)))


@dataclass(frozen=True, slots=True, kw_only=True)
class ZoneBalance:
    """Boron given, taken away and found again in one zone, kg/ha; NaN where not known.

    ``recovery`` is the share of the boron given that the test shows (what the crop took added
    back), with its 95 % interval; NaN under 0.1 kg/ha given.
    """

    zone: int
    applied: float
    removed: float
    change: float
    change_low: float
    change_high: float
    recovery: float
    recovery_low: float
    recovery_high: float


@dataclass(frozen=True, slots=True, kw_only=True)
class RateChange:
    """Boron rates of a matched zone in both seasons, kg/ha; NaN where it has no match."""

    zone_before: int | None
    zone_after: int | None
    before_kg_ha: float
    after_kg_ha: float


@dataclass(frozen=True, slots=True, kw_only=True)
class CheckStrip:
    """A strip to leave untreated, or to give double, so that next season can tell what boron did."""

    kind: str  # "untreated" or "doubled"
    area: Area
    zones: tuple[int, ...]
    rates_kg_ha: tuple[float, ...]  # boron in the strip, one a zone
    said: str


@dataclass(frozen=True, slots=True, kw_only=True)
class RevisitSite:
    """A site to sample again next season, and why it was chosen."""

    name: str
    east_m: float
    north_m: float
    zone: int
    why: str


@dataclass(frozen=True, eq=False, kw_only=True)
class SeasonChange:
    """Everything a comparison found; ``before`` is the pack named first, whatever its date."""

    before: SeasonPack
    after: SeasonPack
    same: bool
    common: Area
    common_ha: float
    pairs: SitePairs
    shift: Shift | None
    refused: str  # why no difference of the soil tests is given, or empty
    least_detectable_mg_kg: float
    zones: tuple[ZoneChange, ...]
    change_map: ChangeMap | None
    no_map: str  # why there is no map, or empty
    moved: ZonesMoved
    rates: tuple[RateChange, ...]
    balance: tuple[ZoneBalance, ...]
    strips: tuple[CheckStrip, ...]
    revisit: tuple[RevisitSite, ...]
    findings: tuple[Finding, ...]
    text: str

"""The prescription: every zone's rate with its reason, totals, outlook and the value of zoning."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from schorl.agronomy.chances import (
    chance_over_ceiling,
    chance_short_of_target,
    expected_loss_kg_ha,
)
from schorl.agronomy.tables import limit
from schorl.findings import Finding, finding
from schorl.machinery.plan import MachineOutcome, machine_plan
from schorl.machinery.sprayer import settled_machine
from schorl.model.arrays import Counts, Flags, Floats
from schorl.model.field import CellGrid
from schorl.model.prescription import CellNeed, Limit, Outlook, PlanValue, Prescription, ZoneRate
from schorl.model.samples import SampleSet
from schorl.model.settings import Machine, Placement, RunSettings
from schorl.model.surface import Surface
from schorl.model.zones import Zone, ZoneKind, ZoneMap
from schorl.steps.advice import advice_for
from schorl.steps.assessing import Assessed, assess_cells
from schorl.steps.figures_used import limits_used, rests_on
from schorl.steps.zone_rates import (
    Ruled,
    cell_rates_kg_ha,
    part_of,
    plan_outcome,
    ruled_rate,
    unevenness_of,
)
from schorl.zoning.loss import saving_range

__all__ = [
    "Assessed", "Rated", "ZoneRows", "assess_cells", "plan_outcome", "prescribe_rates",
    "rated_zones",
]  # fmt: skip

FEW_SAMPLES = 3
#: A flat rate that loses less over the whole field leaves nothing to save, kg B.
LEAST_LOSS_KG = 1e-6


@dataclass(frozen=True, eq=False, kw_only=True)
class Rated:
    """The prescription, what was noticed, and the machine with mix and nozzle chosen."""

    prescription: Prescription
    findings: tuple[Finding, ...]
    machine: Machine


def prescribe_rates(
    zone_map: ZoneMap,
    assessed: Assessed,
    samples: SampleSet,
    surfaces: Mapping[str, Surface],
    grid: CellGrid,
    settings: RunSettings,
) -> Rated:
    """Rates of all zones under every limit, with machine figures and outlook."""
    need, job = assessed.need, settings
    ruled = _ruled_zones(zone_map, need, job)
    areas = [zone.area_ha for zone in zone_map.zones]
    doses = [(area, one.wanted_kg_ha) for area, one in zip(areas, ruled, strict=True)]
    # A spray's mix and nozzle are chosen to suit what the zones want; then that machine rules.
    chosen = settled_machine(doses, job.product, job.machine, job.placement)
    if chosen != job.machine:
        settings = replace(job, machine=chosen)
        ruled = _ruled_zones(zone_map, need, settings)
    machine = machine_plan(
        [(area, one.boron_kg_ha) for area, one in zip(areas, ruled, strict=True)],
        job.product,
        job.machine,
        placement=job.placement,
        wanted=[one.wanted_kg_ha for one in ruled],
        units=job.units,
    )
    rows = ZoneRows(
        zone_map=zone_map, need=need, samples=samples, surfaces=surfaces, grid=grid,
        settings=settings,
    )  # fmt: skip
    return rated_zones(rows, ruled, machine, job=job, sources=assessed.sources)


def rated_zones(
    rows: ZoneRows,
    ruled: Sequence[Ruled],
    machine: MachineOutcome,
    *,
    job: RunSettings,
    sources: Sequence[Mapping[str, str]],
) -> Rated:
    """The prescription of zones whose rates are ruled and whose machine figures are known.

    ``rows.settings`` has the machine with mix and nozzle chosen, ``job`` has it as it was given:
    other plans than this one choose theirs afresh.
    """
    zone_map, need, settings = rows.zone_map, rows.need, rows.settings
    used = _once((*sources, *limits_used(rows.samples, settings), *machine.sources))
    rates = tuple(
        replace(
            rows.zone_rate(place, one, machine.product_rates[place]),
            rests_on=rests_on(one.by, used),
        )
        for place, one in enumerate(ruled)
    )
    value = _value(zone_map, rates, need, job)
    prescription = Prescription(
        zone_map=zone_map,
        rates=rates,
        boron_kg=sum(rate.area_ha * rate.boron_kg_ha for rate in rates),
        product_total=sum(rate.area_ha * rate.product_rate for rate in rates),
        unit=machine.unit,
        boron_pct=machine.boron_pct,
        boron_g_l=machine.boron_g_l,
        field_outlook=outlook(need, _per_cell(zone_map, rates), settings, area_ha=_area(zone_map)),
        value=value,
        machine=machine.plan,
        saving=_saving(value, len(rows.samples)),
        advice=advice_for(rows.samples, rows.zone_of_sample(), rates, settings),
        sources=used,
    )
    found = (*machine.findings, *_findings(prescription, need, settings))
    return Rated(prescription=prescription, findings=found, machine=machine.machine)


def _once(sources: Sequence[Mapping[str, str]]) -> tuple[Mapping[str, str], ...]:
    """Every figure once, where it stands first: adapting brings the old ones along."""
    return tuple({(row["table"], row["row"], row["value"]): row for row in sources}.values())


def _area(zone_map: ZoneMap) -> float:
    return sum(zone.area_ha for zone in zone_map.zones)


def _per_cell(zone_map: ZoneMap, rates: tuple[ZoneRate, ...]) -> Floats:
    return np.array([rate.boron_kg_ha for rate in rates])[zone_map.labels]


def _ruled_zones(zone_map: ZoneMap, need: CellNeed, settings: RunSettings) -> list[Ruled]:
    return [
        _ruled_zone(zone, need, zone_map.labels == place, settings)
        for place, zone in enumerate(zone_map.zones)
    ]


def _ruled_zone(zone: Zone, need: CellNeed, chosen: Flags, settings: RunSettings) -> Ruled:
    if zone.kind is not ZoneKind.ZONE or not chosen.any():
        kinds = {ZoneKind.HOT_SPOT: Limit.HOT_SPOT, ZoneKind.KEEP_OFF: Limit.KEEP_OFF}
        by = kinds.get(zone.kind, Limit.NOTHING)
        return Ruled(
            need_kg_ha=0.0, wanted_kg_ha=0.0, boron_kg_ha=0.0, by=by, limits={str(by): 0.0}
        )
    cells = part_of(need, chosen)
    if cells.hot.any():
        # Hot cells that no workable patch could hold: the whole zone stays untreated.
        ruled = ruled_rate(cells, settings)
        limits = {**ruled.limits, str(Limit.HOT_SPOT): 0.0}
        return Ruled(
            need_kg_ha=ruled.need_kg_ha, wanted_kg_ha=0.0, boron_kg_ha=0.0,
            by=Limit.HOT_SPOT, limits=limits,
        )  # fmt: skip
    return ruled_rate(cells, settings)


@dataclass(frozen=True, eq=False, kw_only=True)
class ZoneRows:
    """What the rows of zones are made from."""

    zone_map: ZoneMap
    need: CellNeed
    samples: SampleSet
    surfaces: Mapping[str, Surface]
    grid: CellGrid
    settings: RunSettings

    def zone_rate(self, place: int, ruled: Ruled, product_rate: float) -> ZoneRate:
        """The row of one zone."""
        zone = self.zone_map.zones[place]
        chosen = self.zone_map.labels == place
        if not chosen.any():  # a sliver without a cell of its own: nearest cell stands in
            middle = np.array(zone.geometry.representative_point().coords[0])
            gap = np.hypot(*(self.grid.centres_m - middle).T)
            chosen = np.arange(len(chosen)) == int(gap.argmin())
        cells = part_of(self.need, chosen)
        boron = float(cells.boron_mg_kg.mean())
        target, ceiling = float(cells.target_mg_kg.mean()), float(cells.ceiling_mg_kg.mean())
        doubled = boron + 2.0 * ruled.boron_kg_ha / float(cells.mass_ceiling.mean())
        spread = self._mean_sd(chosen)
        return ZoneRate(
            zone=zone.number,
            area_ha=zone.area_ha,
            boron_mean_mg_kg=boron,
            boron_sd_mg_kg=spread,
            clay_pct=self._mean_of("clay", chosen),
            organic_matter_pct=self._mean_of("organic_matter", chosen),
            target_mg_kg=target,
            ceiling_mg_kg=ceiling,
            need_kg_ha=ruled.need_kg_ha,
            boron_kg_ha=ruled.boron_kg_ha,
            product_rate=product_rate,
            ruled_by=ruled.by,
            limits_kg_ha=ruled.limits,
            outlook=outlook(
                cells, np.full(chosen.sum(), ruled.boron_kg_ha), self.settings, area_ha=zone.area_ha
            ),
            doubled_pass_mg_kg=doubled,
            samples=self._samples_in(chosen),
            why=why(boron, spread, target, self._mean_of("clay", chosen), ruled),
        )

    def zone_of_sample(self) -> Counts:
        """Number of the zone that each sample lies in, ``(n,)``; 0 for none."""
        numbers = np.array([zone.number for zone in self.zone_map.zones], dtype=np.intp)
        cells = self.grid.cell_of(self.samples.east_north_m)
        return np.where(cells >= 0, numbers[self.zone_map.labels[cells]], 0)

    def _mean_of(self, name: str, chosen: Flags) -> float:
        surface = self.surfaces.get(name)
        return float("nan") if surface is None else float(surface.estimate[chosen].mean())

    def _mean_sd(self, chosen: Flags) -> float:
        """SD of the zone's mean, taken as fully shared error of its cells (the careful side)."""
        boron = self.surfaces["boron"]
        sd = boron.map_sd[chosen]
        if boron.transform == "log":
            sd = sd * boron.estimate[chosen]
        return float(sd.mean())

    def _samples_in(self, chosen: Flags) -> int:
        cells = self.grid.cell_of(self.samples.east_north_m)
        return int(chosen[cells[cells >= 0]].sum())


def why(boron: float, sd: float, target: float, clay_pct: float, ruled: Ruled) -> str:
    """One plain sentence: test, target, need, and what held the rate."""
    soil = "" if np.isnan(clay_pct) else f" for {clay_pct:.0f} % clay"
    start = (
        f"boron {boron:.2f} ± {sd:.2f} mg/kg against a target of {target:.2f}{soil}: "
        f"need {ruled.need_kg_ha:.2f} kg B/ha"
    )
    ends = {
        Limit.NEED: f"; given {ruled.boron_kg_ha:.2f}",
        Limit.NOTHING: "; nothing is given",
        Limit.LEAST_WORTH: "; below the least rate worth giving, nothing is given",
        Limit.HOT_SPOT: "; soil at its ceiling here, nothing is given",
        Limit.KEEP_OFF: "; keep-off area, nothing is given",
        Limit.SOIL_CEILING: "; the soil is at its ceiling, nothing is given",
        Limit.MACHINE: f"; the machine gives {ruled.boron_kg_ha:.2f}",
    }
    held = f"; held to {ruled.boron_kg_ha:.2f} by the {ruled.by}"
    return start + ends.get(ruled.by, held)


def outlook(
    cells: CellNeed, rate_kg_ha: Floats, settings: RunSettings, *, area_ha: float
) -> Outlook:
    """Two-sided outlook: sufficiency as if 30 % stays, harm as if all of it stays."""
    stays = limit("recovery-next-test")
    nothing = np.zeros(len(rate_kg_ha))
    short = [
        float(chance_short_of_target(cells, rate, stays=stays).mean())
        for rate in (nothing, rate_kg_ha)
    ]
    over = [float(chance_over_ceiling(cells, rate).mean()) for rate in (nothing, rate_kg_ha)]
    loss = expected_loss_kg_ha(cells, rate_kg_ha, cost_ratio=settings.crop.cost_ratio)
    return Outlook(
        short_before=short[0],
        short_after=short[1],
        over_before=over[0],
        over_after=over[1],
        short_before_ha=short[0] * area_ha,
        short_after_ha=short[1] * area_ha,
        over_before_ha=over[0] * area_ha,
        over_after_ha=over[1] * area_ha,
        loss_kg=float(loss.mean()) * area_ha,
    )


def _value(
    zone_map: ZoneMap, rates: tuple[ZoneRate, ...], need: CellNeed, settings: RunSettings
) -> tuple[PlanValue, ...]:
    """Zones, the best flat rate and a rate per cell, on the same cells under the same limits."""
    area = _area(zone_map)
    treatable = np.array([zone.kind is ZoneKind.ZONE for zone in zone_map.zones], dtype=bool)[
        zone_map.labels
    ]
    flat_labels = np.where(treatable & ~need.hot, 0, -1)
    flat = plan_outcome(flat_labels, need, settings, cell_ha=1.0)
    flat_rate = float(flat.rates_kg_ha[0]) if len(flat.rates_kg_ha) else 0.0
    plans = {
        "zones": _per_cell(zone_map, rates),
        "best flat rate": np.where(flat_labels == 0, flat_rate, 0.0),
        "rate per cell": np.where(treatable, cell_rates_kg_ha(need, settings), 0.0),
    }
    return tuple(_plan_value(name, need, rate, settings, area) for name, rate in plans.items())


def _plan_value(
    name: str, need: CellNeed, rate: Floats, settings: RunSettings, area_ha: float
) -> PlanValue:
    seen = outlook(need, rate, settings, area_ha=area_ha)
    return PlanValue(
        plan=name,
        boron_kg=float(rate.mean()) * area_ha,
        loss_kg=seen.loss_kg,
        short_ha=seen.short_after_ha,
        over_ha=seen.over_after_ha,
        cost=plan_cost(float(rate.mean()) * area_ha, seen.loss_kg, settings),
    )


def plan_cost(boron_kg: float, loss_kg: float, settings: RunSettings) -> float | None:
    """Boron bought and expected loss in money; None unless both prices are given.

    The loss counts a kilogram in excess once and one short ``cost_ratio`` times, so one that is
    short costs its price.
    """
    crop = settings.crop
    if crop.price_boron_per_kg is None or crop.price_yield_per_kg_short is None:
        return None
    return boron_kg * crop.price_boron_per_kg + (
        loss_kg / crop.cost_ratio * crop.price_yield_per_kg_short
    )


def _saving(value: tuple[PlanValue, ...], samples: int) -> tuple[float, float, float] | None:
    """Share of the flat rate's expected loss that zones save: low, middle, high."""
    zones, flat = value[0].loss_kg, value[1].loss_kg
    if flat <= LEAST_LOSS_KG:
        return None
    saved = 1.0 - zones / flat
    low, high = saving_range(saved, samples)
    return low, saved, high


def _findings(prescription: Prescription, need: CellNeed, settings: RunSettings) -> list[Finding]:
    found = []
    treated = [rate for rate in prescription.rates if rate.boron_kg_ha]
    doubled = [rate for rate in treated if rate.doubled_pass_mg_kg > rate.ceiling_mg_kg]
    if doubled:
        worst = max(rate.doubled_pass_mg_kg for rate in doubled)
        what = f"a doubled pass would bring soil boron to {worst:.1f} mg/kg, over the ceiling"
        found.append(finding("RATE-DOUBLED", where=_zones_named(doubled), what=what))
    warn = limit("cap-foliar-warn")
    strong = [rate for rate in treated if rate.boron_kg_ha > warn + 1e-9]
    if strong and settings.placement is Placement.FOLIAR:
        what = f"more than {warn:g} kg B/ha in one pass on leaves"
        found.append(finding("RATE-FOLIAR", where=_zones_named(strong), what=what))
    few = [rate for rate in treated if rate.samples < FEW_SAMPLES]
    if few and prescription.zone_map.origin != "sample zones":
        what = f"fewer than {FEW_SAMPLES} samples lie in it"
        found.append(finding("RATE-FEW", where=_zones_named(few), what=what))
    over = chance_over_ceiling(need, 0.0, unevenness=unevenness_of(settings))
    share = float((over >= limit("hot-chance")).mean())
    if share > 0:
        what = f"{100 * share:.1f} % of the field is likely over its ceiling before any boron"
        found.append(finding("RATE-OVER", where="field", what=what))
    ranked = sorted((rate.boron_kg_ha for rate in treated), reverse=True)
    if len(ranked) > 1 and ranked[0] > 3.0 * ranked[1]:
        what = f"the highest rate, {ranked[0]:.2f} kg B/ha, is over three times the next"
        found.append(finding("RATE-BIG", where="rates", what=what))
    return found


def _zones_named(rates: list[ZoneRate]) -> str:
    numbers = ", ".join(str(rate.zone) for rate in rates)
    return f"zone{'s' if len(rates) > 1 else ''} {numbers}"

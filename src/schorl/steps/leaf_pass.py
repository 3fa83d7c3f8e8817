"""From checks of leaves to a foliar pass, under the same limits as any other boron."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from schorl.agronomy.caps import absolute_limit_kg_ha, rate_cap
from schorl.agronomy.crops import Crop, crop_named
from schorl.agronomy.tables import limit, trace
from schorl.agronomy.tissue_checks import zone_leaves
from schorl.errors import Refusal
from schorl.findings import Finding, finding
from schorl.machinery.plan import machine_plan
from schorl.model.arrays import Floats
from schorl.model.prescription import CellNeed, Limit
from schorl.model.record import RunRecord
from schorl.model.settings import AppliedBoron, Machine, Override, Placement, Product, RunSettings
from schorl.model.tissue import LeafRange, LeafVerdict, TissueSample, ZoneLeaves
from schorl.model.zones import Zone, ZoneKind
from schorl.steps.given import given_per_cell, prescribed_boron
from schorl.steps.rating import ZoneRows, rated_zones
from schorl.steps.zone_rates import Ruled, chance_limit_kg_ha, part_of, unevenness_of
from schorl.zoning.sampled import label_in


@dataclass(frozen=True, slots=True, kw_only=True)
class LeafJob:
    """What a foliar pass is made with; ``dose_kg_ha`` None is the usual dose of the table."""

    held: LeafRange
    product: Product
    machine: Machine
    season: str
    dose_kg_ha: float | None = None
    override: Override | None = None


@dataclass(frozen=True, eq=False, kw_only=True)
class LeafAnswer:
    """Every zone's evidence, and the record of a pass where one is warranted."""

    zones: tuple[ZoneLeaves, ...]
    record: RunRecord | None
    findings: tuple[Finding, ...]


def check_leaves(
    record: RunRecord, samples: Sequence[TissueSample], job: LeafJob, *, source: str
) -> LeafAnswer:
    """Judge every zone by its leaves, and prescribe a foliar pass where they are short.

    A zone without checks gets none. Each dose is held to the foliar cap, to what the pack and other
    boron of the season leave of the absolute limit, and to the soil ceiling's chance after them.

    Raises
    ------
    Refusal
        Checks of zones that the pack does not have (exit 3).
    """
    crop = crop_named(record.settings.crop.crop)
    own = _by_zone(record, samples)
    settings = _settings(record.settings, job)
    need = fed_need(record)
    planned = _Pass(record=record, crop=crop, need=need, settings=settings, job=job)
    leaves, ruled, found = [], [], list(_own_note(job))
    for place, zone in enumerate(record.prescription.zone_map.zones):
        seen = zone_leaves(
            zone.number, own.get(zone.number, ()), job.held, crop=crop.name,
            lab_relative=limit("leaf-lab-sd") / 100.0,
        )  # fmt: skip
        one = planned.ruled(place, seen)
        found += _zone_findings(zone, seen, one)
        leaves.append(replace(seen, dose_kg_ha=one.wanted_kg_ha))
        ruled.append(one)
    if not any(one.wanted_kg_ha for one in ruled):
        what = "no zone gets a foliar pass"
        found.append(finding("TISSUE-NONE", where=record.field.name, what=what))
        return LeafAnswer(zones=tuple(leaves), record=None, findings=tuple(found))
    made = planned.record_of(ruled, leaves, found, source=source)
    return LeafAnswer(zones=tuple(leaves), record=made, findings=made.findings)


def _by_zone(record: RunRecord, samples: Sequence[TissueSample]) -> dict[int, list[TissueSample]]:
    zones = record.prescription.zone_map.zones
    numbers = {zone.number for zone in zones}
    held: dict[int, list[TissueSample]] = {}
    strange = []
    for one in samples:
        number = one.zone
        if one.place_m is not None:
            place = int(label_in([zone.geometry for zone in zones], np.array([one.place_m]))[0])
            number = zones[place].number if place >= 0 else None
        if number not in numbers:
            strange.append(one)
            continue
        held.setdefault(int(number), []).append(one)
    if strange:
        known = ", ".join(str(number) for number in sorted(numbers))
        raise Refusal(
            [
                finding(
                    "TISSUE-ZONE", where=one.name,
                    what=f"zone {one.zone} is not in the pack, which has {known}",
                )
                for one in strange
            ]
        )  # fmt: skip
    return held


def _settings(settings: RunSettings, job: LeafJob) -> RunSettings:
    overrides = (*settings.overrides, *((job.override,) if job.override else ()))
    return replace(
        settings, product=job.product, machine=job.machine, placement=Placement.FOLIAR,
        season=job.season, overrides=overrides, profile=None,
    )  # fmt: skip


def fed_need(record: RunRecord) -> CellNeed:
    """The cells' need and soil test after the pack was given, all of its boron staying."""
    need, rates = record.cell_need, record.prescription.rates
    given: Floats = np.array([rate.boron_kg_ha for rate in rates])[
        record.prescription.zone_map.labels
    ]
    more = given / need.mass_ceiling
    location = need.boron_location + more
    if need.boron_log:
        location = np.log(np.exp(need.boron_location) + more)
    return replace(
        need, need_mean_kg_ha=need.need_mean_kg_ha - given,
        boron_mg_kg=need.boron_mg_kg + more, boron_location=location,
    )  # fmt: skip


def _given_this_season(record: RunRecord, place: int) -> float:
    """Boron of this season before the pass: the pack's, and the most that other boron gave a cell."""
    cells = record.prescription.zone_map.labels == place
    other = np.zeros(int(cells.sum()))
    for one in record.settings.crop.applied:
        if one.this_season:
            other += given_per_cell(one, record.grid)[cells]
    return record.prescription.rates[place].boron_kg_ha + float(other.max(initial=0.0))


def _with_pack(record: RunRecord, source: str) -> tuple[AppliedBoron, ...]:
    """What the season has had, with the pack that the pass comes on top of."""
    pack = prescribed_boron(record, crs=record.field.crs, source=source)
    pack = replace(pack, this_season=True)
    return (*record.settings.crop.applied, pack)


@dataclass(frozen=True, eq=False, kw_only=True)
class _Pass:
    """What a pass is planned from."""

    record: RunRecord
    crop: Crop
    need: CellNeed  # after the pack was given
    settings: RunSettings
    job: LeafJob

    def ruled(self, place: int, seen: ZoneLeaves) -> Ruled:
        """The dose of one zone under every limit, before the machine."""
        zone = self.record.prescription.zone_map.zones[place]
        if zone.kind is not ZoneKind.ZONE or seen.verdict is not LeafVerdict.WARRANTED:
            by = {ZoneKind.HOT_SPOT: Limit.HOT_SPOT, ZoneKind.KEEP_OFF: Limit.KEEP_OFF}.get(
                zone.kind, Limit.NOTHING
            )
            return Ruled(
                need_kg_ha=0.0, wanted_kg_ha=0.0, boron_kg_ha=0.0, by=by, limits={str(by): 0.0}
            )
        dose = limit("cap-foliar-warn") if self.job.dose_kg_ha is None else self.job.dose_kg_ha
        season = absolute_limit_kg_ha(self.crop, self.settings.overrides)
        cells = part_of(self.need, self.record.prescription.zone_map.labels == place)
        limits = {
            str(Limit.NEED): dose,
            str(Limit.RATE_CAP): rate_cap(
                self.crop, Placement.FOLIAR, self.settings.overrides
            ).kg_ha,
            str(Limit.CARRY_OVER): max(season - _given_this_season(self.record, place), 0.0),
            str(Limit.CHANCE_OF_EXCESS): chance_limit_kg_ha(
                cells, unevenness=unevenness_of(self.settings)
            ),
        }
        wanted = min(limits.values())
        by = next(Limit(name) for name, value in limits.items() if value == wanted)
        if wanted < limit("least-pass"):
            wanted = 0.0
        return Ruled(need_kg_ha=dose, wanted_kg_ha=wanted, boron_kg_ha=wanted, by=by, limits=limits)

    def record_of(
        self,
        ruled: Sequence[Ruled],
        leaves: Sequence[ZoneLeaves],
        found: Sequence[Finding],
        *,
        source: str,
    ) -> RunRecord:
        """The record of the pass: the machine's plan, every zone's dose and its evidence."""
        zone_map = self.record.prescription.zone_map
        machine = machine_plan(
            [(zone.area_ha, one.wanted_kg_ha) for zone, one in zip(zone_map.zones, ruled, strict=True)],
            self.settings.product, self.settings.machine, placement=self.settings.placement, units=self.settings.units,
        )  # fmt: skip
        given = [
            replace(
                one,
                boron_kg_ha=boron,
                by=Limit.MACHINE if boron < one.wanted_kg_ha - 1e-9 else one.by,
            )
            for one, boron in zip(ruled, machine.boron_kg_ha, strict=True)
        ]
        crop = replace(self.settings.crop, applied=_with_pack(self.record, source))
        settled = replace(self.settings, machine=machine.machine, crop=crop)
        rows = ZoneRows(
            zone_map=zone_map, need=self.need, samples=self.record.samples, surfaces=self.record.surfaces,
            grid=self.record.grid, settings=settled,
        )  # fmt: skip
        sources = (
            trace("limits", "cap-foliar-warn", limit("cap-foliar-warn")),
            trace("limits", "cap-foliar", limit("cap-foliar")),
        )
        rated = rated_zones(rows, given, machine, job=self.settings, sources=sources)
        rates = tuple(
            replace(rate, why=f"{one.why}; {one.verdict}")
            for rate, one in zip(rated.prescription.rates, leaves, strict=True)
        )
        soil = finding(
            "TISSUE-SOIL", where=self.record.field.name, what="leaves are fed, the soil is not"
        )
        return replace(
            self.record, cell_need=self.need, settings=settled,
            prescription=replace(rated.prescription, rates=rates),
            findings=tuple(dict.fromkeys((*found, *rated.findings, soil))),
            adapted_from=source, leaf_checks=tuple(leaves),
        )  # fmt: skip


def _zone_findings(zone: Zone, seen: ZoneLeaves, ruled: Ruled) -> list[Finding]:
    where = f"zone {zone.number}"
    if seen.verdict is LeafVerdict.TOXIC:
        return [finding("TISSUE-TOXIC", where=where, what=seen.why)]
    if seen.verdict is LeafVerdict.WARRANTED and ruled.wanted_kg_ha == 0:
        what = f"a pass is warranted, but the {ruled.by} leaves {min(ruled.limits.values()):.2f} kg B/ha"
        return [finding("TISSUE-SPENT", where=where, what=what)]
    return []


def _own_note(job: LeafJob) -> list[Finding]:
    if job.override is None:
        return []
    one = job.override
    what = f"{one.what} {one.value:g} {one.unit}, by {one.person}"
    return [finding("TISSUE-OWN", where="leaves", what=what)]

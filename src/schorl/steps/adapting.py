"""The same boron through another product, machine or controller; more ground kept off.

The contractor's step: agronomy is not done again. No zone gets more boron than it had, whatever is
changed; it gets less where the new machine cannot give as much, or would throw it less evenly.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from schorl.agronomy.tables import limit
from schorl.errors import Refusal, UsageProblem
from schorl.findings import Finding, finding
from schorl.machinery.plan import MachineOutcome, machine_plan
from schorl.machinery.saying import Saying
from schorl.model.prescription import Limit
from schorl.model.record import RunRecord
from schorl.model.settings import Form, Placement, RunSettings
from schorl.model.zones import Zone, ZoneKind, ZoneMap
from schorl.steps.adapted_zones import Change, new_zones, rate_by_number
from schorl.steps.rating import ZoneRows, rated_zones
from schorl.steps.zone_rates import Ruled, chance_limit_kg_ha, part_of, unevenness_of

EARLIER = "earlier pack"  # name of the limit that the old rate is
#: Boron per hectare that rounding between products may lose without being worth a finding.
ROUNDING_KG_HA = 1e-9

__all__ = ["Adapted", "Change", "adapt"]


@dataclass(frozen=True, eq=False, kw_only=True)
class Adapted:
    """The new record, with ``adapted_from`` filled in, and what was noticed on the way."""

    record: RunRecord
    findings: tuple[Finding, ...]


def adapt(record: RunRecord, change: Change, *, source: str) -> Adapted:
    """The prescription of a record through another product, machine, profile or keep-off areas.

    Parameters
    ----------
    record
        As it was prescribed.
    source
        What the new record says it came from (name or checksum of the pack).

    Raises
    ------
    UsageProblem
        Granules for a foliar or fertigation prescription, or a product without a dose (exit 2).
    Refusal
        The machine spreads too unevenly for boron, or the zones cannot meet the profile (exit 4).
    OwnFault
        The zones no longer cover the field exactly (exit 70).
    """
    job = _new_job(record.settings, change)
    _refuse(job)
    zones, found = new_zones(record, change, job)
    rows = _rows(record, zones, job)
    wanted = [_wanted(rows, place, record) for place in range(len(zones.zones))]
    areas = [zone.area_ha for zone in zones.zones]
    machine = machine_plan(
        list(zip(areas, wanted, strict=True)),
        job.product,
        job.machine,
        placement=job.placement,
        units=job.units,
    )
    settled = replace(job, machine=machine.machine)
    rows = replace(rows, settings=settled)
    ruled = [
        _ruled(record, zones.zones[place], wanted[place], machine.boron_kg_ha[place], source=source)
        for place in range(len(areas))
    ]
    rated = rated_zones(rows, ruled, machine, job=job, sources=_kept_sources(record))
    found += [*rated.findings, *_lowered(record, zones, machine)]
    return Adapted(
        record=replace(
            record,
            prescription=rated.prescription,
            settings=settled,
            findings=(*_kept_findings(record), *found),
            adapted_from=source,
        ),
        findings=tuple(found),
    )


def _new_job(settings: RunSettings, change: Change) -> RunSettings:
    zoning = settings.zoning
    return replace(
        settings,
        product=change.product or settings.product,
        machine=change.machine or settings.machine,
        profile=change.profile or settings.profile,
        zoning=replace(
            zoning,
            keep_off=(*zoning.keep_off, *change.keep_off),
            keep_off_m=max(zoning.keep_off_m, change.keep_off_m),
        ),
    )


def _refuse(job: RunSettings) -> None:
    liquid = (Placement.FOLIAR, Placement.FERTIGATION)
    if job.product.form is Form.GRANULE and job.placement in liquid:
        what = f"granules for a {job.placement} prescription"
        raise UsageProblem([finding("ADAPT-FORM", where="product", what=what)])
    if job.machine.spread_cv_pct > limit("spread-cv-most"):
        what = f"the spreader's CV is {job.machine.spread_cv_pct:g} %"
        raise Refusal([finding("RATE-CV", where="machine", what=what)])


def _rows(record: RunRecord, zones: ZoneMap, job: RunSettings) -> ZoneRows:
    return ZoneRows(
        zone_map=zones,
        need=record.cell_need,
        samples=record.samples,
        surfaces=record.surfaces,
        grid=record.grid,
        settings=job,
    )


def _wanted(rows: ZoneRows, place: int, record: RunRecord) -> float:
    """The old rate; lower where a machine that throws less evenly would pass the soil ceiling."""
    zone, job = rows.zone_map.zones[place], rows.settings
    old = rate_by_number(record).get(zone.number)
    if zone.kind is not ZoneKind.ZONE or old is None:
        return 0.0
    chosen = rows.zone_map.labels == place
    if job.machine.spread_cv_pct <= record.settings.machine.spread_cv_pct or not chosen.any():
        return old.boron_kg_ha
    cells = part_of(record.cell_need, chosen)
    return min(old.boron_kg_ha, chance_limit_kg_ha(cells, unevenness=unevenness_of(job)))


def _ruled(record: RunRecord, zone: Zone, wanted: float, given: float, *, source: str) -> Ruled:
    """What ruled a zone before, unless the change did now."""
    old = rate_by_number(record).get(zone.number)
    if zone.kind is not ZoneKind.ZONE or old is None:
        by = {ZoneKind.HOT_SPOT: Limit.HOT_SPOT}.get(zone.kind, Limit.KEEP_OFF)
        return Ruled(
            need_kg_ha=0.0, wanted_kg_ha=0.0, boron_kg_ha=0.0, by=by, limits={str(by): 0.0}
        )
    # Nothing is earlier where a new prescription is only fitted to its controller.
    earlier = {EARLIER: old.boron_kg_ha} if source else {}
    by = old.ruled_by
    if wanted < old.boron_kg_ha - ROUNDING_KG_HA:
        by = Limit.CHANCE_OF_EXCESS
    if given < wanted - ROUNDING_KG_HA:
        by = Limit.MACHINE
    return Ruled(
        need_kg_ha=old.need_kg_ha,
        wanted_kg_ha=wanted,
        boron_kg_ha=given,
        by=by,
        limits={**old.limits_kg_ha, **earlier},
    )


def _lowered(record: RunRecord, zones: ZoneMap, machine: MachineOutcome) -> list[Finding]:
    """What zones get less than before, where the ground is still theirs."""
    rates, less = rate_by_number(record), []
    for zone, given in zip(zones.zones, machine.boron_kg_ha, strict=True):
        if zone.kind is ZoneKind.ZONE and zone.number in rates:
            short = rates[zone.number].boron_kg_ha - given
            if short > ROUNDING_KG_HA:
                less.append((zone.number, short * zone.area_ha))
    if not less:
        return []
    saying = Saying(system=record.settings.units)
    what = f"{saying.boron(sum(kg for _, kg in less))} less than in the pack it came from"
    where = f"zone(s) {', '.join(str(number) for number, _ in less)}"
    return [finding("ADAPT-LOWER", where=where, what=what)]


def _kept_sources(record: RunRecord) -> tuple[Mapping[str, str], ...]:
    """Figures of the old prescription that are not the old machine's."""
    ours = ("machine_limits", "nozzles", "solids", "solubility")
    rows = record.prescription.sources
    return tuple(row for row in rows if row.get("table") not in ours)


def _kept_findings(record: RunRecord) -> tuple[Finding, ...]:
    """Findings of the old record that still hold: not those of its machine and its rates."""
    remade = (
        "MACHINE-",
        "RATE-DOUBLED",
        "RATE-FEW",
        "RATE-BIG",
        "RATE-OVER",
        "RATE-FOLIAR",
        "ADAPT-",
    )
    return tuple(one for one in record.findings if not one.code.startswith(remade))

"""Zones of an adapted prescription: more ground kept off, outlines a controller can take."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
import shapely

from schorl.errors import OwnFault
from schorl.findings import Finding, finding
from schorl.geodesy import area_ha
from schorl.machinery.simplify import fit_zones
from schorl.model.arrays import Counts, Floats
from schorl.model.field import Area
from schorl.model.prescription import ZoneRate
from schorl.model.profile import Profile
from schorl.model.record import RunRecord
from schorl.model.settings import Machine, Product, RunSettings
from schorl.model.zones import Zone, ZoneKind, ZoneMap
from schorl.steps.zoning import NARROW_SHARE
from schorl.zoning.cells import cells_in, narrow_share
from schorl.zoning.cover import HOT, KEEP_OFF, Fixed, cover_faults, cover_field
from schorl.zoning.cutouts import keep_off_area
from schorl.zoning.travel import ground_of, lay_travel_grid


@dataclass(frozen=True, slots=True, kw_only=True)
class Change:
    """What is to change; whatever is left out stays as it was."""

    product: Product | None = None
    machine: Machine | None = None
    profile: Profile | None = None
    keep_off: tuple[Area, ...] = ()
    keep_off_m: float = 0.0


def rate_by_number(record: RunRecord) -> dict[int, ZoneRate]:
    """Rates of a record by the number of their zone."""
    return {rate.zone: rate for rate in record.prescription.rates}


def new_zones(record: RunRecord, change: Change, job: RunSettings) -> tuple[ZoneMap, list[Finding]]:
    """Zones with new keep-off areas cut out, made simple enough for the controller."""
    old = record.prescription.zone_map
    zones = _cut(record, change)
    found: list[Finding] = []
    if zones is not old.zones:
        found.append(_cut_finding(old.zones, zones, record.field.name))
    if change.profile is not None:
        zones, more = _fitted(record, zones, change.profile, job)
        found += more
    if zones is old.zones and change.machine is None:
        return old, found
    gone = sorted({zone.number for zone in old.zones} - {zone.number for zone in zones})
    if gone:
        what = f"zone(s) {', '.join(map(str, gone))}"
        found.append(finding("ADAPT-GONE", where=record.field.name, what=what))
    zone_map = _zone_map(record, zones, job, gone)
    return zone_map, [*found, *_narrow_findings(record, zone_map)]


def _cut(record: RunRecord, change: Change) -> tuple[Zone, ...]:
    """Zones without the new keep-off areas, which join the keep-off zone; the old where none."""
    field, zones = record.field, record.prescription.zone_map.zones
    added = keep_off_area(field.boundary, change.keep_off, strip_m=change.keep_off_m)
    if added is None:
        return zones
    held = {
        kind: [zone.geometry for zone in zones if zone.kind is kind]
        for kind in (ZoneKind.KEEP_OFF, ZoneKind.HOT_SPOT)
    }
    off = shapely.union_all([added.area, *held[ZoneKind.KEEP_OFF]])
    fixed = [Fixed(label=KEEP_OFF, area=off)]
    if held[ZoneKind.HOT_SPOT]:
        fixed.append(Fixed(label=HOT, area=shapely.union_all(held[ZoneKind.HOT_SPOT])))
    free = [zone for zone in zones if zone.kind is ZoneKind.ZONE]

    def label_of(points: Floats) -> Counts:
        labels = np.full(len(points), -1, dtype=np.intp)
        for label, zone in enumerate(free):
            labels[shapely.contains_xy(zone.geometry, points)] = label
        return labels

    lines = [shapely.boundary(zone.geometry) for zone in zones]
    cover = cover_field(field.boundary, lines, label_of, fixed=fixed, small_m2=0.0)
    if cover.faults:
        raise OwnFault([finding("ZONE-COVER", where=field.name, what="; ".join(cover.faults))])
    return _renumbered(record, free, cover.areas)


def _renumbered(
    record: RunRecord, free: Sequence[Zone], areas: Mapping[int, Area]
) -> tuple[Zone, ...]:
    """Zones keep their numbers; a first keep-off zone gets one that was never used."""
    old = record.prescription.zone_map
    numbers: dict[ZoneKind, int] = {
        zone.kind: zone.number for zone in old.zones if zone.kind is not ZoneKind.ZONE
    }
    used = [zone.number for zone in old.zones] + list(old.retired_numbers)
    fresh = max(used) + 1
    kinds = {HOT: ZoneKind.HOT_SPOT, KEEP_OFF: ZoneKind.KEEP_OFF}
    order = [*range(len(free)), HOT, KEEP_OFF]
    result = []
    for label in order:
        if label not in areas:
            continue
        kind = kinds.get(label, ZoneKind.ZONE)
        number = free[label].number if label >= 0 else numbers.get(kind, fresh)
        result.append(_zone(number, kind, areas[label], record.field.crs))
    return tuple(result)


def _zone(number: int, kind: ZoneKind, geometry: Area, crs: str) -> Zone:
    return Zone(number=number, kind=kind, geometry=geometry, area_ha=area_ha(geometry, crs=crs))


def _cut_finding(old: Sequence[Zone], new: Sequence[Zone], where: str) -> Finding:
    off = [
        sum(zone.area_ha for zone in zones if zone.kind is ZoneKind.KEEP_OFF)
        for zones in (old, new)
    ]
    what = f"{off[1] - off[0]:.2f} ha more are kept free of boron, {off[1]:.2f} ha in all"
    return finding("ADAPT-CUT", where=where, what=what)


def _fitted(
    record: RunRecord, zones: tuple[Zone, ...], profile: Profile, job: RunSettings
) -> tuple[tuple[Zone, ...], tuple[Finding, ...]]:
    """Zones within the profile's limits; the same ones where they are already."""
    rates = rate_by_number(record)
    fitted = fit_zones(
        [zone.geometry for zone in zones],
        [rates[zone.number].boron_kg_ha if zone.number in rates else 0.0 for zone in zones],
        [zone.kind is not ZoneKind.ZONE for zone in zones],
        profile,
        most_tolerance_m=job.machine.working_width_m / 2.0,
    )
    if fitted.error.moved_ha == 0.0:
        return zones, fitted.findings
    kept = [
        _zone(zone.number, zone.kind, area, record.field.crs)
        for zone, area in zip(zones, fitted.areas, strict=True)
        if not area.is_empty
    ]
    faults = cover_faults([zone.geometry for zone in kept], record.field.boundary)
    if faults:
        raise OwnFault([finding("ZONE-COVER", where=record.field.name, what="; ".join(faults))])
    return tuple(kept), fitted.findings


def _zone_map(
    record: RunRecord, zones: tuple[Zone, ...], job: RunSettings, gone: Sequence[int]
) -> ZoneMap:
    """The old map with new zones: cells asked afresh, narrow ground by the new machine."""
    old = record.prescription.zone_map
    sure = dict(zip([zone.number for zone in old.zones], old.sureness, strict=False))
    free = [zone for zone in zones if zone.kind is ZoneKind.ZONE]
    labels = cells_in([zone.geometry for zone in zones], record.grid)
    centres = {
        name: tuple(
            float(surface.estimate[labels == place].mean()) if (labels == place).any() else np.nan
            for place in range(len(zones))
        )
        for name, surface in record.surfaces.items()
    }
    return replace(
        old,
        zones=zones,
        labels=labels,
        count=len(free),
        sureness=tuple(sure.get(zone.number, 1.0) for zone in zones) if old.sureness else (),
        too_narrow_ha=_narrow_ha(record, free, job),
        centres=centres,
        retired_numbers=tuple(sorted({*old.retired_numbers, *gone})),
    )


def _narrow_ha(record: RunRecord, free: Sequence[Zone], job: RunSettings) -> float:
    """Ground of treated zones that the new machine is too wide or too slow for."""
    if not free:
        return 0.0
    ground = ground_of(job.machine, least_area_ha=job.zoning.least_area_ha)
    margin = max(ground.width_m, ground.run_m) / 2.0 + 6.0 * record.grid.cell_m
    heading = record.prescription.zone_map.heading_deg % 180.0
    travel = lay_travel_grid(record.grid, heading, margin_m=margin)
    share = narrow_share([zone.geometry for zone in free], travel, ground)
    return share * sum(zone.area_ha for zone in free)


def _narrow_findings(record: RunRecord, zone_map: ZoneMap) -> list[Finding]:
    zone_ha = sum(zone.area_ha for zone in zone_map.zones if zone.kind is ZoneKind.ZONE)
    if zone_map.count < 2 or zone_map.too_narrow_ha <= NARROW_SHARE * zone_ha:
        return []
    what = f"{zone_map.too_narrow_ha:.2f} of {zone_ha:.2f} ha are too narrow for the machine"
    return [finding("ZONE-NARROW", where=record.field.name, what=what)]

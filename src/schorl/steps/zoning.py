"""From need and surfaces to zones: whether to zone at all, how many, and where the lines run."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import shapely

from schorl.errors import OwnFault, Refusal
from schorl.findings import Finding, finding
from schorl.geodesy import area_ha
from schorl.model.arrays import Counts, Flags, Floats
from schorl.model.field import CellGrid, Field
from schorl.model.prescription import CellNeed
from schorl.model.progress import Progress, silent
from schorl.model.samples import SampleSet
from schorl.model.settings import RunSettings
from schorl.model.surface import Surface, Verdict
from schorl.model.zones import Zone, ZoneKind, ZoneMap
from schorl.steps.zone_land import Drawn, Land
from schorl.steps.zone_routes import choose_route
from schorl.zoning.cells import cells_in, narrow_share
from schorl.zoning.clusters import confusion
from schorl.zoning.cover import HOT, KEEP_OFF, Cover, Fixed, cover_field
from schorl.zoning.cutouts import hot_area, keep_off_area
from schorl.zoning.plans import Outcome, judge_of, mean_by
from schorl.zoning.travel import TravelGrid, ground_of, lay_travel_grid, longest_side_deg

STAGE = "zones"
KINDS = {HOT: ZoneKind.HOT_SPOT, KEEP_OFF: ZoneKind.KEEP_OFF}
#: Share of the zones that may be too narrow before it is worth a finding.
NARROW_SHARE = 0.01


@dataclass(frozen=True, eq=False, kw_only=True)
class Zoned:
    """Zones, and what was noticed."""

    zone_map: ZoneMap
    findings: tuple[Finding, ...]


def draw_zones(
    field: Field,
    grid: CellGrid,
    samples: SampleSet,
    surfaces: Mapping[str, Surface],
    need: CellNeed,
    *,
    sample_need_kg_ha: Floats,
    outcome: Outcome,
    settings: RunSettings,
    seed: int,
    progress: Progress = silent,
) -> Zoned:
    """Draw management zones that cover the field exactly once, or say that one rate is right.

    Keep-off areas and hot spots are cut out first. Then zones come from the first of: zones kept
    from an earlier pack, the advisor's own layer, sample zones that cover the field, clusters.

    Parameters
    ----------
    sample_need_kg_ha
        Boron need at the samples, kg B/ha, shape ``(n,)``; NaN where boron is missing.
    outcome
        Rates and expected loss of a plan after every limit and machine step; labels ``(n_cells,)``
        from 0, -1 untreated.
    seed
        Of clustering and permutations; same seed, same zones.

    Raises
    ------
    Refusal
        Nothing is left to treat, or the zones given are those of another field (exit 4).
    OwnFault
        The zones do not cover the field exactly (exit 70).
    """
    progress(STAGE, 0, 3)
    travel, found = _travel_grid(field, grid, settings)
    fixed = _fixed_areas(field, grid, need, settings, travel)
    use = _left(grid, fixed, field)
    land = Land(
        field=field,
        grid=grid,
        samples=samples,
        surfaces=surfaces,
        need=need,
        sample_need_kg_ha=sample_need_kg_ha,
        settings=settings,
        seed=seed,
        travel=travel,
        ground=ground_of(settings.machine, least_area_ha=settings.zoning.least_area_ha),
        fixed=fixed,
        use=use,
        judge=judge_of(outcome, need, use),
    )
    drawn = choose_route(land)
    progress(STAGE, 1, 3)
    cover = cover_field(
        field.boundary,
        drawn.lines,
        drawn.label_of,
        fixed=land.fixed,
        tolerance_m=drawn.tolerance_m,
        small_m2=drawn.small_m2,
    )
    if cover.faults:
        what = "; ".join(cover.faults)
        raise OwnFault([finding("ZONE-COVER", where=field.name, what=what)])
    progress(STAGE, 2, 3)
    zone_map = _zone_map(land, drawn, cover)
    found += [*drawn.findings, *_map_findings(land, zone_map)]
    progress(STAGE, 3, 3)
    return Zoned(zone_map=zone_map, findings=tuple(found))


def _travel_grid(
    field: Field, grid: CellGrid, settings: RunSettings
) -> tuple[TravelGrid, list[Finding]]:
    heading, found = settings.zoning.heading_deg, []
    if heading is None:
        heading = longest_side_deg(field.boundary)
        said = f"direction of travel {heading:.0f} degrees from north, along the longest side"
        found.append(finding("ZONE-HEADING", where=field.name, what=said))
    ground = ground_of(settings.machine, least_area_ha=settings.zoning.least_area_ha)
    margin = max(ground.width_m, ground.run_m) / 2.0 + 6.0 * grid.cell_m
    return lay_travel_grid(grid, heading % 180.0, margin_m=margin), found


def _fixed_areas(
    field: Field, grid: CellGrid, need: CellNeed, settings: RunSettings, travel: TravelGrid
) -> tuple[Fixed, ...]:
    """Keep-off areas first, then patches of hot cells outside them."""
    zoning = settings.zoning
    keep_off = keep_off_area(field.boundary, zoning.keep_off, strip_m=zoning.keep_off_m)
    fixed = () if keep_off is None else (keep_off,)
    ground = ground_of(settings.machine, least_area_ha=zoning.least_area_ha)
    hot = need.hot & _outside(grid, fixed)
    patch = hot_area(hot, grid, travel, ground, boundary=field.boundary)
    return fixed if patch is None else (*fixed, patch)


def _outside(grid: CellGrid, fixed: tuple[Fixed, ...]) -> Flags:
    """Cells whose centre lies in none of some areas, ``(n_cells,)``."""
    free = np.ones(grid.n_cells, dtype=np.bool_)
    for one in fixed:
        shapely.prepare(one.area)
        free &= ~shapely.contains_xy(one.area, grid.centres_m)
    return free


def _left(grid: CellGrid, fixed: tuple[Fixed, ...], field: Field) -> Flags:
    use = _outside(grid, fixed)
    if not use.any():
        said = f"all {field.area_ha:.2f} ha are keep-off or above the soil ceiling"
        raise Refusal([finding("ZONE-NOTHING-LEFT", where=field.name, what=said)])
    return use


# --- from areas to the map --------------------------------------------------------------------


def _zone_map(land: Land, drawn: Drawn, cover: Cover) -> ZoneMap:
    order = list(cover.areas)
    cells = cells_in([cover.areas[label] for label in order], land.grid)
    by_label = np.array(order, dtype=np.intp)[cells]
    order = _ordered(land, order, by_label)
    place = {label: position for position, label in enumerate(order)}
    labels = np.array([place[label] for label in sorted(place)], dtype=np.intp)[
        np.searchsorted(sorted(place), by_label)
    ]
    numbers = _numbers(order, drawn.numbers, land.zoning.retired_numbers)
    zones = tuple(
        Zone(
            number=number,
            kind=KINDS.get(label, ZoneKind.ZONE),
            geometry=cover.areas[label],
            area_ha=area_ha(cover.areas[label], crs=land.field.crs),
        )
        for label, number in zip(order, numbers, strict=True)
    )
    narrow = narrow_share(
        [cover.areas[label] for label in order if label >= 0], land.travel, land.ground
    )
    zone_ha = sum(zone.area_ha for zone in zones if zone.kind is ZoneKind.ZONE)
    doubt, sureness = _sureness(drawn, order, by_label)
    return ZoneMap(
        zones=zones,
        labels=labels,
        count=sum(label >= 0 for label in order),
        reason=drawn.reason,
        origin=drawn.origin,
        heading_deg=land.travel.heading_deg,
        doubt=doubt,
        sureness=sureness,
        structure_p=drawn.structure_p,
        table=drawn.table,
        classes_found=drawn.classes,
        too_narrow_ha=narrow * zone_ha,
        centres=_centres(land, labels, len(order)),
        retired_numbers=land.zoning.retired_numbers,
    )


def _ordered(land: Land, order: list[int], by_label: Counts) -> list[int]:
    """Zones from the least boron upward (most need first where boron is flat), fixed areas last."""
    zones = [label for label in order if label >= 0]
    boron = land.surfaces.get("boron")
    flat = boron is None or boron.verdict in (Verdict.NONE, Verdict.CONSTANT)
    rank = -land.need.need_mean_kg_ha if boron is None or flat else boron.estimate
    means = mean_by(by_label, rank, max(zones, default=0) + 1)
    zones.sort(key=lambda label: (np.nan_to_num(means[label], nan=np.inf), label))
    return zones + [label for label in (HOT, KEEP_OFF) if label in order]


def _numbers(
    order: list[int], given: tuple[int, ...] | None, retired: tuple[int, ...]
) -> list[int]:
    """Given numbers by label; else 1 upward in order. None is used that was retired."""
    used = {*retired, *(given or ())}
    fresh = (number for number in range(1, 10_000) if number not in used)
    if given is None:
        return [next(fresh) for _ in order]
    highest = max(used, default=0)
    extra = iter(range(highest + 1, highest + 1 + len(order)))
    return [given[label] if label >= 0 else next(extra) for label in order]


def _sureness(drawn: Drawn, order: list[int], by_label: Counts) -> tuple[Floats, tuple[float, ...]]:
    """Doubt of each cell and mean membership of each zone; empty where there are no clusters."""
    if drawn.shares is None:
        return np.empty(0), ()
    doubt = np.where(by_label >= 0, confusion(drawn.shares), 0.0)
    sure = [
        float(drawn.shares[by_label == label, label].mean())
        if label >= 0 and (by_label == label).any()
        else 1.0
        for label in order
    ]
    return doubt, tuple(sure)


def _centres(land: Land, labels: Counts, count: int) -> dict[str, tuple[float, ...]]:
    """Mean of each surface in each zone, in the order of the zones."""
    return {
        name: tuple(float(mean) for mean in mean_by(labels, surface.estimate, count))
        for name, surface in land.surfaces.items()
    }


def _map_findings(land: Land, zone_map: ZoneMap) -> list[Finding]:
    where, found = land.field.name, []
    for zone in zone_map.zones:
        if zone.kind is ZoneKind.HOT_SPOT:
            found.append(_area_finding("ZONE-HOT", where, zone, "cut out as a patch"))
        if zone.kind is ZoneKind.KEEP_OFF:
            found.append(_area_finding("ZONE-KEEP-OFF", where, zone, "kept free of boron"))
    if zone_map.origin == "one flat rate" and land.zoning.count != 1:
        found.append(finding("ZONE-FLAT", where=where, what=zone_map.reason))
    zone_ha = sum(zone.area_ha for zone in zone_map.zones if zone.kind is ZoneKind.ZONE)
    if zone_map.count > 1 and zone_map.too_narrow_ha > NARROW_SHARE * zone_ha:
        said = f"{zone_map.too_narrow_ha:.2f} of {zone_ha:.2f} ha are too narrow for the machine"
        found.append(finding("ZONE-NARROW", where=where, what=said))
    if land.field.boundary.area < land.ground.least_m2:
        said = (
            f"{land.field.area_ha:.2f} ha, and the least area of a zone is "
            f"{land.ground.least_m2 / 10_000:.2f} ha"
        )
        found.append(finding("ZONE-SMALL-FIELD", where=where, what=said))
    return found


def _area_finding(code: str, where: str, zone: Zone, how: str) -> Finding:
    return finding(code, where=where, what=f"{zone.area_ha:.2f} ha {how}, zone {zone.number}")

"""Where zones come from: kept, the advisor's own layer, sample zones, clusters, or one flat rate."""

from __future__ import annotations

from collections.abc import Sequence
from typing import cast

import numpy as np
import shapely

from schorl.agronomy.laboratory import lab_relative_sd
from schorl.errors import Refusal
from schorl.findings import Finding, finding
from schorl.model.arrays import Counts, Floats
from schorl.model.field import Area
from schorl.steps.zone_clusters import clustered_zones
from schorl.steps.zone_land import Drawn, Land, count_figures, need_structure_p
from schorl.zoning import reasons
from schorl.zoning.cover import SLIVER_M2
from schorl.zoning.sampled import (
    COVERED,
    DIFFER_P,
    composite_error_mg_kg,
    covered_share,
    differences_p,
    label_in,
)
from schorl.zoning.zone_count import GATE_SAVING

LEAST_COVERED = 0.50
#: Ground of the field in no given zone, or in two, that is worth a finding (share).
GAP_SHARE = 0.001


def choose_route(land: Land) -> Drawn:
    """Draw zones by the first way that the job and the samples open."""
    zoning = land.zoning
    if zoning.kept:
        return given_zones(land, zoning.kept, origin="kept")
    if zoning.own_layer:
        return given_zones(land, zoning.own_layer, origin="own layer")
    if zoning.count == 1:
        return Drawn(
            origin="one flat rate",
            reason=reasons.own_count_reason(1, p=None, saving=0.0, low=0.0, high=0.0),
        )
    share = _composite_share(land)
    wanted = zoning.count in (None, len(land.samples))
    if share >= COVERED and wanted and not zoning.redraw:
        return sampled_zones(land)
    drawn = clustered_zones(land)
    if not 0.0 < share < COVERED or zoning.redraw:
        return drawn
    part = finding(
        "ZONE-SAMPLES-PART",
        where=land.field.name,
        what=f"the sample zones cover {reasons.percent(share)} of the field",
    )
    return drawn.with_findings(part)


def _composite_share(land: Land) -> float:
    areas = [area for area in land.samples.areas if area is not None]
    return covered_share(areas, land.field.boundary) if land.samples.zone_samples else 0.0


def given_zones(land: Land, layer: Sequence[tuple[int, Area]], *, origin: str) -> Drawn:
    """Zones of an earlier pack or of the advisor's own, as they are, made to cover the field.

    Raises
    ------
    Refusal
        They cover less than half of the field (exit 4).
    """
    numbers, areas = _by_number(layer, land.field.boundary)
    found = _layer_findings(land, areas)
    labels = np.where(land.use, _nearest_zone(areas, land.grid.centres_m), -1)
    saving = land.judge.saving(labels)
    if saving < GATE_SAVING:
        found.append(
            finding(
                "ZONE-LAYER-FLAT",
                where=origin,
                what=f"{len(areas)} zones, expected saving {reasons.percent(max(saving, 0.0))}",
            )
        )
    return Drawn(
        origin=origin,
        reason=reasons.given_reason(len(areas), origin, saving=saving),
        lines=[shapely.boundary(area) for area in areas],
        label_of=lambda points: label_in(areas, points),
        numbers=numbers,
        structure_p=need_structure_p(land),
        table=count_figures(land, {1: 0.0, len(areas): saving}),
        findings=tuple(found),
    )


def _by_number(
    layer: Sequence[tuple[int, Area]], boundary: Area
) -> tuple[tuple[int, ...], list[Area]]:
    """Zones that lie on the field, all areas of one number together, in the layer's order."""
    parts: dict[int, list[Area]] = {}
    for number, area in layer:
        valid = shapely.make_valid(area)
        if shapely.intersection(valid, boundary).area > SLIVER_M2:
            parts.setdefault(number, []).append(valid)
    return tuple(parts), [cast("Area", shapely.union_all(some)) for some in parts.values()]


def _layer_findings(land: Land, areas: Sequence[Area]) -> list[Finding]:
    boundary = land.field.boundary
    share = covered_share(areas, boundary)
    where = land.field.name
    if share < LEAST_COVERED:
        said = f"the zones cover {reasons.percent(share)} of the field"
        raise Refusal([finding("ZONE-LAYER-AWAY", where=where, what=said)])
    found = []
    whole = land.field.area_ha
    if 1.0 - share > GAP_SHARE:
        said = f"{(1.0 - share) * whole:.2f} ha lie in no zone"
        found.append(finding("ZONE-LAYER-GAP", where=where, what=said))
    inner = [shapely.intersection(area, boundary).area for area in areas]
    twice = sum(inner) / boundary.area - share
    if twice > GAP_SHARE:
        said = f"{twice * whole:.2f} ha lie in more than one zone"
        found.append(finding("ZONE-LAYER-OVERLAP", where=where, what=said))
    return found


def _nearest_zone(areas: Sequence[Area], points: Floats) -> Counts:
    labels = label_in(areas, points)
    lost = labels < 0
    if lost.any():
        labels[lost] = shapely.STRtree(list(areas)).nearest(shapely.points(points[lost]))
    return labels


def sampled_zones(land: Land) -> Drawn:
    """Sample zones as management zones, or one flat rate where they do not differ enough."""
    areas = [shapely.make_valid(area) for area in land.samples.areas]
    labels = np.where(land.use, _nearest_zone(areas, land.grid.centres_m), -1)
    p = differences_p(land.sample_need_kg_ha, composite_need_error(land, labels))
    saving = land.judge.saving(labels)
    count = len(np.unique(labels[labels >= 0]))
    table = count_figures(land, {1: 0.0, count: saving})
    differs = p <= DIFFER_P
    if not differs or saving < GATE_SAVING:
        reason = reasons.flat_reason(
            p=p,
            differs=differs,
            best=saving,
            samples=len(areas),
            test="difference between the sample zones",
        )
        return Drawn(origin="one flat rate", reason=reason, structure_p=p, table=table)
    return Drawn(
        origin="sample zones",
        reason=reasons.sampled_reason(count, p=p, saving=saving),
        lines=[shapely.boundary(area) for area in areas],
        label_of=lambda points: label_in(areas, points),
        structure_p=p,
        table=table,
    )


def composite_need_error(land: Land, labels: Counts) -> Floats:
    """Standard error (kg B/ha) of each composite's need, from laboratory and cores, ``(n,)``."""
    samples = land.samples
    error = composite_error_mg_kg(
        samples.properties["boron"].values,
        samples.cores,
        lab_relative_sd=lab_relative_sd(samples.campaign),
    )
    mass = np.full(len(samples), float(land.need.mass_need.mean()))
    for place in range(len(samples)):
        own = labels == place
        if own.any():
            mass[place] = land.need.mass_need[own].mean()
    return np.asarray(error * mass)

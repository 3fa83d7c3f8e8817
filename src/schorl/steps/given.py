"""Boron that a field has had already: what lowers the need, and what takes room under the caps."""

from __future__ import annotations

from datetime import date

import numpy as np
import shapely

from schorl.agronomy.tables import limit
from schorl.geodesy import transform_geometry
from schorl.model.arrays import Floats
from schorl.model.field import CellGrid
from schorl.model.record import RunRecord
from schorl.model.samples import SampleSet
from schorl.model.settings import AppliedBoron, RunSettings

G_PER_HA_FROM_MM = 10.0  # 1 mg/L x 1 mm = 10 g/ha, arithmetic


def boron_given(
    samples: SampleSet, grid: CellGrid, settings: RunSettings, clay_pct: Floats
) -> tuple[Floats, Floats]:
    """Boron that lowers the need, and boron that counts against the caps, kg/ha each.

    Given after sampling it lowers the need; given before, the test has seen it, and it only takes
    room under the caps, declining straight to nothing over its residual time. This season's always
    counts in full.
    """
    crop = settings.crop
    credit = np.full(grid.n_cells, crop.manure_boron_kg_ha)
    credit += crop.water_boron_mg_l * crop.irrigation_mm * G_PER_HA_FROM_MM / 1000.0
    used = np.zeros(grid.n_cells)
    for one in crop.applied:
        given = given_per_cell(one, grid)
        sampled = samples.campaign.sampled_on
        after = one.on is not None and sampled is not None and one.on > sampled
        if after:
            credit += given
        used += given if one.this_season else given * _share_left(one, sampled, clay_pct)
    return credit, used


def prescribed_boron(record: RunRecord, *, crs: str, source: str) -> AppliedBoron:
    """What an earlier prescription gave each of its zones, its areas in the system ``crs``."""
    zones, rates = record.prescription.zone_map.zones, record.prescription.rates
    areas = tuple(
        (transform_geometry(zone.geometry, source=record.field.crs, target=crs), rate.boron_kg_ha)
        for zone, rate in zip(zones, rates, strict=True)
    )
    mean = record.prescription.boron_kg / max(sum(rate.area_ha for rate in rates), 1e-9)
    return AppliedBoron(on=None, kg_ha=mean, areas=areas, source=source)


def given_per_cell(one: AppliedBoron, grid: CellGrid) -> Floats:
    """What each cell got of one application, kg/ha; ground that was gone over twice got both."""
    if not one.areas:
        return np.full(grid.n_cells, one.kg_ha)
    tree = shapely.STRtree([area for area, _ in one.areas])
    cell, area = tree.query(shapely.points(grid.centres_m), predicate="within")
    rates = np.array([rate for _, rate in one.areas])
    given = np.zeros(grid.n_cells)
    np.add.at(given, cell, rates[area])
    return given


def _share_left(one: AppliedBoron, sampled: date | None, clay_pct: Floats) -> Floats:
    years = np.where(
        clay_pct < limit("sandy-clay-most"),
        limit("residual-sand"),
        np.where(
            clay_pct <= limit("loam-clay-most"), limit("residual-loam"), limit("residual-clay")
        ),
    )
    if one.on is None or sampled is None:
        return np.ones(len(years))  # no dates: counted in full, the careful side
    passed = max((sampled - one.on).days, 0) / 365.25
    return np.asarray(np.clip(1.0 - passed / years, 0.0, 1.0))

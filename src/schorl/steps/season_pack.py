"""The record of a written pack as one season of a comparison, in the comparison's metres."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import shapely

from schorl.geodesy import transform_geometry, transform_points
from schorl.model.arrays import Floats
from schorl.model.change import SeasonPack, SeasonZone
from schorl.model.field import CellGrid, lay_grid
from schorl.model.record import RunRecord
from schorl.model.samples import SampleSet
from schorl.model.summary import soil_mass


def season_pack(record: RunRecord, *, identity: str, crs: str | None = None) -> SeasonPack:
    """What a comparison needs of a record.

    Parameters
    ----------
    identity
        Checksum of the pack's manifest.
    crs
        Metric system to bring everything into; the record's own where None.
    """
    field, zone_map = record.field, record.prescription.zone_map
    metres = crs or field.crs
    boundary = _moved(field.boundary, field.crs, metres)
    surfaces = {name: one.estimate for name, one in record.surfaces.items()}
    grid, samples = record.grid, record.samples
    if metres != field.crs:
        grid, surfaces = _moved_cells(grid, surfaces, boundary, field.crs, metres)
        samples = _moved_samples(samples, field.crs, metres)
    heading = zone_map.heading_deg
    return SeasonPack(
        field_name=field.name,
        season=record.settings.season,
        crs=metres,
        boundary=boundary,
        grid=grid,
        samples=samples,
        surfaces=surfaces,
        zones=tuple(_zone(record, place, metres) for place in range(len(zone_map.zones))),
        origin=zone_map.origin,
        heading_deg=heading if math.isfinite(heading) else 0.0,
        working_width_m=record.settings.machine.working_width_m,
        crop=record.settings.crop.crop,
        identity=identity,
        retired_numbers=zone_map.retired_numbers,
    )


def _zone(record: RunRecord, place: int, metres: str) -> SeasonZone:
    prescription = record.prescription
    zone, rate = prescription.zone_map.zones[place], prescription.rates[place]
    return SeasonZone(
        number=zone.number,
        kind=str(zone.kind),
        area=_moved(zone.geometry, record.field.crs, metres),
        area_ha=zone.area_ha,
        boron_mg_kg=rate.boron_mean_mg_kg,
        boron_kg_ha=rate.boron_kg_ha,
        product_rate=rate.product_rate,
        product_unit=f"{prescription.unit}/ha",
        soil_mass=soil_mass(record, place),
        limits_kg_ha={
            name: value for name, value in rate.limits_kg_ha.items() if math.isfinite(value)
        },
    )


def _moved(area: Any, source: str, target: str) -> Any:
    if source == target:
        return area
    moved = transform_geometry(area, source=source, target=target)
    return moved if moved.is_valid else shapely.make_valid(moved, method="structure")


def _moved_samples(samples: SampleSet, source: str, target: str) -> SampleSet:
    def points(places: Floats) -> Floats:
        return transform_points(places, source=source, target=target)

    return replace(
        samples,
        east_north_m=points(samples.east_north_m),
        areas=tuple(one if one is None else _moved(one, source, target) for one in samples.areas),
        core_points_m=tuple(one if one is None else points(one) for one in samples.core_points_m),
    )


def _moved_cells(
    grid: CellGrid, surfaces: dict[str, Floats], boundary: Any, source: str, target: str
) -> tuple[CellGrid, dict[str, Floats]]:
    """The same surfaces on cells of another metric system: each takes the nearest value."""
    from scipy.spatial import cKDTree

    moved = transform_points(grid.centres_m, source=source, target=target)
    new = lay_grid(boundary, cell_m=grid.cell_m)
    _, nearest = cKDTree(moved).query(new.centres_m)
    return new, {name: np.asarray(values[nearest]) for name, values in surfaces.items()}

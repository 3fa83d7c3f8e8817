"""Seasons of an invented field, made as values: nothing is read or written."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np
import shapely

from schorl.geodesy import area_ha
from schorl.model.change import SeasonPack, SeasonZone
from schorl.model.field import lay_grid
from schorl.model.samples import Campaign, Measured, SampleSet

CRS, EAST, NORTH = "EPSG:32633", 400_000.0, 5_760_000.0
WIDE_M, HIGH_M = 600.0, 400.0


def measured(values) -> Measured:
    values = np.asarray(values, dtype=float)
    return Measured(values=values, below_limit=np.zeros(len(values), bool))


def sample_set(places, boron, *, on: date, **campaign) -> SampleSet:
    count = len(places)
    return SampleSet(
        ids=tuple(f"S{place + 1}" for place in range(count)),
        east_north_m=np.asarray(places, float),
        properties={"boron": measured(boron)},
        kind=("point",) * count,
        cores=np.full(count, 8),
        campaign=Campaign(
            **({"method": "hot water", "depth_cm": 20.0, "sampled_on": on} | campaign)
        ),
    )


def lattice(count: int = 40) -> np.ndarray:
    """About ``count`` places on a regular grid over the field."""
    across = round(np.sqrt(count * WIDE_M / HIGH_M))
    down = round(count / across)
    east = EAST + (np.arange(across) + 0.5) * WIDE_M / across
    north = NORTH + (np.arange(down) + 0.5) * HIGH_M / down
    return np.column_stack([one.ravel() for one in np.meshgrid(east, north)])


def halves(rates=(1.2, 0.6), *, split: float = 0.5) -> tuple[SeasonZone, ...]:
    """Two zones, west and east of a line."""
    middle = EAST + split * WIDE_M
    boxes = (
        shapely.box(EAST, NORTH, middle, NORTH + HIGH_M),
        shapely.box(middle, NORTH, EAST + WIDE_M, NORTH + HIGH_M),
    )
    return tuple(
        SeasonZone(
            number=place + 1, kind="zone", area=box, area_ha=area_ha(box, crs=CRS),
            boron_mg_kg=0.5, boron_kg_ha=rate, product_rate=10 * rate, product_unit="kg/ha",
            soil_mass=2.8, limits_kg_ha={"need": 1.0, "rate cap": 2.0, "soil ceiling": 9.0},
        )
        for place, (box, rate) in enumerate(zip(boxes, rates, strict=True))
    )  # fmt: skip


def season(boron, *, name="2025", places=None, zones=None, **changes) -> SeasonPack:
    """A season's pack; ``boron`` one value a place."""
    places = lattice() if places is None else places
    boundary = shapely.box(EAST, NORTH, EAST + WIDE_M, NORTH + HIGH_M)
    grid = lay_grid(boundary, cell_m=10.0)
    pack = SeasonPack(
        field_name="Invented", season=name, crs=CRS, boundary=boundary, grid=grid,
        samples=sample_set(places, boron, on=date(int(name[:4]), 9, 1)),
        surfaces={"boron": np.full(grid.n_cells, float(np.mean(boron)))},
        zones=zones or halves(), origin="own layer", heading_deg=90.0, working_width_m=24.0,
        crop="sugar beet", identity=f"pack of {name}",
    )  # fmt: skip
    return replace(pack, **changes)

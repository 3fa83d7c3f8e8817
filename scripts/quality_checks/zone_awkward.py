"""Zones on awkward fields: exact cover, validity, and ground too narrow for the machine.

Eleven kinds of boundary, a smooth surface with 30 % of short-range noise on it, two to five zones
asked for, any direction of travel, a few hot cells, and on every third field a keep-off strip. Areas
are summed here from the vertices (shoelace formula), not by the library that drew the zones.
"""

from __future__ import annotations

import time
from collections import defaultdict
from dataclasses import replace
from typing import Any

import numpy as np
import shapely
import shapely.affinity

from quality_checks.zone_simulation import (
    CRS,
    EAST,
    MASS,
    NORTH,
    outcome_of,
    settings,
    smooth_field,
)
from schorl.geodesy import area_ha
from schorl.model.field import Area, Field, lay_grid
from schorl.model.prescription import CellNeed
from schorl.model.samples import Campaign, Measured, SampleSet
from schorl.model.settings import RunSettings
from schorl.model.surface import Surface, Verdict
from schorl.model.zones import ZoneKind, ZoneMap
from schorl.steps.zoning import draw_zones
from schorl.zoning.cells import narrow_share
from schorl.zoning.travel import TravelGrid, axes_of, ground_of

CELL_M = 5.0


def _rough(random: np.random.Generator, radius: float) -> Area:
    angle = np.linspace(0.0, 2.0 * np.pi, 90, endpoint=False)
    reach = radius * (1.0 + 0.15 * random.standard_normal(90))
    return shapely.Polygon(np.column_stack([reach * np.cos(angle), reach * np.sin(angle)])).buffer(
        0
    )


def _holes(random: np.random.Generator) -> Area:
    ponds = [
        shapely.Point(*random.uniform(60, 340, 2)).buffer(random.uniform(2, 30)) for _ in range(4)
    ]
    return shapely.box(0, 0, 420, 400).difference(shapely.union_all(ponds))


def _bend(random: np.random.Generator) -> Area:
    way = np.cumsum(random.uniform([60, -80], [160, 120], (5, 2)), axis=0)
    return shapely.LineString(way).buffer(random.uniform(30, 70))


def _touching(random: np.random.Generator) -> Area:
    at = random.uniform(80, 220)
    hole = [(0, at), (random.uniform(20, 90), at + 25), (random.uniform(20, 90), at - 25)]
    return shapely.Polygon([(0, 0), (400, 0), (400, 300), (0, 300)], [hole])


def _parts(random: np.random.Generator) -> Area:
    return shapely.union_all(
        [
            shapely.box(0, 0, 200, 200),
            shapely.box(230, 10, 400, 230),
            shapely.box(420, 0, 440, 30),
            shapely.box(0, 230, random.uniform(60, 180), 300),
        ]
    )


def _neck(random: np.random.Generator) -> Area:
    return shapely.union_all(
        [
            shapely.box(0, 0, 180, 200),
            shapely.box(170, 90, 300, 90 + random.uniform(3, 30)),
            shapely.box(290, 0, 460, 200),
        ]
    )


KINDS = {
    "plain": lambda random: shapely.box(0, 0, random.uniform(250, 500), random.uniform(200, 400)),
    "triangle": lambda random: shapely.Polygon([(0, 0), (500, random.uniform(0, 60)), (40, 330)]),
    "narrow": lambda random: shapely.box(0, 0, 900, random.uniform(8, 22)),
    "tiny": lambda random: shapely.box(0, 0, random.uniform(4, 60), random.uniform(4, 60)),
    "parts": _parts,
    "neck": _neck,
    "holes": _holes,
    "hole touching the ring": _touching,
    "bend": _bend,
    "rough": lambda random: _rough(random, 190.0),
    "edges on cell edges": lambda random: shapely.box(0, 0, 60 * CELL_M, 50 * CELL_M),
}


def awkward_report(fields: int, *, seed: int) -> None:
    """Draw zones on so many fields and print what holds."""
    rows = defaultdict(list)
    for place in range(fields):
        kind = list(KINDS)[place % len(KINDS)]
        rows[kind].append(_figures(kind, place, np.random.default_rng([seed, place])))
    print(f"\n{fields} awkward fields")
    print(
        f"{'kind':<24}{'fields':>7}{'valid':>7}{'worst m2':>10}{'area sum':>10}{'narrow':>9}{'s':>7}"
    )
    for kind, figures in [*rows.items(), ("all", [row for some in rows.values() for row in some])]:
        valid, apart, total, narrow, area, seconds = np.array(figures, float).T
        print(
            f"{kind:<24}{len(figures):>7}{int(valid.sum()):>7}{apart.max():>10.1e}"
            f"{total.max():>10.1e}{(narrow * area).sum() / area.sum():>9.2%}{np.median(seconds):>7.2f}"
        )
    every = np.array([row for some in rows.values() for row in some], float)
    print(
        f"fields with more than 1 % too narrow: {int((every[:, 3] > 0.01).sum())}; "
        f"the largest share {every[:, 3].max():.2%}"
    )


def _figures(kind: str, place: int, random: np.random.Generator) -> tuple[float, ...]:
    boundary = shapely.affinity.rotate(KINDS[kind](random), random.uniform(0, 180), origin=(0, 0))
    if kind == "edges on cell edges":
        boundary = KINDS[kind](random)
    boundary = shapely.transform(boundary, lambda points: points + np.array([EAST, NORTH]))
    one = _inputs(boundary, random)
    zoning = {"count": int(random.integers(2, 6)), "least_area_ha": 0.25}
    if place % 3 == 0:
        west, south, _, _ = boundary.bounds
        bank = shapely.LineString([(west - 50, south + 90), (west + 900, south + 20)]).buffer(9)
        zoning["keep_off"] = (bank,)
    started = time.perf_counter()
    job = settings(**zoning)
    zoned = draw_zones(**one, settings=_turned(job, random), seed=0)
    seconds = time.perf_counter() - started
    return (*_checked(zoned.zone_map, one["field"]), seconds)


def _turned(job: RunSettings, random: np.random.Generator) -> RunSettings:
    heading = None if random.random() < 0.5 else float(random.uniform(0, 180))
    return replace(job, zoning=replace(job.zoning, heading_deg=heading))


def _checked(zone_map: ZoneMap, field: Field) -> tuple[float, float, float, float, float]:
    shapes = [zone.geometry for zone in zone_map.zones]
    apart = shapely.symmetric_difference(shapely.union_all(shapes), field.boundary).area
    valid = (
        shapely.coverage_is_valid(shapes)
        and all(shape.is_valid for shape in shapes)
        and apart < 0.1
    )
    total = abs(sum(_shoelace(shape) for shape in shapes) - _shoelace(field.boundary))
    zones = [zone for zone in zone_map.zones if zone.kind is ZoneKind.ZONE]
    area = sum(zone.area_ha for zone in zones)
    narrow = _narrow([zone.geometry for zone in zones], zone_map.heading_deg)
    return float(valid), apart, total, narrow if len(zones) > 1 else 0.0, area


def _narrow(shapes: list[Area], heading_deg: float) -> float:
    """Share of the zones in which no rectangle of exactly 24 by 20 m fits, by cells of 1 m."""
    job = settings()
    ground = ground_of(job.machine, least_area_ha=0.25)
    turned = shapely.get_coordinates(shapes) @ axes_of(heading_deg).T
    low, high = np.floor(turned.min(axis=0)) - 40.0, np.ceil(turned.max(axis=0)) + 40.0
    rows, cols = (high - low).astype(int)
    fine = TravelGrid(
        heading_deg=heading_deg,
        cell_m=1.0,
        across0_m=low[0],
        along0_m=low[1],
        source=np.zeros((rows, cols), np.intp),
    )
    return narrow_share(shapes, fine, ground)


def _shoelace(shape: Area) -> float:
    """Area from the vertices, holes taken off."""
    area = 0.0
    for part in shapely.get_parts(shape):
        for sign, ring in [(1.0, part.exterior), *((-1.0, hole) for hole in part.interiors)]:
            east, north = (shapely.get_coordinates(ring) - [EAST, NORTH]).T
            area += sign * abs(float(east[:-1] @ north[1:] - east[1:] @ north[:-1])) / 2.0
    return area


def _inputs(boundary: Area, random: np.random.Generator) -> dict[str, Any]:
    field = Field(
        name="awkward",
        boundary=boundary,
        crs=CRS,
        epsg=32633,
        area_ha=area_ha(boundary, crs=CRS),
    )
    grid = lay_grid(boundary, cell_m=CELL_M)
    rough = smooth_field(random, grid.rows, grid.cols, 160.0, gaussian=True)[grid.inside]
    rough = rough + np.sqrt(0.3) * random.standard_normal(len(rough))
    boron = 0.6 + 0.12 * rough
    ones = np.ones(grid.n_cells)
    surface = Surface(
        name="boron",
        unit="mg/kg",
        grid=grid,
        estimate=boron,
        location=boron,
        map_sd=0.06 * ones,
        decision_sd=0.08 * ones,
        transform="identity",
        verdict=Verdict.PATTERN,
    )
    need = CellNeed(
        need_mean_kg_ha=MASS * (0.8 - boron),
        need_sd_kg_ha=MASS * 0.08 * ones,
        boron_mg_kg=boron,
        boron_location=boron,
        boron_sd=0.08 * ones,
        boron_log=False,
        target_mg_kg=0.8 * ones,
        ceiling_mg_kg=2.0 * ones,
        mass_need=MASS * ones,
        mass_ceiling=MASS * ones,
        rate_cap_kg_ha=3.0 * ones,
        hot=(boron > np.quantile(boron, 0.997)) & (grid.n_cells > 500),
    )
    at = random.integers(0, grid.n_cells, 20)
    samples = SampleSet(
        ids=tuple(f"S{i + 1}" for i in range(20)),
        east_north_m=grid.centres_m[at],
        properties={"boron": Measured(values=boron[at], below_limit=np.zeros(20, bool))},
        kind=("point",) * 20,
        cores=np.full(20, 8),
        campaign=Campaign(method="hot water", depth_cm=20.0),
    )
    return {
        "field": field,
        "grid": grid,
        "samples": samples,
        "surfaces": {"boron": surface},
        "need": need,
        "sample_need_kg_ha": need.need_mean_kg_ha[at],
        "outcome": outcome_of(need, field.area_ha / grid.n_cells),
    }

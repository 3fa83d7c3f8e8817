"""Fields for testing zones: surfaces made by formula, a need, and a stand-in for the rates.

Invented data. The stand-in knows a rate cap and nothing else of machines and limits.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
import shapely

from schorl.geodesy import area_ha
from schorl.model.field import CellGrid, Field, lay_grid
from schorl.model.prescription import CellNeed, PlanOutcome
from schorl.model.samples import Campaign, Measured, SampleSet
from schorl.model.settings import (
    CropSettings,
    Form,
    Machine,
    Placement,
    Product,
    RunSettings,
    ZoneSettings,
)
from schorl.model.surface import Surface, Verdict
from schorl.steps.zoning import Zoned, draw_zones
from schorl.zoning.loss import plan_loss

CRS = "EPSG:32633"
EAST, NORTH = 400_000.0, 5_760_000.0
CAP_KG_HA = 3.0
MASS = 2.6  # kg B/ha for 1 mg/kg


def shifted(geometry):
    """A geometry drawn about the origin, moved to where fields lie."""
    return shapely.transform(geometry, lambda points: points + np.array([EAST, NORTH]))


def field_of(boundary, name: str = "test field") -> Field:
    return Field(
        name=name, boundary=boundary, crs=CRS, epsg=32633, area_ha=area_ha(boundary, crs=CRS)
    )


def settings_of(*, width_m: float = 24.0, speed_km_h: float = 8.0, **zoning) -> RunSettings:
    return RunSettings(
        field_name="test field",
        season="2026",
        crop=CropSettings(crop="sugar beet"),
        product=Product(form=Form.GRANULE, boron_pct=10.0),
        placement=Placement.BROADCAST,
        machine=Machine(working_width_m=width_m, speed_km_h=speed_km_h),
        zoning=ZoneSettings(**zoning),
    )


def surface_of(name, grid, values, *, sd: float = 0.1, verdict=Verdict.PATTERN) -> Surface:
    return Surface(
        name=name,
        unit="mg/kg" if name == "boron" else "%",
        grid=grid,
        estimate=values,
        location=values,
        map_sd=np.full(grid.n_cells, sd),
        decision_sd=np.full(grid.n_cells, 1.2 * sd),
        transform="identity",
        verdict=verdict,
    )


@dataclass(frozen=True, eq=False, kw_only=True)
class Trial:
    """Everything `draw_zones` takes."""

    field: Field
    grid: CellGrid
    samples: SampleSet
    surfaces: dict[str, Surface]
    need: CellNeed
    sample_need: np.ndarray
    settings: RunSettings = field(default_factory=settings_of)

    def outcome(self, labels) -> PlanOutcome:
        rates, loss = plan_loss(
            labels, self.need.need_mean_kg_ha, self.need.need_sd_kg_ha, most=CAP_KG_HA
        )
        return PlanOutcome(rates_kg_ha=rates, loss_kg=loss * self.field.area_ha / self.grid.n_cells)

    def draw(self, *, seed: int = 0) -> Zoned:
        return draw_zones(
            self.field,
            self.grid,
            self.samples,
            self.surfaces,
            self.need,
            sample_need_kg_ha=self.sample_need,
            outcome=self.outcome,
            settings=self.settings,
            seed=seed,
        )

    def with_zoning(self, **changes) -> Trial:
        zoning = replace(self.settings.zoning, **changes)
        return replace(self, settings=replace(self.settings, zoning=zoning))

    def with_hot(self, hot) -> Trial:
        return replace(self, need=replace(self.need, hot=hot))


def samples_at(places, boron, clay, *, areas=None, cores: int = 8) -> SampleSet:
    count = len(places)
    nothing = np.zeros(count, bool)
    return SampleSet(
        ids=tuple(f"S{i + 1}" for i in range(count)),
        east_north_m=places,
        properties={
            "boron": Measured(values=boron, below_limit=nothing),
            "clay": Measured(values=clay, below_limit=nothing),
        },
        kind=("zone" if areas else "point",) * count,
        cores=np.full(count, cores),
        areas=tuple(areas) if areas else (),
        campaign=Campaign(method="hot water", depth_cm=20.0),
    )


def need_of(boron, clay, *, sd: float = 0.3) -> CellNeed:
    ones = np.ones(len(boron))
    return CellNeed(
        need_mean_kg_ha=MASS * (0.8 + 0.01 * (clay - 22.0) - boron),
        need_sd_kg_ha=sd * ones,
        boron_mg_kg=boron,
        boron_location=boron,
        boron_sd=0.1 * ones,
        boron_log=False,
        target_mg_kg=0.8 * ones,
        ceiling_mg_kg=2.0 * ones,
        mass_need=MASS * ones,
        mass_ceiling=1.4 * ones,
        rate_cap_kg_ha=CAP_KG_HA * ones,
        hot=np.zeros(len(boron), bool),
    )


def trial(
    boundary=None, *, cell_m: float = 6.0, boron_of=None, clay_of=None, n: int = 60, seed: int = 1
) -> Trial:
    """A field of 500 by 400 m, or any other, with boron and clay by formulas of share east, north.

    By default boron steps from 0.3 to 0.7 mg/kg half-way and clay is a gentle slope.
    """
    boundary = shifted(shapely.box(0, 0, 500, 400)) if boundary is None else boundary
    boron_of = boron_of or (lambda east, north: 0.3 + 0.4 * (east > 0.5))
    clay_of = clay_of or (lambda east, north: 18.0 + 4.0 * north)
    land = field_of(boundary)
    grid = lay_grid(boundary, cell_m=cell_m)
    west, south, east, north = boundary.bounds

    def shares(points):
        return (points[:, 0] - west) / (east - west), (points[:, 1] - south) / (north - south)

    random = np.random.default_rng(seed)
    places = random.uniform([west, south], [east, north], (60 * n, 2))
    places = places[shapely.contains_xy(boundary, places)][:n]
    noise = random.normal(0.0, 0.04, len(places))
    boron_here = np.asarray(boron_of(*shares(grid.centres_m)), float)
    clay_here = np.asarray(clay_of(*shares(grid.centres_m)), float)
    boron_there = np.asarray(boron_of(*shares(places)), float) + noise
    clay_there = np.asarray(clay_of(*shares(places)), float) + 10.0 * noise[::-1]
    return Trial(
        field=land,
        grid=grid,
        samples=samples_at(places, boron_there, clay_there),
        surfaces={
            "boron": surface_of("boron", grid, boron_here),
            "clay": surface_of("clay", grid, clay_here, sd=1.0),
        },
        need=need_of(boron_here, clay_here),
        sample_need=MASS * (0.8 + 0.01 * (clay_there - 22.0) - boron_there),
    )

"""A whole run made by hand: two rate zones, a hot spot and a keep-off strip in a field with a hole.

Invented data. Values are consistent with each other (totals are sums of area times rate), so that
writers, readers and the report can be tested without the steps before them.
"""

from __future__ import annotations

import numpy as np
import shapely
from shapely.geometry import Polygon, box

from schorl.findings import finding
from schorl.geodesy import area_ha
from schorl.model.field import Field, lay_grid
from schorl.model.prescription import (
    CellNeed,
    Limit,
    MachinePlan,
    MachinePoint,
    Outlook,
    PlanValue,
    Prescription,
    ZoneRate,
)
from schorl.model.record import Recognition, RunRecord
from schorl.model.samples import Campaign, Measured, SampleSet
from schorl.model.settings import CropSettings, Form, Machine, Placement, Product, RunSettings
from schorl.model.surface import Audit, LeaveOneOut, Surface, Verdict
from schorl.model.variogram import VariogramFit
from schorl.model.zones import CountFigure, Zone, ZoneKind, ZoneMap

CRS = "EPSG:32633"
ORIGIN = np.array([400_000.0, 5_760_000.0])
BORON_PCT = 10.0


def example_field() -> Field:
    """A 30 ha field, not quite square, with a pond."""
    east, north = ORIGIN
    outer = [(0, 0), (600, 20), (610, 480), (300, 520), (-10, 500)]
    pond = [(380, 300), (430, 300), (430, 340), (380, 345)]
    boundary = Polygon(
        [(east + x, north + y) for x, y in outer], [[(east + x, north + y) for x, y in pond]]
    )
    return Field(
        name="Home & <Away>",
        boundary=boundary,
        crs=CRS,
        epsg=32633,
        area_ha=area_ha(boundary, crs=CRS),
        source="boundary.geojson",
    )


def example_samples(field: Field, count: int = 40) -> SampleSet:
    """Samples on a jittered grid inside the field."""
    random = np.random.default_rng(3)
    west, south, east, north = field.boundary.bounds
    side = int(np.ceil(np.sqrt(count * 1.4)))
    grid_east, grid_north = np.meshgrid(
        np.linspace(west + 30, east - 30, side), np.linspace(south + 30, north - 30, side)
    )
    points = np.column_stack([grid_east.ravel(), grid_north.ravel()])
    points += random.uniform(-10, 10, points.shape)
    inside = shapely.contains_xy(field.boundary, points[:, 0], points[:, 1])
    points = points[inside][:count]
    share = (points[:, 0] - west) / (east - west)
    boron = 0.45 + 0.5 * share + random.normal(0, 0.05, len(points))
    below = np.zeros(len(points), bool)
    below[0] = True
    nothing = np.zeros(len(points), bool)
    clay = 12 + 18 * share + random.normal(0, 1, len(points))
    organic = 2.0 + 1.0 * share + random.normal(0, 0.1, len(points))
    return SampleSet(
        ids=tuple(f"H{i + 1:02d}" for i in range(len(points))),
        east_north_m=points,
        properties={
            "boron": Measured(values=boron, below_limit=below, column="B (ppm)", unit_read="ppm"),
            "clay": Measured(values=clay, below_limit=nothing, column="Clay %", unit_read="%"),
            "organic_matter": Measured(
                values=organic, below_limit=nothing, column="OM %", unit_read="%"
            ),
        },
        kind=("point",) * len(points),
        cores=np.full(len(points), 8),
        campaign=Campaign(method="hot water", depth_cm=20.0, laboratory="north bench"),
        source="soil.csv",
    )


def _surface(name: str, unit: str, samples: SampleSet, grid, values: np.ndarray) -> Surface:
    observed = samples.properties[name].values
    spread = float(np.std(observed))
    return Surface(
        name=name,
        unit=unit,
        grid=grid,
        estimate=values,
        location=values,
        map_sd=np.full(grid.n_cells, 0.25 * spread),
        decision_sd=np.full(grid.n_cells, 0.35 * spread),
        transform="identity",
        verdict=Verdict.PATTERN,
        fit=VariogramFit(
            family="spherical",
            nugget=0.1 * spread**2,
            partial_sill=0.9 * spread**2,
            practical_range_m=260.0,
            mean=float(np.mean(observed)),
            log_likelihood=-12.3,
            verdict="pattern found",
        ),
        quality=LeaveOneOut(
            observed=observed,
            predicted=observed + 0.1 * spread,
            z=np.full(len(observed), 0.3),
            rmse=0.1 * spread,
            skill=0.62,
            msdr=0.98,
            coverage_90=0.91,
        ),
        audit=Audit(by="PyKrige", cells=64, largest_difference=3e-14),
        reason="leave-one-out explains 62 % of the variance",
    )


def _zones(field: Field) -> tuple[Zone, ...]:
    west, south, east, north = field.boundary.bounds
    strip = shapely.intersection(field.boundary, box(west, south, east, south + 40))
    spot = box(west + 400, south + 150, west + 460, south + 200)
    rest = field.boundary.difference(shapely.union_all([strip, spot]))
    middle = west + 320.0
    parts = [
        (1, ZoneKind.ZONE, rest.intersection(box(west, south, middle, north))),
        (2, ZoneKind.ZONE, rest.intersection(box(middle, south, east, north))),
        (3, ZoneKind.HOT_SPOT, spot),
        (4, ZoneKind.KEEP_OFF, strip),
    ]
    # Shared nodes on both sides of every edge, as a valid coverage needs.
    noded = shapely.node(shapely.union_all([p.boundary for _, _, p in parts]))
    faces = list(shapely.polygonize([noded]).geoms)
    zones = []
    for number, kind, part in parts:
        own = [face for face in faces if part.contains(face.representative_point())]
        geometry = shapely.union_all(own)
        zones.append(
            Zone(number=number, kind=kind, geometry=geometry, area_ha=area_ha(geometry, crs=CRS))
        )
    return tuple(zones)


def _rate(zone: Zone, boron: float, kg_ha: float, ruled: Limit) -> ZoneRate:
    return ZoneRate(
        zone=zone.number,
        area_ha=zone.area_ha,
        boron_mean_mg_kg=boron,
        boron_sd_mg_kg=0.04,
        clay_pct=16.0 if zone.number == 1 else 26.0,
        organic_matter_pct=2.4,
        target_mg_kg=0.95,
        ceiling_mg_kg=2.0,
        need_kg_ha=kg_ha * 1.2,
        boron_kg_ha=kg_ha,
        product_rate=kg_ha * 100 / BORON_PCT,
        ruled_by=ruled,
        limits_kg_ha={"rate cap": 2.24, "absolute limit": 3.36, "chance of excess": 2.9},
        outlook=Outlook(
            short_before=0.93,
            short_after=0.41,
            over_before=0.0,
            over_after=0.02,
            short_before_ha=0.93 * zone.area_ha,
            short_after_ha=0.41 * zone.area_ha,
            over_before_ha=0.0,
            over_after_ha=0.02 * zone.area_ha,
            loss_kg=1.5,
        ),
        doubled_pass_mg_kg=boron + 2 * kg_ha / 1.4,
        samples=18,
        why=f"boron {boron:.2f} ± 0.04 mg/kg against a target of 0.95: {kg_ha:.2f} kg B/ha",
    )


def example_record() -> RunRecord:
    """A complete, consistent run record."""
    field = example_field()
    grid = lay_grid(field.boundary, cell_m=6.0)
    samples = example_samples(field)
    west, _, east, _ = field.boundary.bounds
    share = (grid.centres_m[:, 0] - west) / (east - west)
    boron = 0.45 + 0.5 * share
    surfaces = {
        "boron": _surface("boron", "mg/kg", samples, grid, boron),
        "organic_matter": _surface("organic_matter", "%", samples, grid, 2.0 + share),
        "clay": _surface("clay", "%", samples, grid, 12 + 18 * share),
    }
    zones = _zones(field)
    labels = np.zeros(grid.n_cells, dtype=np.intp)
    for place, zone in enumerate(zones):
        labels[shapely.contains_xy(zone.geometry, grid.centres_m)] = place
    zone_map = ZoneMap(
        zones=zones,
        labels=labels,
        count=2,
        reason="two zones: the need is structured (p = 0.002) and two zones save 31 % of the loss",
        origin="clusters",
        heading_deg=0.0,
        doubt=np.clip(1 - np.abs(share - 0.52) * 3, 0, 1),
        sureness=(0.91, 0.88, 1.0, 1.0),
        structure_p=0.002,
        table=tuple(
            CountFigure(count=k, saving=s, saving_low=s - 0.12, saving_high=s + 0.12)
            for k, s in ((1, 0.0), (2, 0.31), (3, 0.34), (4, 0.35), (5, 0.35))
        ),
        classes_found=1,
        too_narrow_ha=0.1,
    )
    rates = (
        _rate(zones[0], 0.58, 1.20, Limit.NEED),
        _rate(zones[1], 0.84, 0.40, Limit.CHANCE_OF_EXCESS),
        _rate(zones[2], 2.30, 0.0, Limit.HOT_SPOT),
        _rate(zones[3], 0.70, 0.0, Limit.KEEP_OFF),
    )
    boron_kg = sum(rate.area_ha * rate.boron_kg_ha for rate in rates)
    ones = np.ones(grid.n_cells)
    need = CellNeed(
        need_mean_kg_ha=(0.95 - boron) * 2.8,
        need_sd_kg_ha=0.2 * ones,
        boron_mg_kg=boron,
        boron_location=boron,
        boron_sd=0.05 * ones,
        boron_log=False,
        target_mg_kg=0.95 * ones,
        ceiling_mg_kg=2.0 * ones,
        mass_need=2.8 * ones,
        mass_ceiling=1.4 * ones,
        rate_cap_kg_ha=2.24 * ones,
        hot=np.zeros(grid.n_cells, bool),
    )
    points = tuple(
        MachinePoint(
            name=name,
            product_rate=rate,
            figures={"feed_kg_min": rate * 10 * 24 / 600, "catch_g": rate * 24 * 100 / 10},
        )
        for name, rate in (("lowest", 4.0), ("mean", 8.1), ("highest", 12.0))
    )
    prescription = Prescription(
        zone_map=zone_map,
        rates=rates,
        boron_kg=boron_kg,
        product_total=boron_kg * 100 / BORON_PCT,
        unit="kg",
        boron_pct=BORON_PCT,
        boron_g_l=None,
        field_outlook=rates[0].outlook,
        value=(
            PlanValue(plan="zones", boron_kg=boron_kg, loss_kg=6.9, short_ha=9, over_ha=0.3),
            PlanValue(plan="best flat rate", boron_kg=20.0, loss_kg=10.0, short_ha=12, over_ha=1),
            PlanValue(plan="rate per cell", boron_kg=boron_kg, loss_kg=6.5, short_ha=8, over_ha=0),
        ),
        machine=MachinePlan(
            points=points,
            loads=0.4,
            per_load=600.0,
            order=250.0,
            facts={"look_ahead_m": 5.6, "bags": 10.0},
            advice=("Load with gloves, goggles and a dust mask.",),
        ),
        saving=(0.19, 0.31, 0.43),
        advice=("Zone 1 is sandy and low in organic matter: two passes lose less to leaching.",),
        sources=(
            {
                "key": "crops: sugar beet",
                "table": "crops",
                "row": "sugar beet",
                "value": "2.24",
                "unit": "kg B/ha",
                "status": "proposal",
                "source": "table of crops",
                "address": "",
            },
        ),
    )
    return RunRecord(
        field=field,
        grid=grid,
        samples=samples,
        surfaces=surfaces,
        cell_need=need,
        prescription=prescription,
        settings=RunSettings(
            field_name=field.name,
            season="2026",
            crop=CropSettings(crop="sugar beet", next_crop="wheat"),
            product=Product(form=Form.GRANULE, name="granular borate", boron_pct=BORON_PCT),
            placement=Placement.BROADCAST,
            machine=Machine(working_width_m=24.0, hopper_kg=600.0),
        ),
        findings=(finding("JOB-DEFAULT", where="job", what="working width 24 m was assumed"),),
        recognised=(
            Recognition(
                what="boron", where="soil.csv, column `B (ppm)`", how="available boron in mg/kg"
            ),
        ),
        assumptions=("working width 24 m", "speed 10 km/h"),
        inputs_sha256={"boundary.geojson": "0" * 64, "soil.csv": "1" * 64},
        versions={"schorl": "0.1.0"},
    )

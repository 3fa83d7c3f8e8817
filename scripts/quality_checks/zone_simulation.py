"""Simulated fields with known truth, for judging decisions about zones.

A field is 500 by 400 m (20 ha) in cells of 10 m. Boron, organic matter and clay are made in units
of the within-zone standard deviation of a sample: 0.5 of variance is spatially correlated
(exponential, practical range 120 m), 0.2 is real variation from cell to cell, and the laboratory
adds 0.3 to each sample. Zones come on top:

Z2-Z5  2 to 5 true zones (the largest of k smooth random fields, each at least 8 % of the field);
       their means lie `sep` units apart at the nearest pair, in a random direction of the three
       variables
N1     no spatial structure at all: all variance from cell to cell
N2     a smooth gradient without classes (Gaussian covariance, range 300 m, SD of 1.5 units)
N3     zones in organic matter and clay only

One unit is 0.1 mg/kg boron about 0.6, 0.25 % organic matter about 2.5, 2 % clay about 22. Target
boron is 0.80 + 0.010 (clay - 22) - 0.03 (organic matter - 2.5) mg/kg, 2.6 kg B/ha change the test
by 1 mg/kg, at most 3 kg/ha are given. The rate model is an assumption made to score decisions, not
agronomy.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

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
from schorl.model.surface import Surface
from schorl.zoning.loss import plan_loss
from schorl.zoning.plans import Outcome

KINDS = ("Z2", "Z3", "Z4", "Z5", "N1", "N2", "N3")
SEPARATIONS = (2.0, 3.0, 4.0)
CRS, EAST, NORTH = "EPSG:32633", 400_000.0, 5_760_000.0
WIDE_M, HIGH_M, CELL_M = 500.0, 400.0, 10.0
CORRELATED, CELL_SCALE, LABORATORY = 0.5, 0.2, 0.3
LEVEL = {"boron": 0.6, "organic_matter": 2.5, "clay": 22.0}
UNIT = {"boron": 0.1, "organic_matter": 0.25, "clay": 2.0}
MASS, CAP_KG_HA = 2.6, 3.0


@dataclass(frozen=True, eq=False, kw_only=True)
class Simulated:
    """One field: the truth on the cells and what the samples say."""

    kind: str
    separation: float
    field: Field
    grid: CellGrid
    truth: dict[str, np.ndarray]
    classes: np.ndarray
    samples: SampleSet

    @property
    def true_need(self) -> np.ndarray:
        """Boron that each cell really needs, kg B/ha."""
        return need_kg_ha(**self.truth)


def need_kg_ha(*, boron: np.ndarray, organic_matter: np.ndarray, clay: np.ndarray) -> np.ndarray:
    """Need by the rate model above."""
    target = 0.80 + 0.010 * (clay - 22.0) - 0.03 * (organic_matter - 2.5)
    return MASS * (target - boron)


def smooth_field(
    random: np.random.Generator, rows: int, cols: int, range_m: float, *, gaussian: bool
) -> np.ndarray:
    """A stationary random field with variance 1 by circulant embedding on a torus twice as wide."""
    tall, broad = 2 * rows, 2 * cols
    down = np.minimum(np.arange(tall), tall - np.arange(tall))[:, None] * CELL_M
    along = np.minimum(np.arange(broad), broad - np.arange(broad))[None, :] * CELL_M
    u = 3.0 * np.hypot(down, along) / range_m
    covariance = np.exp(-(u**2) / 3.0) if gaussian else np.exp(-u)
    power = np.maximum(np.fft.fft2(covariance).real, 0.0)
    noise = random.normal(size=(tall, broad)) + 1j * random.normal(size=(tall, broad))
    made = np.fft.fft2(np.sqrt(power / power.size) * noise).real
    return made[:rows, :cols]


def _classes(random: np.random.Generator, rows: int, cols: int, count: int) -> np.ndarray:
    while True:
        fields = [smooth_field(random, rows, cols, 350.0, gaussian=True) for _ in range(count)]
        classes = np.argmax(fields, axis=0)
        if np.bincount(classes.ravel(), minlength=count).min() >= 0.08 * classes.size:
            return classes


def _class_means(random: np.random.Generator, count: int, separation: float) -> np.ndarray:
    """Means (count, 3) whose nearest pair lies ``separation`` apart, none three times as far."""
    while True:
        means = random.normal(size=(count, 3))
        apart = np.linalg.norm(means[:, None] - means[None, :], axis=2)[np.triu_indices(count, 1)]
        if apart.max() < 3.0 * apart.min():
            means *= separation / apart.min()
            return means - means.mean(axis=0)


def _truth(
    random: np.random.Generator, kind: str, separation: float, rows: int, cols: int
) -> tuple[np.ndarray, np.ndarray]:
    """Values in units, (3, rows, cols), and the true classes."""
    classes = np.zeros((rows, cols), int)
    if kind == "N1":
        sd = np.sqrt(CORRELATED + CELL_SCALE)
        return random.normal(0.0, sd, (3, rows, cols)), classes
    own = [smooth_field(random, rows, cols, 120.0, gaussian=False) for _ in range(3)]
    units = np.sqrt(CORRELATED) * np.array(own)
    units += random.normal(0.0, np.sqrt(CELL_SCALE), units.shape)
    if kind == "N2":
        slopes = [smooth_field(random, rows, cols, 300.0, gaussian=True) for _ in range(3)]
        return units + 1.5 * np.array(slopes), classes
    count = int(kind[1]) if kind[0] == "Z" else int(random.integers(2, 6))
    classes = _classes(random, rows, cols, count)
    means = _class_means(random, count, separation)
    if kind == "N3":
        means[:, 0] = 0.0
    return units + means.T[:, classes], classes


def _jittered(random: np.random.Generator, count: int) -> np.ndarray:
    """Sample places on a jittered grid of about ``count`` points, at cell centres."""
    cols = round(np.sqrt(count * WIDE_M / HIGH_M))
    rows = max(round(count / cols), 1)
    east = (np.arange(cols) + 0.5) * WIDE_M / cols
    north = (np.arange(rows) + 0.5) * HIGH_M / rows
    places = np.stack(np.meshgrid(east, north), axis=-1).reshape(-1, 2)
    step = np.array([WIDE_M / cols, HIGH_M / rows])
    places = places + random.uniform(-0.3, 0.3, places.shape) * step
    return np.clip(np.floor(places / CELL_M) * CELL_M + CELL_M / 2, CELL_M / 2, None)


def simulate(kind: str, separation: float, count: int, *, seed: list[int]) -> Simulated:
    """One field of a kind with about ``count`` samples; same seed, same field."""
    random = np.random.default_rng(seed)
    boundary = shapely.box(EAST, NORTH, EAST + WIDE_M, NORTH + HIGH_M)
    field = Field(
        name=f"{kind} {separation:g}",
        boundary=boundary,
        crs=CRS,
        epsg=32633,
        area_ha=area_ha(boundary, crs=CRS),
    )
    grid = lay_grid(boundary, cell_m=CELL_M)
    units, classes = _truth(random, kind, separation, grid.rows, grid.cols)
    places = _jittered(random, count) + np.array([EAST, NORTH])
    at = grid.cell_of(places)
    truth, measured = {}, {}
    for name, layer in zip(LEVEL, units, strict=True):
        flat = layer[grid.inside]
        truth[name] = np.maximum(LEVEL[name] + UNIT[name] * flat, 0.02)
        told = flat[at] + random.normal(0.0, np.sqrt(LABORATORY), len(at))
        values = np.maximum(LEVEL[name] + UNIT[name] * told, 0.02)
        measured[name] = Measured(values=values, below_limit=np.zeros(len(at), bool))
    samples = SampleSet(
        ids=tuple(f"S{i + 1}" for i in range(len(at))),
        east_north_m=places,
        properties=measured,
        kind=("point",) * len(at),
        cores=np.full(len(at), 8),
        campaign=Campaign(
            method="hot water",
            depth_cm=20.0,
            lab_relative_sd=np.sqrt(LABORATORY) * UNIT["boron"] / LEVEL["boron"],
        ),
    )
    return Simulated(
        kind=kind,
        separation=separation,
        field=field,
        grid=grid,
        truth=truth,
        classes=classes[grid.inside],
        samples=samples,
    )


def sample_need(samples: SampleSet) -> np.ndarray:
    """Need at the samples, kg B/ha."""
    return need_kg_ha(**{name: samples.properties[name].values for name in LEVEL})


def cell_need(surfaces: Mapping[str, Surface]) -> CellNeed:
    """Need of the cells and its standard deviation, from three surfaces."""
    estimate = {name: surfaces[name].estimate for name in LEVEL}
    sd = {
        name: surfaces[name].decision_sd
        * (surfaces[name].estimate if surfaces[name].transform == "log" else 1.0)
        for name in LEVEL
    }
    ones = np.ones(len(estimate["boron"]))
    variance = sd["boron"] ** 2 + (0.010 * sd["clay"]) ** 2 + (0.03 * sd["organic_matter"]) ** 2
    return CellNeed(
        need_mean_kg_ha=need_kg_ha(**estimate),
        need_sd_kg_ha=MASS * np.sqrt(variance),
        boron_mg_kg=estimate["boron"],
        boron_location=estimate["boron"],
        boron_sd=sd["boron"],
        boron_log=False,
        target_mg_kg=0.8 * ones,
        ceiling_mg_kg=3.0 * ones,
        mass_need=MASS * ones,
        mass_ceiling=MASS * ones,
        rate_cap_kg_ha=CAP_KG_HA * ones,
        hot=np.zeros(len(ones), bool),
    )


def outcome_of(need: CellNeed, cell_ha: float) -> Outcome:
    """The plan's outcome as zoning asks for it: closed-form loss under the cap."""

    def outcome(labels: np.ndarray) -> PlanOutcome:
        rates, loss = plan_loss(labels, need.need_mean_kg_ha, need.need_sd_kg_ha, most=CAP_KG_HA)
        return PlanOutcome(rates_kg_ha=rates, loss_kg=loss * cell_ha)

    return outcome


def true_loss(labels: np.ndarray, need: CellNeed, true_need: np.ndarray) -> float:
    """What a plan really loses, kg B short plus in excess over all cells."""
    rates, _ = plan_loss(labels, need.need_mean_kg_ha, need.need_sd_kg_ha, most=CAP_KG_HA)
    return float(np.abs(rates[labels] - true_need).sum())


def settings(**zoning: Any) -> RunSettings:
    """A job with a 24 m spreader at 8 km/h."""
    return RunSettings(
        field_name="simulated",
        season="none",
        crop=CropSettings(crop="sugar beet"),
        product=Product(form=Form.GRANULE, boron_pct=10.0),
        placement=Placement.BROADCAST,
        machine=Machine(working_width_m=24.0, speed_km_h=8.0),
        zoning=ZoneSettings(heading_deg=90.0, **zoning),
    )

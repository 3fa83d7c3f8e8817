"""What the engine gives on a soil that is the same everywhere."""

from __future__ import annotations

from datetime import date

import numpy as np

from schorl.model.field import CellGrid
from schorl.model.samples import PROPERTY_UNITS, Campaign, Measured, SampleSet
from schorl.model.settings import (
    CropSettings,
    Form,
    Machine,
    Override,
    Placement,
    Product,
    RunSettings,
)
from schorl.model.surface import Surface, Verdict
from schorl.steps.assessing import assess_cells
from schorl.steps.zone_rates import Ruled, ruled_rate

GRID = CellGrid(west_m=0.0, north_m=20.0, cell_m=10.0, inside=np.ones((2, 2), bool))
CELLS = GRID.n_cells


def flat(name: str, value: float, sd: float = 0.0) -> Surface:
    """A property that is the same in every cell."""
    values = np.full(CELLS, float(value))
    return Surface(
        name=name, unit=PROPERTY_UNITS[name], grid=GRID, estimate=values, location=values,
        map_sd=np.full(CELLS, sd), decision_sd=np.full(CELLS, sd), transform="identity",
        verdict=Verdict.CONSTANT,
    )  # fmt: skip


def sampled(
    boron_mg_kg: float, *, properties=None, constants=None, areas=(), **campaign
) -> SampleSet:
    """A sample in the middle of every cell; further properties and constants by name."""
    known = {"boron": np.full(CELLS, float(boron_mg_kg))}
    known |= {name: np.full(CELLS, float(value)) for name, value in (properties or {}).items()}
    said = {"method": "hot water", "depth_cm": 20.0, "sampled_on": date(2026, 3, 1)} | campaign
    return SampleSet(
        ids=tuple(f"S{place}" for place in range(CELLS)), east_north_m=GRID.centres_m,
        properties={
            name: Measured(values=values, below_limit=np.zeros(CELLS, bool))
            for name, values in known.items()
        },
        kind=("point",) * CELLS, cores=np.full(CELLS, 8), campaign=Campaign(**said), areas=areas,
        constants=constants or {},
    )  # fmt: skip


def job(crop: str, *, placement: str = "broadcast", overrides=(), machine=None, **of_crop):
    """Settings for a crop; further keys are those of its settings."""
    leaves = placement == "foliar"
    product = (
        Product(form=Form.SPRAY, boron_g_l=150.0)
        if leaves
        else Product(form=Form.GRANULE, boron_pct=10.0)
    )
    return RunSettings(
        field_name="one soil", season="none",
        crop=CropSettings(**({"crop": crop, "next_crop": crop} | of_crop)), product=product,
        placement=Placement(placement), machine=machine or Machine(), overrides=tuple(overrides),
    )  # fmt: skip


def surfaces_of(boron_mg_kg: float, **others: float) -> dict[str, Surface]:
    """Boron with a little doubt, and other properties without."""
    made = {name: flat(name, value) for name, value in others.items()}
    return {"boron": flat("boron", boron_mg_kg, 0.03)} | made


def ruled(
    crop: str,
    boron_mg_kg: float,
    *,
    clay_pct: float = 15.0,
    organic_matter_pct: float = 2.0,
    placement: str = "broadcast",
    incorporation_cm: float | None = None,
    next_crop: str | None = None,
    overrides: tuple[Override, ...] = (),
) -> Ruled:
    """The rate of such a soil under every limit, without steps of a machine."""
    settings = job(
        crop, placement=placement, overrides=overrides, incorporation_cm=incorporation_cm,
        next_crop=next_crop or crop,
    )  # fmt: skip
    surfaces = surfaces_of(boron_mg_kg, clay=clay_pct, organic_matter=organic_matter_pct)
    constants = {"clay": clay_pct, "organic_matter": organic_matter_pct}
    samples = sampled(boron_mg_kg, constants=constants)
    return ruled_rate(assess_cells(samples, surfaces, GRID, settings).need, settings)

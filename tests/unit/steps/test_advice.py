"""Advice beside the rates: who is told what, and zone by zone."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import shapely

from schorl.agronomy.tables import limit
from schorl.model.samples import Measured
from schorl.model.zones import Zone, ZoneKind, ZoneMap
from schorl.steps.advice import advice_for, leached_share
from schorl.steps.assessing import assess_cells
from schorl.steps.rating import prescribe_rates
from support.one_soil import CELLS, GRID, job, sampled, surfaces_of

SOIL = {"clay": 15.0, "organic_matter": 2.0}
EAST_CELLS = (GRID.centres_m[:, 0] > 10).astype(int)
HALVES = ZoneMap(
    zones=tuple(
        Zone(number=place + 1, kind=ZoneKind.ZONE, geometry=area, area_ha=0.02)
        for place, area in enumerate((shapely.box(0, 0, 10, 20), shapely.box(10, 0, 20, 20)))
    ),
    labels=EAST_CELLS, count=2, reason="two halves", origin="own layer", heading_deg=0.0,
)  # fmt: skip


def said(*, soil=SOIL, settings=None, boron=0.4, **measured) -> str:
    """Advice for two zones, west and east; properties as (west, east)."""
    settings = settings or job("sugar beet")
    samples, surfaces = sampled(boron, constants=soil), surfaces_of(boron, **soil)
    more = {
        name: Measured(
            values=np.where(EAST_CELLS, pair[1], pair[0]), below_limit=np.zeros(CELLS, bool)
        )
        for name, pair in measured.items()
    }
    samples = replace(samples, properties={**samples.properties, **more})
    assessed = assess_cells(samples, surfaces, GRID, settings)
    rated = prescribe_rates(HALVES, assessed, samples, surfaces, GRID, settings)
    return "\n".join(rated.prescription.advice)


def test_a_zone_of_high_ph_is_named_though_the_fields_mean_is_not_high():
    told = said(ph=(6.0, 7.9))
    assert "Zone 2: pH 7.9, boron is held strongly" in told
    assert "Zone 1" not in told
    both = said(ph=(6.8, 7.9))
    assert "Zone 1: pH 6.8, uptake of boron falls above 6.5." in both
    assert "Zones 1, 2: pH 7.6 to 7.9, boron is held" in said(ph=(7.6, 7.9))
    assert "pH" not in said(ph=(6.4, 6.5))
    assert "pH 7.9" in said(ph=(np.nan, 7.9))


def test_low_total_boron_is_told_by_zone_and_marked():
    told = said(total_boron=(1.2, 4.0))
    assert "Zone 1: total boron 1.2 mg/kg is low (common practice, no source)" in told
    assert "Zone 2" not in told
    assert "total boron" not in said(total_boron=(2.0, 4.0))


def test_sand_low_in_organic_matter_is_offered_a_carrier():
    assert "Zones 1, 2: sand low" in said(soil={"clay": 6.0, "organic_matter": 1.5})
    assert "sand low" not in said(soil={"clay": 6.0, "organic_matter": 2.0})
    assert "sand low" not in said(soil={"clay": 10.0, "organic_matter": 1.5})
    # Nothing is given, so nothing is carried.
    assert "sand low" not in said(soil={"clay": 6.0, "organic_matter": 1.5}, boron=1.6)


def test_drainage_lime_drought_and_calcium():
    wet = said(
        settings=job("sugar beet", drainage_mm=200.0), soil={"clay": 6.0, "organic_matter": 3.0}
    )
    assert "Zone 1: about 56 % of the boron may leave with 200 mm of drainage (a guide)" in wet
    assert "two passes" in wet
    assert "drainage" not in said(settings=job("sugar beet", drainage_mm=20.0))
    assert "Lime within the last year" in said(settings=job("sugar beet", lime_last_year=True))
    assert "Without soil water" in said(settings=job("sugar beet", drought=True))
    assert "Calcium was measured" in said(calcium=(900.0, 1200.0))
    assert said() == ""


@pytest.mark.parametrize(
    ("drainage", "clay", "share"),
    [
        (200.0, 6.0, 0.56),  # (0.2 - 0.06 + 0.14) / 0.5
        (0.0, 6.0, 0.0),
        (10.0, 40.0, 0.0),  # never below nothing
        (2000.0, 5.0, 1.0),  # never more than was given
    ],
)
def test_leached_share_follows_the_published_line(drainage, clay, share):
    """Loss (mg/kg of 0.5 applied) = 0.001 drainage - 0.01 clay + 0.14: Dhassi et al. 2019."""
    assert leached_share(drainage, clay) == pytest.approx(share)
    assert limit("leach-applied") == 0.5


def test_thresholds_and_samples_outside_all_zones():
    assert "boron is held strongly" not in said(ph=(7.5, 7.5))
    one_mm = leached_share(1.0, 10.0)  # (0.001 - 0.1 + 0.14) / 0.5
    assert one_mm == pytest.approx(0.082)
    samples = sampled(0.4, constants=SOIL)
    ph = Measured(values=np.array([9.0, 9.0, 6.0, 6.0]), below_limit=np.zeros(CELLS, bool))
    samples = replace(samples, properties={**samples.properties, "ph": ph})
    told = advice_for(samples, np.array([0, 0, 1, 1]), (), job("sugar beet"))
    assert told == ()

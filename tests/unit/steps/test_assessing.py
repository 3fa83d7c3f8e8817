"""From soil and settings to need: mass, credits, caps left, hot ground, and what is refused."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np
import pytest
import shapely

from schorl.agronomy.soil_mass import bulk_density_g_cm3
from schorl.errors import Refusal
from schorl.model.settings import AppliedBoron, Interpretation, Machine
from schorl.steps.assessing import assess_cells
from schorl.steps.given import boron_given, given_per_cell
from support.one_soil import CELLS, GRID, job, sampled, surfaces_of

SOIL = {"clay": 15.0, "organic_matter": 2.0}


def assessed(boron=0.5, samples=None, soil=SOIL, crop="sugar beet", **settings):
    samples = samples or sampled(boron, constants=soil)
    return assess_cells(samples, surfaces_of(boron, **soil), GRID, job(crop, **settings))


def refused(*args, **kwargs):
    with pytest.raises(Refusal) as problem:
        assessed(*args, **kwargs)
    return {one.code for one in problem.value.findings}


def test_need_is_target_less_test_times_the_mass_of_soil():
    found = assessed()
    need = found.need
    density = bulk_density_g_cm3((100 - 15) / 2, 15.0, 2.0)
    assert need.mass_need == pytest.approx(0.1 * density * 20)
    assert need.mass_ceiling == pytest.approx(0.1 * density * 10)
    assert need.need_mean_kg_ha == pytest.approx((need.target_mg_kg - 0.5) * need.mass_need)
    assert "RATE-SAND" in {one.code for one in found.findings}
    deeper = assessed(samples=sampled(0.5, constants=SOIL, depth_cm=30.0))
    assert deeper.need.mass_need == pytest.approx(need.mass_need)  # at most 20 cm
    mixed = assessed(incorporation_cm=20.0)
    assert mixed.need.mass_ceiling == pytest.approx(2 * need.mass_ceiling)
    stony = assessed(stones_pct=25.0)
    assert stony.need.mass_need == pytest.approx(0.75 * need.mass_need)


@pytest.mark.parametrize(
    ("settings", "samples", "sand"),
    [
        ({"sand_pct": 60.0}, None, 60.0),
        ({}, sampled(0.5, constants=SOIL | {"sand": 55.0}), 55.0),
        ({}, sampled(0.5, constants=SOIL, properties={"sand": 50.0}), 50.0),
    ],
)
def test_sand_as_said_or_measured(settings, samples, sand):
    found = assessed(samples=samples, **settings)
    density = bulk_density_g_cm3(sand, 15.0, 2.0)
    assert found.need.mass_need == pytest.approx(2.0 * density)
    assert "RATE-SAND" not in {one.code for one in found.findings}


def test_density_measured_or_of_a_litre_of_soil():
    assert assessed(bulk_density_g_cm3=1.1).need.mass_need == pytest.approx(2.2)
    own = {"target_mg_kg": 0.8, "ceiling_mg_kg": 2.0, "interpretation": Interpretation.OWN}
    litre = assessed(samples=sampled(0.5, constants=SOIL, per_volume=True), **own)
    assert litre.need.mass_need == pytest.approx(2.0)


def test_a_declared_texture_stands_in_for_clay():
    found = assessed(soil={"organic_matter": 2.0}, texture="clay loam")
    assert any(row["table"] == "textures" for row in found.sources)


def test_everything_that_stops_an_honest_rate_is_said_together():
    bad = sampled(0.5, method="mehlich-3")
    codes = refused(samples=bad, soil={}, machine=Machine(spread_cv_pct=25.0))
    assert {"RATE-METHOD", "RATE-CLAY", "RATE-OM", "RATE-CV"} <= codes
    assert "RATE-VOLUME" in refused(samples=sampled(0.5, constants=SOIL, per_volume=True))
    assert refused(soil={"clay": 15.0, "organic_matter": 30.0}) == {"RATE-ORGANIC"}
    assert "RATE-METHOD" in refused(samples=sampled(0.5, constants=SOIL, method="tea leaves"))


def test_targets_stay_under_the_ceiling():
    found = assessed(interpretation=Interpretation.TEXTURE_LINE, next_crop="snap bean",
                     soil={"clay": 50.0, "organic_matter": 2.0})  # fmt: skip
    assert found.need.target_mg_kg == pytest.approx(1.4 - 0.5)
    assert "RATE-CEILING-TARGET" in {one.code for one in found.findings}
    assert "RATE-PERENNIAL" in {one.code for one in assessed(crop="apple").findings}


def test_own_targets_and_organic_ceilings_are_used_where_they_hold():
    rows = (("", 0.0, 20.0, 0.7), ("", 20.0, 101.0, 0.9))
    own = assessed(interpretation=Interpretation.OWN, own_targets=rows)
    assert own.need.target_mg_kg == pytest.approx(0.7)
    peat = {"clay": 15.0, "organic_matter": 30.0}
    organic = assessed(soil=peat, bulk_density_g_cm3=0.5)
    assert organic.need.ceiling_mg_kg == pytest.approx(3.0)
    assert any(row["row"] == "organic" for row in organic.sources)


def test_water_and_manure_lower_the_need():
    plain = assessed().need.need_mean_kg_ha
    fed = assessed(water_boron_mg_l=0.5, irrigation_mm=100.0, manure_boron_kg_ha=0.1)
    # 0.5 mg/L x 100 mm = 0.5 kg/ha
    assert plain - fed.need.need_mean_kg_ha == pytest.approx(0.6)


@pytest.mark.parametrize(
    ("on", "this_season", "clay", "credit", "used"),
    [
        (date(2026, 4, 1), False, 15.0, 0.5, 0.5),  # after sampling: credited, and room taken
        (date(2025, 3, 1), False, 15.0, 0.0, 0.25),  # a year of two in loam
        (date(2025, 3, 1), False, 5.0, 0.0, 0.0),  # a year of one in sand
        (date(2025, 3, 1), False, 45.0, 0.0, 0.375),  # a year of four in clay
        (date(2020, 3, 1), False, 45.0, 0.0, 0.0),
        (date(2025, 3, 1), True, 15.0, 0.0, 0.5),  # this season's counts in full
        (None, False, 15.0, 0.0, 0.5),  # no date: the careful side
    ],
)
def test_boron_given_before_and_after(on, this_season, clay, credit, used):
    one = AppliedBoron(on=on, kg_ha=0.5, this_season=this_season)
    found = boron_given(sampled(0.5), GRID, job("sugar beet", applied=(one,)), np.full(CELLS, clay))
    assert found[0] == pytest.approx(credit, abs=1e-3)
    assert found[1] == pytest.approx(used, abs=1e-3)
    undated = sampled(0.5, sampled_on=None)
    assert boron_given(undated, GRID, job("sugar beet", applied=(one,)), np.full(CELLS, clay))[
        1
    ] == pytest.approx(0.5)


def test_boron_given_takes_room_under_the_cap_and_areas_add_up():
    west = shapely.box(0, 0, 10, 20)
    twice = AppliedBoron(on=None, kg_ha=0.0, areas=((west, 1.0), (west, 0.5)), this_season=True)
    per_cell = given_per_cell(twice, GRID)
    in_west = GRID.centres_m[:, 0] < 10
    assert per_cell[in_west] == pytest.approx(1.5)
    assert not per_cell[~in_west].any()
    cap = assessed(applied=(twice,)).need.rate_cap_kg_ha
    assert cap[in_west] == pytest.approx(2.24 - 1.5)
    assert cap[~in_west] == pytest.approx(2.24)
    much = AppliedBoron(on=None, kg_ha=9.0, this_season=True)
    assert assessed(applied=(much,)).need.rate_cap_kg_ha == pytest.approx(0.0)


def test_ground_near_a_sample_at_its_ceiling_is_hot_unless_it_was_confirmed():
    samples = sampled(0.5, constants=SOIL)
    boron = samples.properties["boron"]
    values = np.array(boron.values)
    values[0] = 3.0
    high = replace(samples, properties={"boron": replace(boron, values=values)})
    narrow = Machine(working_width_m=4.0)
    hot = assessed(samples=high, machine=narrow).need.hot
    assert hot[0]
    assert hot.sum() < CELLS
    assert assessed(samples=high, machine=Machine(working_width_m=60.0)).need.hot.all()
    assert not assessed(samples=high, machine=narrow, confirmed_high=("S0",)).need.hot.any()
    below = replace(boron, values=values, below_limit=np.arange(CELLS) == 0)
    unknown = replace(samples, properties={"boron": below})
    assert not assessed(samples=unknown, machine=narrow).need.hot.any()
    composite = replace(high, areas=(shapely.box(0, 0, 20, 10), *(None,) * (CELLS - 1)))
    south = GRID.centres_m[:, 1] < 10
    assert (assessed(samples=composite, machine=narrow).need.hot == south).all()
    assert assessed(boron=2.6).need.hot.all()  # likely over everywhere

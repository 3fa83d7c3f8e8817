"""From soil and settings to need: mass, credits, caps left, hot ground, and what is refused."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np
import pytest
import shapely

from schorl.agronomy.crops import removal_g_t
from schorl.agronomy.soil_mass import bulk_density_g_cm3
from schorl.errors import Refusal, UsageProblem
from schorl.model.settings import AppliedBoron, Interpretation, Machine
from schorl.model.surface import Verdict
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


def soil_surfaces(boron, clay, *, clay_sd=0.0, log=False, spread=0.1, matter=2.0):
    """Boron and clay cell by cell, both found as patterns."""
    made = surfaces_of(0.5, clay=15.0, organic_matter=matter)
    boron, clay = np.broadcast_to(boron, CELLS) + 0.0, np.broadcast_to(clay, CELLS) + 0.0
    location = np.log(boron) - 0.5 * spread**2 if log else boron
    made["boron"] = replace(
        made["boron"], estimate=boron, location=location, decision_sd=np.full(CELLS, spread),
        transform="log" if log else "identity", verdict=Verdict.PATTERN,
    )  # fmt: skip
    made["clay"] = replace(
        made["clay"], estimate=clay, location=clay, decision_sd=np.full(CELLS, clay_sd),
        verdict=Verdict.PATTERN,
    )  # fmt: skip
    return made


def of_cells(boron, clay, *, samples=None, crop="sugar beet", of_crop=None, **how):
    settings = job(crop, **(of_crop or {}))
    samples = samples or sampled(0.5, constants=SOIL)
    return assess_cells(samples, soil_surfaces(boron, clay, **how), GRID, settings)


LINE = {"interpretation": Interpretation.TEXTURE_LINE}


@pytest.mark.parametrize(("clay", "clay_sd"), [(15.0, 4.0), (30.0, 6.0)])
def test_doubt_of_clay_is_doubt_of_the_target(clay, clay_sd):
    """The texture line's target moves with clay: both doubts together, as independent ones."""
    plain = of_cells(0.5, clay, of_crop=LINE).need
    more = of_cells(0.5, clay + clay_sd, of_crop=LINE).need
    moved = more.target_mg_kg - plain.target_mg_kg
    assert (moved > 0.02).all()
    found = of_cells(0.5, clay, clay_sd=clay_sd, of_crop=LINE).need
    assert found.boron_sd == pytest.approx(np.hypot(0.1, moved))
    assert found.need_sd_kg_ha == pytest.approx(found.boron_sd * found.mass_need)
    logged = of_cells(0.5, clay, clay_sd=clay_sd, log=True, of_crop=LINE).need
    assert logged.boron_sd == pytest.approx(np.hypot(0.1, moved / 0.5))
    in_unit = 0.5 * np.sqrt(np.exp(logged.boron_sd**2) - 1.0)
    assert logged.need_sd_kg_ha == pytest.approx(in_unit * logged.mass_need)
    assert logged.boron_log
    assert plain.boron_sd == pytest.approx(0.1)


def test_no_soil_has_more_clay_than_100_percent():
    whole = of_cells(0.5, 100.0, of_crop=LINE).need.target_mg_kg
    most = of_cells(0.5, 97.0, of_crop=LINE).need.target_mg_kg
    found = of_cells(0.5, 97.0, clay_sd=30.0, of_crop=LINE).need
    assert found.boron_sd == pytest.approx(np.hypot(0.1, whole - most))


def test_need_at_samples_is_that_of_their_own_test():
    samples = sampled(0.5, constants=SOIL)
    boron = samples.properties["boron"]
    values = np.array([0.3, 0.5, 0.7, np.nan])
    samples = replace(samples, properties={"boron": replace(boron, values=values)})
    found = of_cells(0.5, [10.0, 15.0, 20.0, 25.0], samples=samples)
    need = found.need
    assert found.sample_need_kg_ha[:3] == pytest.approx(
        ((need.target_mg_kg - values) * need.mass_need)[:3]
    )
    assert np.isnan(found.sample_need_kg_ha[3])
    assert not need.hot.any()  # what is not known is not high


def test_maintenance_goes_only_to_ground_below_its_target():
    plain = of_cells([0.4, 0.5, 3.0, 0.5], 15.0)
    target = float(plain.need.target_mg_kg[0])
    boron = [0.4, target, 1.2, 0.5]
    bare = of_cells(boron, 15.0)
    kept = of_cells(boron, 15.0, of_crop={"maintenance_yield_t_ha": 60.0})
    grams = removal_g_t("sugar beet")
    assert grams is not None
    more = kept.need.need_mean_kg_ha - bare.need.need_mean_kg_ha
    assert more == pytest.approx([grams * 0.06, 0.0, 0.0, grams * 0.06])
    (row,) = [one for one in kept.sources if one["table"] == "removal"]
    assert float(row["value"]) == pytest.approx(grams)
    assert not [one for one in bare.sources if one["table"] == "removal"]
    with pytest.raises(UsageProblem) as problem:
        assessed(crop="lentil", maintenance_yield_t_ha=2.0)
    assert problem.value.findings[0].code == "RATE-REMOVAL"


def test_ground_as_likely_over_its_ceiling_as_not_is_hot_before_any_boron():
    ceiling = float(of_cells(0.5, 15.0).need.ceiling_mg_kg[0])
    found = of_cells([ceiling, ceiling - 0.05, ceiling + 0.05, 0.5], 15.0)
    assert found.need.hot.tolist() == [True, False, True, False]


def test_how_far_a_high_sample_reaches():
    ceiling = float(assessed().need.ceiling_mg_kg[0])
    samples = sampled(0.5, constants=SOIL)
    values = np.array(samples.properties["boron"].values)
    values[0] = ceiling  # at the ceiling is high
    high = replace(
        samples, properties={"boron": replace(samples.properties["boron"], values=values)}
    )
    for width, cells in ((4.0, 3), (20.0, 3), (27.0, 3), (29.0, 4)):  # cells are 10 m, 14.1 across
        hot = assessed(samples=high, machine=Machine(working_width_m=width)).need.hot
        assert hot.sum() == cells, width
    west = replace(high, areas=(shapely.box(0, 0, 10, 20), *(None,) * (CELLS - 1)))
    hot = assessed(samples=west, machine=Machine(working_width_m=4.0)).need.hot
    assert (hot == (GRID.centres_m[:, 0] < 10)).all()


def test_limits_are_reached_and_not_only_passed():
    assert not assessed(machine=Machine(spread_cv_pct=20.0)).need.hot.any()
    assert "RATE-CV" in refused(machine=Machine(spread_cv_pct=20.1))
    assert assessed(soil={"clay": 15.0, "organic_matter": 15.0}).need.mass_need.all()
    mixed = surfaces_of(0.5, clay=15.0, organic_matter=2.0)
    peaty = np.array([2.0, 2.0, 2.0, 31.0])
    mixed["organic_matter"] = replace(mixed["organic_matter"], estimate=peaty)
    with pytest.raises(Refusal) as problem:
        assess_cells(sampled(0.5, constants=SOIL), mixed, GRID, job("sugar beet"))
    assert "reaches 31 %" in problem.value.findings[0].what


def test_a_target_with_just_enough_room_is_not_lowered_and_one_cell_too_high_is_told():
    own = {"interpretation": Interpretation.OWN, "ceiling_mg_kg": 1.5}
    just = assessed(target_mg_kg=1.25, **own)
    assert "RATE-CEILING-TARGET" not in {one.code for one in just.findings}
    assert just.need.target_mg_kg == pytest.approx(1.25)
    rows = (("", 0.0, 20.0, 0.9), ("", 20.0, 101.0, 1.4))
    some = of_cells(0.5, [10.0, 10.0, 10.0, 30.0], of_crop=own | {"own_targets": rows})
    assert some.need.target_mg_kg == pytest.approx([0.9, 0.9, 0.9, 1.25])
    (told,) = [one for one in some.findings if one.code == "RATE-CEILING-TARGET"]
    assert "0.90 mg/kg at the lowest" in told.what


def test_other_extractions_need_a_target_and_a_ceiling_of_their_own():
    other = sampled(0.5, constants=SOIL, method="mehlich-3")
    own = {"interpretation": Interpretation.OWN, "target_mg_kg": 0.9}
    assert assessed(samples=other, ceiling_mg_kg=2.0, **own).need.target_mg_kg == (
        pytest.approx(0.9)
    )

    def lacking(**settings):
        with pytest.raises(Refusal) as problem:
            assessed(samples=other, **settings)
        (one,) = [one for one in problem.value.findings if one.code == "RATE-METHOD"]
        return one.what

    assert "so ceiling are missing" in lacking(**own)
    assert "so target are missing" in lacking(ceiling_mg_kg=2.0)
    assert "so target and ceiling are missing" in lacking()


def test_a_declared_texture_is_a_source_only_where_it_was_used():
    def textures(samples, **settings):
        found = assessed(samples=samples, **settings)
        return [row["row"] for row in found.sources if row["table"] == "textures"]

    assert textures(sampled(0.5, constants=SOIL), texture="clay loam") == ["clay loam"]
    known = sampled(0.5, constants=SOIL | {"sand": 40.0})
    assert textures(known, texture="clay loam") == []
    assert textures(sampled(0.5, constants=SOIL)) == []


def test_a_regions_classes_for_the_samples_extraction_stand_in_for_the_target():
    other = sampled(0.5, constants=SOIL, method="mehlich-3")
    table = {"interpretation": Interpretation.CLASS_TABLE, "ceiling_mg_kg": 2.0}
    found = assessed(samples=other, region="new jersey", **table)
    assert any(row["table"] == "class_limits" for row in found.sources)
    codes = refused(samples=other, region="united kingdom", **table)
    assert {"RATE-REGION-METHOD", "RATE-METHOD"} <= codes
    only = refused(samples=other, region="new jersey", interpretation=table["interpretation"])
    assert only == {"RATE-METHOD"}  # the ceiling is still for hot water


def test_limits_of_ones_own_need_no_clay():
    own = {"interpretation": Interpretation.OWN, "target_mg_kg": 0.9, "bulk_density_g_cm3": 1.3}
    bare = sampled(0.5)
    found = assessed(samples=bare, soil={}, ceiling_mg_kg=2.0, **own)
    assert found.need.target_mg_kg == pytest.approx(0.9)
    assert "RATE-CLAY" in refused(samples=bare, soil={}, **own)
    assert "RATE-CLAY" in refused(
        samples=bare, soil={}, ceiling_mg_kg=2.0, bulk_density_g_cm3=1.3
    )  # fmt: skip


def test_doubt_of_the_target_is_counted_upwards():
    """Where the line ends, more clay asks for no more: less clay would."""
    table = LINE | {"bulk_density_g_cm3": 1.3}
    end = of_cells(0.5, 70.0, clay_sd=20.0, of_crop=table).need
    assert end.boron_sd == pytest.approx(0.1)

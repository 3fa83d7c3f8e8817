"""The dose path number by number: chances against integrals, caps, overrides, limits, steps."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import integrate, stats

from schorl import units
from schorl.agronomy import caps
from schorl.agronomy.caps import ALFALFA_LIMIT, BAND_CAP, RATE_CAP, absolute_limit_kg_ha, rate_cap
from schorl.agronomy.chances import (
    breaking_point,
    chance_below,
    chance_over_ceiling,
    chance_short_of_need,
    chance_short_of_target,
    expected_gap,
    expected_loss_kg_ha,
)
from schorl.agronomy.crops import crop_named
from schorl.agronomy.soil_mass import ceiling_depth_cm, kg_ha_per_mg_kg, need_depth_cm
from schorl.agronomy.targets import (
    class_rows,
    class_scope,
    class_table_target,
    crop_need_target,
    own_target,
    regions,
    soil_ceiling,
    texture_line_target,
)
from schorl.errors import Refusal, UsageProblem
from schorl.machinery.rates import (
    boron_per_unit,
    machine_rate,
    rate_band,
    step_boron_kg_ha,
    volume_known,
)
from schorl.machinery.sprayer import settled_machine
from schorl.model.prescription import CellNeed, Limit
from schorl.model.settings import (
    CropSettings,
    Form,
    Interpretation,
    Machine,
    Override,
    Placement,
    Product,
    RunSettings,
)
from schorl.steps.limits_of_soil import ceiling_for, target_for
from schorl.steps.zone_rates import (
    best_rate_kg_ha,
    cell_rates_kg_ha,
    chance_limit_kg_ha,
    least_worth,
    part_of,
    plan_outcome,
    ruled_rate,
    unevenness_of,
)
from support.one_soil import ruled

BEET, ALFALFA, BEAN = crop_named("sugar beet"), crop_named("alfalfa"), crop_named("snap bean")
GRANULE = Product(form=Form.GRANULE, boron_pct=10.0)


def by(what, value, person="A. Adviser"):
    return Override(what=what, value=value, unit="kg B/ha", person=person)


def need(**changes):
    one = np.ones(2)
    values = {
        "need_mean_kg_ha": np.array([0.9, 0.6]), "need_sd_kg_ha": 0.3 * one,
        "boron_mg_kg": np.array([0.5, 0.6]), "boron_location": np.array([0.5, 0.6]),
        "boron_sd": np.array([0.12, 0.08]), "boron_log": False, "target_mg_kg": 0.85 * one,
        "ceiling_mg_kg": 2.0 * one, "mass_need": 2.6 * one, "mass_ceiling": 1.3 * one,
        "rate_cap_kg_ha": 2.24 * one, "hot": np.zeros(2, bool),
    }  # fmt: skip
    return CellNeed(**(values | changes))


def lognormal():
    sd = np.array([0.25, 0.15])
    mean = np.array([0.5, 0.6])
    return need(boron_location=np.log(mean) - 0.5 * sd**2, boron_sd=sd, boron_log=True)


def job(**changes):
    values = {
        "field_name": "f", "season": "s", "crop": CropSettings(crop="sugar beet"),
        "product": GRANULE, "placement": Placement.BROADCAST,
        "machine": Machine(spread_cv_pct=15.0),
    }  # fmt: skip
    return RunSettings(**(values | changes))


def law(cells, place):
    if cells.boron_log:
        return stats.lognorm(s=cells.boron_sd[place], scale=np.exp(cells.boron_location[place]))
    return stats.norm(cells.boron_location[place], cells.boron_sd[place])


def mean_gap(of, point, start, end):
    """Integral of (point - b) over a distribution between two ends."""
    return integrate.quad(lambda b: (point - b) * of.pdf(b), start, end, epsabs=1e-13)[0]


@pytest.mark.parametrize("cells", [need(), lognormal()], ids=["normal", "lognormal"])
def test_chances_and_losses_are_those_of_the_distribution(cells):
    """Closed forms against scipy's distributions and numeric integration."""
    rate = 0.7
    for place in range(2):
        of = law(cells, place)
        point = cells.boron_mg_kg[place] + (cells.need_mean_kg_ha[place] - rate) / 2.6
        assert breaking_point(cells, rate)[place] == pytest.approx(point)
        assert chance_short_of_need(cells, rate)[place] == pytest.approx(of.cdf(point), rel=1e-9)
        room = 2.0 - 1.3 * rate / 1.3
        over = chance_over_ceiling(cells, rate, unevenness=1.3)[place]
        assert over == pytest.approx(of.sf(room), rel=1e-6)
        wanted = 0.85 - 0.3 * rate / 2.6
        short = chance_short_of_target(cells, rate, stays=0.3)[place]
        assert short == pytest.approx(of.cdf(wanted), rel=1e-9)
        low, high = of.ppf(1e-12), of.ppf(1 - 1e-12)
        gap = mean_gap(of, point, low, point)
        excess = -mean_gap(of, point, point, high)
        found = expected_gap(
            breaking_point(cells, rate), cells.boron_location, cells.boron_sd, log=cells.boron_log
        )[place]
        assert found == pytest.approx(gap, rel=1e-6, abs=1e-10)
        loss = expected_loss_kg_ha(cells, rate, cost_ratio=3.0)[place]
        assert loss == pytest.approx(2.6 * (3.0 * gap + excess), rel=1e-6, abs=1e-9)


def test_a_cell_without_spread_is_a_step():
    sharp = need(boron_sd=np.zeros(2))
    assert chance_over_ceiling(sharp, 1.49).tolist() == [0.0, 0.0]
    assert chance_over_ceiling(sharp, 1.96).tolist() == [1.0, 1.0]
    assert chance_below(np.array([-1.0, 0.0]), np.zeros(2), np.ones(2), log=True).tolist() == [0, 0]
    assert expected_gap(np.array([0.0]), np.zeros(1), np.ones(1), log=True)[0] == 0.0


def test_the_absolute_limits_stand_in_code():
    assert caps.ABSOLUTE_SEASON_KG_HA == caps.ABSOLUTE_PASS_KG_HA == 3.36
    assert caps.ABSOLUTE_ALFALFA_KG_HA == 4.48
    assert pytest.approx(4.48, abs=0.004) == 4 * units.KG_HA_PER_LB_ACRE


def test_only_alfalfas_limit_moves_and_only_by_a_person():
    assert absolute_limit_kg_ha(ALFALFA) == 3.36
    assert absolute_limit_kg_ha(ALFALFA, [by(ALFALFA_LIMIT, 4.0)]) == 4.0
    assert absolute_limit_kg_ha(ALFALFA, [by(ALFALFA_LIMIT, 9.0)]) == 4.48
    assert absolute_limit_kg_ha(ALFALFA, [by(ALFALFA_LIMIT, 1.0)]) == 3.36
    assert absolute_limit_kg_ha(ALFALFA, [by(ALFALFA_LIMIT, 4.0, person=" ")]) == 3.36
    assert absolute_limit_kg_ha(ALFALFA, [by(RATE_CAP, 4.0)]) == 3.36
    assert absolute_limit_kg_ha(BEET, [by(ALFALFA_LIMIT, 4.0)]) == 3.36


@pytest.mark.parametrize(
    ("crop", "placement", "kg_ha", "row"),
    [
        (BEET, Placement.BROADCAST, 2.24, "sugar beet"),
        (BEET, Placement.INCORPORATED, 2.24, "sugar beet"),
        (BEET, Placement.FERTIGATION, 2.24, "sugar beet"),
        (BEET, Placement.BAND, 0.0, "cap-band"),
        (BEET, Placement.SEED_ROW, 0.0, "cap-seed-row"),
        (BEET, Placement.FOLIAR, 0.56, "cap-foliar"),
        (crop_named("sunflower"), Placement.FOLIAR, 0.34, "cap-foliar-sunflower"),
        (BEAN, Placement.BROADCAST, 0.0, "snap bean"),
        (BEAN, Placement.FOLIAR, 0.0, "cap-foliar"),
    ],
)
def test_caps_by_crop_and_placement(crop, placement, kg_ha, row):
    cap = rate_cap(crop, placement)
    assert (cap.kg_ha, cap.row, cap.overridden_by) == (kg_ha, row, "")


def test_what_a_person_may_raise():
    raised = rate_cap(BEET, Placement.BROADCAST, [by(RATE_CAP, 3.0)])
    assert (raised.kg_ha, raised.overridden_by) == (3.0, "A. Adviser")
    assert rate_cap(BEET, Placement.INCORPORATED, [by(RATE_CAP, 9.0)]).kg_ha == 3.36
    assert rate_cap(BEET, Placement.FOLIAR, [by(RATE_CAP, 3.0)]).kg_ha == 0.56
    assert rate_cap(BEET, Placement.SEED_ROW, [by(RATE_CAP, 3.0), by(BAND_CAP, 0.2)]).kg_ha == 0.0
    band = rate_cap(BEET, Placement.BAND, [by(BAND_CAP, 0.2)])
    assert (band.kg_ha, band.row, band.overridden_by) == (0.2, "cap-band-override", "A. Adviser")
    assert rate_cap(BEET, Placement.BAND, [by(BAND_CAP, 5.0)]).kg_ha == 0.28
    assert rate_cap(crop_named("wheat"), Placement.BAND, [by(BAND_CAP, 0.2)]).kg_ha == 0.0
    assert rate_cap(BEET, Placement.BROADCAST, [by(BAND_CAP, 0.2)]).kg_ha == 2.24
    assert rate_cap(BEET, Placement.BROADCAST, [by(RATE_CAP, 3.0, person=" ")]).kg_ha == 2.24


def test_soil_mass_and_depths():
    assert kg_ha_per_mg_kg(1.3, 20.0) == pytest.approx(2.6)
    assert kg_ha_per_mg_kg(1.3, 20.0, stones_pct=10.0) == pytest.approx(2.34)
    assert (need_depth_cm(30.0), need_depth_cm(15.0)) == (20.0, 15.0)
    assert (ceiling_depth_cm(None), ceiling_depth_cm(25.0)) == (10.0, 25.0)


def test_targets_and_ceilings_at_and_between_their_points():
    assert texture_line_target(np.array([5.0, 10, 30, 50, 60])).tolist() == pytest.approx(
        [1.0, 1.0, 1.5, 2.0, 2.0]
    )
    high = crop_need_target("high", np.array([10.0, 25.0, 40.0]))
    assert high[1] == pytest.approx(0.5 * (high[0] + high[2]))
    matter = np.full(5, 2.0)
    clay = np.array([5.0, 10.0, 20.0, 35.0, 50.0])
    texture = soil_ceiling(BEET, "texture", clay, matter)
    assert texture.tolist() == pytest.approx([2.0, 2.25, 2.5, 2.75, 3.0])
    assert soil_ceiling(BEET, "sensitive", clay, matter).tolist() == [2.0] * 5
    assert soil_ceiling(BEET, "very sensitive", clay, matter).tolist() == [1.4] * 5
    assert soil_ceiling(BEAN, "texture", clay, matter).tolist() == [1.4] * 5
    organic = soil_ceiling(BEET, "texture", clay, np.array([15.0, 15.1, 20, 2, 2]))
    assert organic.tolist() == pytest.approx([2.0, 3.0, 3.0, 2.75, 3.0])


def test_class_tables_by_clay_and_organic_soil():
    rows = class_rows("")
    assert rows
    assert rows == class_rows(" Program ")
    assert class_rows("atlantis") == ()
    assert "program" not in regions()
    edges = [float(row["clay_from_pct"]) for row in rows if row["organic"] == "no"]
    clay = np.array([5.0, 20.0, 45.0, *edges])
    target = class_table_target(rows, clay, np.zeros(len(clay), bool))
    for value, one in zip(target, clay, strict=True):
        held = [
            float(row["adequate_from"]) for row in rows
            if row["organic"] == "no"
            and float(row["clay_from_pct"]) <= one < float(row["clay_below_pct"])
        ]  # fmt: skip
        assert [value] == held
    for region in regions():
        named = class_rows(region)
        assert named
        crops = named[0]["crops"]
        assert class_scope(named, BEET) == (crops == "all" or "sugar beet" in crops.split("|"))


def test_own_tables_by_crop_and_clay():
    rows = (("", 0.0, 20.0, 0.7), ("", 20.0, 101.0, 0.9), ("sugar beet", 10.0, 20.0, 0.8),
            ("wheat", 0.0, 101.0, 0.3))  # fmt: skip
    clay = np.array([5.0, 10.0, 19.9, 20.0, 60.0])
    assert own_target(rows, BEET, clay).tolist() == [0.7, 0.8, 0.8, 0.9, 0.9]
    with pytest.raises(Refusal) as refused:
        target_for(
            BEET,
            job(crop=CropSettings(crop="sugar beet", interpretation=Interpretation.OWN,
                                  own_targets=(("", 0.0, 20.0, 0.7),))),
            clay, np.full(5, 2.0),
        )  # fmt: skip
    assert refused.value.findings[0].code == "RATE-OWN-TABLE"


def test_given_ceilings_may_be_lower_and_higher_only_by_a_person():
    clay, matter = np.array([15.0]), np.array([2.0])
    lower = job(crop=CropSettings(crop="sugar beet", next_crop="sugar beet", ceiling_mg_kg=1.5))
    assert ceiling_for(BEET, lower, clay, matter, builtin=True)[0].tolist() == [1.5]
    higher = replace(lower, crop=replace(lower.crop, ceiling_mg_kg=2.9))
    with pytest.raises(Refusal) as refused:
        ceiling_for(BEET, higher, clay, matter, builtin=True)
    assert refused.value.findings[0].code == "RATE-CEILING-RAISED"
    named = replace(higher, overrides=(by("soil ceiling", 2.9),))
    assert ceiling_for(BEET, named, clay, matter, builtin=True)[0].tolist() == [2.9]
    unnamed = replace(higher, overrides=(by("soil ceiling", 2.9, person=" "),))
    with pytest.raises(Refusal):
        ceiling_for(BEET, unnamed, clay, matter, builtin=True)
    assert ceiling_for(BEET, higher, clay, matter, builtin=False)[0].tolist() == [2.9]


def test_which_limit_ruled():
    assert ruled("sugar beet", 0.5).by is Limit.NEED
    assert ruled("sugar beet", 0.05, clay_pct=35.0).by is Limit.RATE_CAP
    assert ruled("sugar beet", 0.05, next_crop="snap bean").by is Limit.CHANCE_OF_EXCESS
    assert ruled("sugar beet", 0.80).by is Limit.LEAST_WORTH
    assert ruled("sugar beet", 1.20).by is Limit.NOTHING
    full = ruled("sugar beet", 2.6)
    assert full.boron_kg_ha == 0.0
    assert full.limits["soil ceiling"] == 0.0
    absolute = ruled_rate(need(need_mean_kg_ha=np.array([9.0, 9.0]), mass_ceiling=np.full(2, 9.0),
                               rate_cap_kg_ha=np.full(2, 9.0)), job())  # fmt: skip
    assert (absolute.by, absolute.boron_kg_ha) == (Limit.ABSOLUTE, pytest.approx(3.36))


def test_the_lowest_cap_of_a_zones_cells_holds_and_the_ceiling_itself_is_full():
    mixed = ruled_rate(need(rate_cap_kg_ha=np.array([0.4, 2.24])), job())
    assert (mixed.by, mixed.boron_kg_ha) == (Limit.RATE_CAP, pytest.approx(0.4))
    at = np.full(2, 2.0)
    full = ruled_rate(need(boron_mg_kg=at, boron_location=at), job())
    assert full.limits["soil ceiling"] == 0.0
    assert full.boron_kg_ha == 0.0
    assert "soil ceiling" not in ruled_rate(need(), job()).limits
    low = need(ceiling_mg_kg=np.full(2, 0.5))
    assert cell_rates_kg_ha(low, job()).tolist() == [0.0, 0.0]


def test_the_best_rate_is_the_quantile_of_the_costs():
    cells = need()
    for ratio in (0.5, 1.0, 3.0):
        rate = best_rate_kg_ha(cells, cost_ratio=ratio)
        assert chance_short_of_need(cells, rate).mean() == pytest.approx(1 / (1 + ratio), abs=1e-7)
    assert best_rate_kg_ha(need(need_mean_kg_ha=np.full(2, -2.0)), cost_ratio=1.0) == 0.0
    allowed = chance_limit_kg_ha(cells, unevenness=1.3)
    assert chance_over_ceiling(cells, allowed, unevenness=1.3).mean() == pytest.approx(
        0.05, abs=1e-7
    )
    assert chance_limit_kg_ha(need(ceiling_mg_kg=np.full(2, 0.5)), unevenness=1.3) == 0.0
    assert unevenness_of(job()) == pytest.approx(1.3)


def test_small_rates_are_worth_giving_only_on_leaves_bands_and_in_water():
    assert least_worth(job()) == 0.30
    assert least_worth(job(placement=Placement.INCORPORATED)) == 0.30
    for placement in (Placement.FOLIAR, Placement.BAND, Placement.FERTIGATION):
        assert least_worth(job(placement=placement)) == 0.0


def test_the_machines_step_is_not_what_ruled_but_its_least_is():
    stepped = job(machine=Machine(spread_cv_pct=15.0, step=0.5))
    one = ruled_rate(need(), stepped)
    assert one.boron_kg_ha == pytest.approx(np.floor(one.wanted_kg_ha / 0.05) * 0.05)
    assert one.by is Limit.NEED
    least = job(machine=Machine(spread_cv_pct=15.0, least_rate=40.0))
    held = ruled_rate(need(), least)
    assert (held.boron_kg_ha, held.by) == (0.0, Limit.MACHINE)
    assert held.wanted_kg_ha == pytest.approx(one.wanted_kg_ha)
    coarse = job(machine=Machine(spread_cv_pct=15.0, step=40.0))  # 4 kg B/ha a step
    none = ruled_rate(need(), coarse)
    assert 0 < none.wanted_kg_ha < 4.0
    assert (none.boron_kg_ha, none.by) == (0.0, Limit.MACHINE)


def test_the_least_rate_worth_giving_is_given():
    at = need(rate_cap_kg_ha=np.full(2, 0.30))
    assert (ruled_rate(at, job()).boron_kg_ha, ruled_rate(at, job()).by) == (
        pytest.approx(0.30), Limit.RATE_CAP,
    )  # fmt: skip
    assert cell_rates_kg_ha(at, job()).tolist() == pytest.approx([0.30, 0.30])


def test_a_sprays_mix_suits_every_zone_of_a_plan_by_its_area():
    """The mix for both zones differs from the one for the second alone."""
    cells = need(need_mean_kg_ha=np.array([0.7, 0.4]))
    spray = replace(
        job(placement=Placement.INCORPORATED, machine=Machine(tank_l=3000.0, water_l_ha=100.0)),
        product=Product(form=Form.SPRAY, boron_g_l=150.0),
    )
    wanted = [
        ruled_rate(part_of(cells, np.arange(2) == place), spray).boron_kg_ha for place in (0, 1)
    ]
    machine = settled_machine(
        [(1.0, wanted[0]), (1.0, wanted[1])], spray.product, spray.machine, spray.placement
    )
    without = settled_machine(
        [(0.0, wanted[0]), (1.0, wanted[1])], spray.product, spray.machine, spray.placement
    )
    expected = machine_rate(np.array(wanted), spray.product, machine)
    assert machine_rate(np.array(wanted), spray.product, without) != pytest.approx(expected)
    got = plan_outcome(np.array([0, 1]), cells, spray, cell_ha=0.01).rates_kg_ha
    assert got.tolist() == pytest.approx(expected.tolist())


def test_a_plan_and_rates_by_cell():
    cells = need()
    labels = np.array([0, 1])
    outcome = plan_outcome(labels, cells, job(), cell_ha=0.01)
    own = [ruled_rate(part_of(cells, labels == place), job()).boron_kg_ha for place in (0, 1)]
    assert outcome.rates_kg_ha.tolist() == pytest.approx(own)
    loss = expected_loss_kg_ha(cells, np.array(own), cost_ratio=1.0).sum() * 0.01
    assert outcome.loss_kg == pytest.approx(loss)
    assert cell_rates_kg_ha(cells, job()) == pytest.approx(own, abs=1e-5)
    none = plan_outcome(np.array([-1, -1]), cells, job(), cell_ha=0.01)
    assert len(none.rates_kg_ha) == 0
    bare = expected_loss_kg_ha(cells, 0.0, cost_ratio=1.0).sum() * 0.01
    assert none.loss_kg == pytest.approx(bare)
    gap = plan_outcome(np.array([0, 2]), cells, job(), cell_ha=0.01)
    assert gap.rates_kg_ha.tolist() == pytest.approx([own[0], 0.0, own[1]])
    half = plan_outcome(np.array([0, -1]), cells, job(), cell_ha=0.01)
    assert half.rates_kg_ha.tolist() == pytest.approx(own[:1])
    hot = replace(cells, hot=np.array([True, False]))
    assert cell_rates_kg_ha(hot, job())[0] == 0.0
    capped = replace(cells, rate_cap_kg_ha=np.array([0.4, 2.24]))
    assert cell_rates_kg_ha(capped, job())[0] == pytest.approx(0.4)
    assert part_of(cells, np.ones(2, bool)) is cells


def test_between_boron_and_product():
    assert boron_per_unit(GRANULE) == pytest.approx(0.10)
    liquid = Product(form=Form.SPRAY, boron_g_l=150.0)
    assert boron_per_unit(liquid) == pytest.approx(0.15)
    assert boron_per_unit(liquid, Machine(mix_g_b_l=2.0)) == pytest.approx(0.002)
    blended = Machine(carrier="sand", carrier_may_vary=True, blend_pct=40.0)
    assert boron_per_unit(GRANULE, blended) == pytest.approx(0.04)
    with pytest.raises(UsageProblem):
        boron_per_unit(Product(form=Form.GRANULE))
    with pytest.raises(UsageProblem):
        boron_per_unit(Product(form=Form.SPRAY))
    with pytest.raises(UsageProblem, match="powder"):
        boron_per_unit(Product(form=Form.SPRAY, compound="boric acid", boron_pct=17.5))
    assert volume_known(GRANULE, Machine())
    assert not volume_known(liquid, Machine())
    assert volume_known(liquid, Machine(mix_g_b_l=2.0))
    assert step_boron_kg_ha(GRANULE, Machine(step=0.5)) == pytest.approx(0.05)
    assert step_boron_kg_ha(GRANULE, Machine()) == 0.0
    assert step_boron_kg_ha(liquid, Machine(step=10.0)) == 0.0
    assert step_boron_kg_ha(liquid, Machine(step=10.0, mix_g_b_l=2.0)) == pytest.approx(0.02)
    assert rate_band(GRANULE, Machine()) == (0.0, np.inf)
    assert rate_band(liquid, Machine(mix_g_b_l=2.0)) == (0.0, np.inf)
    assert rate_band(liquid, Machine(nozzle_size="03")) == (0.0, np.inf)
    assert rate_band(GRANULE, Machine(nozzle_size="03", mix_g_b_l=2.0)) == (0.0, np.inf)
    assert rate_band(GRANULE, Machine(least_rate=4.0, most_rate=60.0)) == (4.0, 60.0)
    nozzled = Machine(nozzle_size="03", mix_g_b_l=2.0, least_rate=1.0, most_rate=900.0)
    low, high = rate_band(liquid, nozzled)
    assert 1.0 < low < high < 900.0
    tight = rate_band(liquid, replace(nozzled, least_rate=low + 1, most_rate=high - 1))
    assert tight == pytest.approx((low + 1, high - 1))


def test_what_a_machine_gives_of_what_is_wanted():
    machine = Machine(step=0.5, least_rate=4.0, most_rate=12.0)
    wanted = np.array([0.0, 0.39, 0.40, 0.449, 0.45, 1.0, 1.2, 1.3])
    given = machine_rate(wanted, GRANULE, machine)
    assert given.tolist() == pytest.approx([0, 0, 0.40, 0.40, 0.45, 1.0, 1.2, 1.2])
    assert machine_rate(0.4 - 1e-8, GRANULE, machine) == pytest.approx(0.4 - 1e-8, abs=1e-12)
    assert machine_rate(0.4 - 1e-5, GRANULE, machine) == 0.0
    assert machine_rate(0.7, GRANULE, Machine()) == pytest.approx(0.7)
    liquid = Product(form=Form.SPRAY, boron_g_l=150.0)
    assert machine_rate(0.123, liquid, Machine(step=10.0)) == 0.123


def test_exact_factors_between_units():
    """NIST SP 811, appendix B.8; psi from the pound-force and inch exactly."""
    assert pytest.approx(1.120851, abs=5e-7) == units.KG_HA_PER_LB_ACRE
    assert pytest.approx(9.353958, abs=5e-6) == units.L_HA_PER_US_GAL_ACRE
    assert pytest.approx(1.198264, abs=5e-6) == units.G_L_PER_LB_100_GAL
    assert (units.KG_PER_LB, units.HA_PER_ACRE) == (0.45359237, 0.40468564224)
    assert (units.L_PER_US_GAL, units.M_PER_FT, units.CM_PER_INCH) == (3.785411784, 0.3048, 2.54)
    assert units.KM_PER_MILE == 1.609344
    assert pytest.approx(0.45359237 * 9.80665 / 0.0254**2 / 1e5, rel=1e-12) == units.BAR_PER_PSI

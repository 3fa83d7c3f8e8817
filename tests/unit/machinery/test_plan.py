"""A plan's figures and findings, case by case."""

from __future__ import annotations

import pytest

from schorl.errors import UsageProblem
from schorl.machinery.plan import machine_plan
from schorl.machinery.rates import boron_per_unit, machine_rate
from schorl.model.settings import Form, Machine, Placement, Product
from schorl.units import UnitSystem

ZONES = [(10.0, 1.2), (5.0, 0.4), (2.0, 0.0)]
GRANULE = Product(form=Form.GRANULE, boron_pct=15.0, bag_kg=25.0)
LIQUID = Product(form=Form.SPRAY, boron_g_l=150.0)
POWDER = Product(form=Form.SPRAY, boron_pct=20.9, compound="octaborate")


def codes(outcome):
    return {found.code for found in outcome.findings}


def only(outcome, code):
    (found,) = (one for one in outcome.findings if one.code == code)
    return found


# --- granules ---------------------------------------------------------------------------------


def test_granule_rates_feed_catch_and_order():
    machine = Machine(working_width_m=24, speed_km_h=12, hopper_kg=100, delay_s=1.5)
    product = Product(form=Form.GRANULE, boron_pct=15, bulk_density_kg_l=0.9, bag_kg=25)
    outcome = machine_plan(ZONES, product, machine)
    assert outcome.product_rates == pytest.approx((8.0, 8 / 3, 0.0))
    assert (outcome.unit, outcome.boron_pct, outcome.boron_g_l) == ("kg", 15, None)
    assert [point.name for point in outcome.plan.points] == ["lowest", "mean", "highest"]
    top = outcome.plan.points[-1].figures
    assert top["feed_kg_min"] == pytest.approx(8 * 12 * 24 / 600)
    assert top["catch_kg"] == pytest.approx(8 * 24 * 100 / 10_000)
    assert top["catch_l"] == pytest.approx(top["catch_kg"] / 0.9)
    total = 10 * 8 + 5 * 8 / 3
    assert outcome.plan.loads == pytest.approx(total / 100)
    assert outcome.plan.order == 100
    assert outcome.plan.facts["bags"] == 4
    assert outcome.plan.facts["look_ahead_m"] == pytest.approx(12 / 3.6 * 1.5)
    assert outcome.plan.facts["calibration_s"] == pytest.approx(30)


def test_below_the_least_is_nothing_and_says_the_cost_and_the_ways():
    outcome = machine_plan(ZONES, GRANULE, Machine(least_rate=5.0))
    assert outcome.boron_kg_ha == pytest.approx((1.2, 0.0, 0.0))
    found = only(outcome, "MACHINE-BELOW")
    assert "2.00 kg B" in found.what
    assert "5.00 ha" in found.what
    assert "at most 8 % boron" in found.hint
    assert "carrier" in found.hint


def test_above_the_most_is_lowered_and_said():
    outcome = machine_plan(ZONES, GRANULE, Machine(most_rate=6.0))
    assert outcome.product_rates[0] == pytest.approx(6.0)
    assert "3.00 kg B is not given on 10.00 ha" in only(outcome, "MACHINE-ABOVE").what


def test_wanted_rates_say_what_the_machine_already_took():
    wanted = [1.2, 0.4, 0.0]
    outcome = machine_plan(
        [(10.0, 1.2), (5.0, 0.0), (2.0, 0.0)], GRANULE, Machine(least_rate=5.0), wanted=wanted
    )
    assert "2.00 kg B" in only(outcome, "MACHINE-BELOW").what


def test_a_step_alone_is_no_finding():
    outcome = machine_plan(ZONES, GRANULE, Machine(step=1.0))
    assert outcome.product_rates == pytest.approx((8.0, 2.0, 0.0))
    assert not codes(outcome)


def test_a_machine_that_cannot_do_nothing():
    assert (
        "2.00 ha"
        in only(machine_plan(ZONES, GRANULE, Machine(can_do_zero=False)), "MACHINE-ZERO").what
    )
    everywhere = machine_plan(ZONES[:2], GRANULE, Machine(can_do_zero=False))
    assert "MACHINE-ZERO" not in codes(everywhere)


def test_few_granules_are_said():
    coarse = Product(form=Form.GRANULE, boron_pct=15, granule_mm=4, granule_density_g_cm3=1.7)
    outcome = machine_plan(ZONES, coarse, Machine())
    assert outcome.plan.points[0].figures["granules_m2"] == pytest.approx(4.68, abs=0.01)
    assert "MACHINE-GRANULES" in codes(outcome)


def test_a_carrier_thins_so_that_the_least_dose_is_at_the_least_rate():
    machine = Machine(least_rate=20, carrier="humate", carrier_may_vary=True, hopper_kg=500)
    outcome = machine_plan(ZONES, GRANULE, machine)
    assert float(machine_rate(0.30, GRANULE, machine)) == pytest.approx(0.30)
    assert float(machine_rate(0.29, GRANULE, machine)) == 0.0
    assert outcome.boron_pct == pytest.approx(1.5)
    assert outcome.product_rates == pytest.approx((80.0, 80 / 3, 0.0))
    facts = outcome.plan.facts
    assert facts["product_in_all_kg"] == pytest.approx(14 / 0.15)
    assert facts["carrier_in_all_kg"] == pytest.approx(14 / 0.15 * 9)
    assert "MACHINE-BLEND" in codes(outcome)
    assert any("part on the way" in one for one in outcome.plan.advice)


def test_a_carrier_with_its_own_rate_carries_no_varied_boron():
    machine = Machine(least_rate=20, carrier="phosphate", carrier_may_vary=False)
    outcome = machine_plan(ZONES, GRANULE, machine)
    assert "MACHINE-CARRIER-FIXED" in codes(outcome)
    assert outcome.boron_pct == 15.0


def test_whether_a_carrier_may_vary_is_never_guessed():
    with pytest.raises(UsageProblem) as said:
        machine_plan(ZONES, GRANULE, Machine(carrier="humate"))
    assert said.value.exit_code == 2
    assert said.value.findings[0].code == "MACHINE-CARRIER"


def test_another_blend_is_named_where_one_suits_all():
    machine = Machine(least_rate=20, carrier="humate", carrier_may_vary=True, blend_pct=50)
    outcome = machine_plan(ZONES, GRANULE, machine)
    assert outcome.product_rates[1] == 0.0
    assert "13.3" in only(outcome, "MACHINE-BLEND-RANGE").hint  # 0.4 / 0.15 / 20


# --- sprays -----------------------------------------------------------------------------------


@pytest.mark.parametrize("product", [
    Product(form=Form.SPRAY, boron_pct=11.0),
    Product(form=Form.SPRAY, boron_pct=11.0, compound="boron ethanolamine"),
    Product(form=Form.SPRAY),
    Product(form=Form.GRANULE),
])  # fmt: skip
def test_what_is_no_dose_stops(product):
    for call in (
        lambda: machine_plan(ZONES, product, Machine()),
        lambda: machine_rate(1.0, product, Machine()),
        lambda: boron_per_unit(product),
    ):
        with pytest.raises(UsageProblem) as said:
            call()
        assert said.value.exit_code == 2


def test_a_mix_cannot_be_stronger_than_its_product():
    with pytest.raises(UsageProblem) as said:
        machine_plan(ZONES, LIQUID, Machine(mix_g_b_l=151.0))
    assert said.value.findings[0].code == "MACHINE-MIX-STRONG"


def test_no_such_nozzle():
    with pytest.raises(UsageProblem) as said:
        machine_plan(ZONES, LIQUID, Machine(mix_g_b_l=5.0, nozzle_size="07"))
    assert said.value.findings[0].code == "MACHINE-NOZZLE"


def test_one_mix_varies_volume_and_fills_tanks():
    machine = Machine(
        speed_km_h=8, tank_l=1000, mix_g_b_l=5.0, nozzle_size="04", pulse_width_ratio=8
    )
    outcome = machine_plan([(10.0, 1.2), (5.0, 0.4)], LIQUID, machine)
    assert outcome.product_rates == pytest.approx((240.0, 80.0))
    facts = outcome.plan.facts
    assert facts["product_in_all_l"] == pytest.approx(14 * 1000 / 150)
    assert facts["product_full_load_l"] == pytest.approx(1000 * 5 / 150)
    assert facts["water_full_load_l"] == pytest.approx(1000 * 145 / 150)
    assert outcome.plan.loads == pytest.approx(2.8)
    assert outcome.plan.points[-1].figures["open_pct"] < 100


def test_zones_apart_by_more_than_the_nozzle_offer_ways_out_in_order():
    machine = Machine(speed_km_h=8)
    outcome = machine_plan([(10.0, 1.2), (5.0, 0.4), (2.0, 0.0)], LIQUID, machine)
    assert outcome.boron_kg_ha == pytest.approx((1.2, 0.0, 0.0))  # never more for the low zone
    hint = only(outcome, "MACHINE-TURNDOWN").hint
    order = ["two passes", "lowest zones at 0", "two rates", "a tank for each rate"]
    assert [hint.index(name) for name in order] == sorted(hint.index(name) for name in order)
    assert "10.00 ha driven twice, 0.00 kg B not given" in hint
    assert "5.00 ha untreated, 2.00 kg B not given" in hint


def test_pulsed_nozzles_do_what_pressure_cannot():
    outcome = machine_plan(
        [(10.0, 1.2), (5.0, 0.4)], LIQUID, Machine(speed_km_h=8, pulse_width_ratio=8)
    )
    assert outcome.boron_kg_ha == pytest.approx((1.2, 0.4))
    assert "MACHINE-TURNDOWN" not in codes(outcome)


def test_what_is_left_open_is_chosen_and_said():
    outcome = machine_plan([(10.0, 1.2), (5.0, 0.7)], LIQUID, Machine(speed_km_h=8))
    assert outcome.boron_kg_ha == pytest.approx((1.2, 0.7))
    assert outcome.machine.nozzle_size
    assert outcome.machine.mix_g_b_l
    assert "MACHINE-CHOSEN" in codes(outcome)


def test_a_wanted_volume_is_kept():
    outcome = machine_plan([(10.0, 1.2), (5.0, 0.7)], LIQUID, Machine(speed_km_h=8, water_l_ha=150))
    assert max(outcome.product_rates) == pytest.approx(150, rel=0.01)


def test_more_than_dissolves_stops_and_cold_water_holds_less():
    machine = Machine(mix_g_b_l=10.0, nozzle_size="04", pulse_width_ratio=8)
    cold = machine_plan(ZONES, POWDER, machine)
    found = only(cold, "MACHINE-SOLUBLE")
    assert found.exit == 4
    assert "10 °C" in found.what
    assert "MACHINE-WATER" in codes(cold)
    warm = machine_plan(ZONES, POWDER, Machine(
        mix_g_b_l=10.0, nozzle_size="04", pulse_width_ratio=8, water_temperature_c=20,
    ))  # fmt: skip
    assert not codes(warm) & {"MACHINE-SOLUBLE", "MACHINE-WATER"}


@pytest.mark.parametrize(
    ("mix", "dose", "code"),
    [(2.0, 0.28, None), (3.0, 0.28, "MACHINE-BURN-WARN"), (5.0, 0.28, "MACHINE-BURN"),
     (0.4, 0.28, "MACHINE-BURN-WARN"), (0.24, 0.14, None)],
)  # fmt: skip
def test_leaf_burn(mix, dose, code):
    """0.4 g B/L is weak, but 700 L/ha of it wets leaves to run-off, where 0.25 is the mark."""
    machine = Machine(mix_g_b_l=mix, nozzle_size="08", speed_km_h=4, pulse_width_ratio=30)
    outcome = machine_plan([(10.0, dose)], LIQUID, machine, placement=Placement.FOLIAR)
    burning = {one for one in codes(outcome) if "BURN" in one}
    assert burning == ({code} if code else set())
    assert not {
        one for one in codes(machine_plan([(10.0, dose)], LIQUID, machine)) if "BURN" in one
    }


def test_fertigation_is_a_dose_a_block_in_equal_events():
    machine = Machine(events=4, water_l_ha=100_000)
    outcome = machine_plan(
        [(10.0, 1.2), (5.0, 0.3)], LIQUID, machine, placement=Placement.FERTIGATION
    )
    assert outcome.product_rates == pytest.approx((8.0, 2.0))  # the liquid itself
    top = outcome.plan.points[-1].figures
    assert top["dose_l_ha_event"] == pytest.approx(2.0)
    assert top["boron_in_water_mg_l"] == pytest.approx(3.0)  # 300 g in 100,000 L
    assert "MACHINE-TURNDOWN" not in codes(outcome)
    assert "calibration_m" not in outcome.plan.facts


def test_sentences_in_us_units():
    outcome = machine_plan(ZONES, GRANULE, Machine(least_rate=5.0), units=UnitSystem.US)
    said = only(outcome, "MACHINE-BELOW").what
    assert "lb B" in said
    assert "ac" in said
    assert "lb/ac" in said
    assert "kg" not in said
    assert "ha" not in said.replace("that", "")


def test_nothing_to_spread():
    for product in (GRANULE, LIQUID, POWDER):
        outcome = machine_plan([(10.0, 0.0)], product, Machine(hopper_kg=500, tank_l=1000))
        assert outcome.plan.points == ()
        assert (outcome.plan.loads, outcome.plan.order) == (0.0, 0.0)
        assert outcome.product_rates == (0.0,)

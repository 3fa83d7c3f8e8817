"""Laws of machines: whatever is chosen, no zone gets more boron than it was to get."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest
import shapely
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from schorl.errors import Refusal
from schorl.machinery.blends import blend_share
from schorl.machinery.loads import loads_of, order_of
from schorl.machinery.nozzles import nozzle_flow_l_min, pressure_bar, volume_band_l_ha, volume_l_ha
from schorl.machinery.plan import machine_plan
from schorl.machinery.profiles import Profile
from schorl.machinery.rates import boron_per_unit, machine_rate, rate_band
from schorl.machinery.simplify import fit_zones, rate_error, shape_of
from schorl.machinery.solids import saturation_g_l, solid_named
from schorl.machinery.sprayer import settled_machine, strongest_mix_g_l
from schorl.machinery.ways_out import ways_out
from schorl.model.settings import Form, Machine, Placement, Product
from schorl.units import UnitSystem

CASES = settings(max_examples=300, deadline=None)
DOSES = st.lists(
    st.tuples(st.floats(0.1, 60.0), st.one_of(st.just(0.0), st.floats(0.05, 3.36))),
    min_size=1,
    max_size=6,
)
MAYBE = st.none


@st.composite
def machines(draw):
    carrier = draw(st.booleans())
    return Machine(
        working_width_m=draw(st.floats(3, 48)),
        speed_km_h=draw(st.floats(3, 25)),
        step=draw(st.one_of(MAYBE(), st.floats(0.1, 5))),
        least_rate=draw(st.one_of(MAYBE(), st.floats(0.1, 30))),
        most_rate=draw(st.one_of(MAYBE(), st.floats(30, 400))),
        hopper_kg=draw(st.one_of(MAYBE(), st.floats(50, 5000))),
        tank_l=draw(st.one_of(MAYBE(), st.floats(200, 6000))),
        carrier="humate" if carrier else "",
        carrier_may_vary=draw(st.booleans()) if carrier else None,
        blend_pct=draw(st.one_of(MAYBE(), st.floats(5, 100))),
        nozzle_size=draw(st.sampled_from(["", "02", "04", "08"])),
        pulse_width_ratio=draw(st.one_of(MAYBE(), st.floats(2, 8))),
        water_l_ha=draw(st.one_of(MAYBE(), st.floats(50, 500))),
    )


GRANULES = st.builds(Product, form=st.just(Form.GRANULE), boron_pct=st.floats(0.5, 21.0))
LIQUIDS = st.builds(
    Product,
    form=st.just(Form.SPRAY),
    boron_g_l=st.floats(2, 160),
    density_kg_l=st.one_of(MAYBE(), st.floats(1.0, 1.5)),
)
POWDERS = st.builds(
    Product,
    form=st.just(Form.SPRAY),
    boron_pct=st.floats(5, 20),
    compound=st.sampled_from(["boric acid", "borax", "pentahydrate", "octaborate"]),
)
PRODUCTS = st.one_of(GRANULES, LIQUIDS, POWDERS)
PLACES = st.sampled_from([Placement.BROADCAST, Placement.FOLIAR, Placement.FERTIGATION])


@given(DOSES, PRODUCTS, machines(), PLACES)
@CASES
def test_a_plan_never_adds_boron_and_its_product_holds_just_that(doses, product, machine, place):
    outcome = machine_plan(doses, product, machine, placement=place)
    share = boron_per_unit(product, outcome.machine)
    for (_, wanted), given_kg, rate in zip(
        doses, outcome.boron_kg_ha, outcome.product_rates, strict=True
    ):
        assert 0 <= given_kg <= wanted
        assert rate * share == pytest.approx(given_kg, abs=1e-12)
    stated = outcome.boron_pct if product.form is Form.GRANULE else outcome.boron_g_l
    per = 100.0 if product.form is Form.GRANULE else 1000.0
    for rate, given_kg in zip(outcome.product_rates, outcome.boron_kg_ha, strict=True):
        assert rate * stated / per == pytest.approx(given_kg, rel=1e-9, abs=1e-12)


@given(DOSES, PRODUCTS, machines(), PLACES)
@CASES
def test_a_second_time_changes_nothing(doses, product, machine, place):
    """Rates that are on the machine's steps stay there: a pack can be adapted to itself."""
    settled = settled_machine(doses, product, machine, place)
    once = machine_rate(np.array([rate for _, rate in doses]), product, settled)
    assert machine_rate(once, product, settled) == pytest.approx(once, rel=1e-6, abs=1e-9)


@given(DOSES, PRODUCTS, machines(), PLACES)
@CASES
def test_every_given_rate_is_one_the_machine_can_do(doses, product, machine, place):
    outcome = machine_plan(doses, product, machine, placement=place)
    least, most = rate_band(product, outcome.machine)
    for rate in outcome.product_rates:
        assert rate == 0 or least * (1 - 1e-6) <= rate <= most * (1 + 1e-6)
    if product.form is Form.SPRAY and place is not Placement.FERTIGATION and outcome.plan.points:
        for point in outcome.plan.points:
            bar = point.figures["pressure_bar"]
            assert outcome.machine.pressure_low_bar * (1 - 1e-6) <= bar
            assert bar <= outcome.machine.pressure_high_bar * (1 + 1e-6)
            assert point.figures.get("open_pct", 100.0) <= 100.0 * (1 + 1e-6)


@given(DOSES, st.one_of(LIQUIDS, POWDERS), machines(), PLACES)
@CASES
def test_a_chosen_mix_dissolves_and_burns_nothing(doses, product, machine, place):
    outcome = machine_plan(doses, product, machine, placement=place)
    if place is not Placement.FERTIGATION:
        strongest = strongest_mix_g_l(product, machine, place)
        assert outcome.boron_g_l <= strongest * (1 + 1e-9)
    codes = {found.code for found in outcome.findings}
    assert not codes & {"MACHINE-SOLUBLE", "MACHINE-BURN", "MACHINE-MIX-STRONG"}


@given(DOSES, GRANULES, machines())
@CASES
def test_half_the_boron_share_is_twice_the_product(doses, product, machine):
    free = replace(machine, step=None, least_rate=None, most_rate=None, carrier="")
    half = replace(product, boron_pct=product.boron_pct / 2)
    whole, double = machine_plan(doses, product, free), machine_plan(doses, half, free)
    assert double.product_rates == pytest.approx([2 * one for one in whole.product_rates])
    assert double.boron_kg_ha == pytest.approx(whole.boron_kg_ha)


@given(DOSES, PRODUCTS, machines(), PLACES)
@CASES
def test_units_change_words_and_no_figure(doses, product, machine, place):
    metric, us = (
        machine_plan(doses, product, machine, placement=place, units=system)
        for system in (UnitSystem.METRIC, UnitSystem.US)
    )
    assert metric.product_rates == us.product_rates
    assert metric.plan.points == us.plan.points
    assert metric.plan.facts == us.plan.facts
    assert [one.code for one in metric.findings] == [one.code for one in us.findings]


@given(DOSES, PRODUCTS, machines(), PLACES)
@CASES
def test_loads_and_their_parts_add_up(doses, product, machine, place):
    outcome = machine_plan(doses, product, machine, placement=place)
    facts = outcome.plan.facts
    total = sum(area * rate for (area, _), rate in zip(doses, outcome.product_rates, strict=True))
    for part in ("product", "carrier", "water"):
        for unit in ("kg", "l"):
            names = [f"{part}_{place_}_{unit}" for place_ in ("in_all", "full_load", "last_load")]
            if names[0] not in facts or outcome.plan.per_load == 0:
                continue
            loads = loads_of(total, outcome.plan.per_load)
            summed = loads.full * facts.get(names[1], 0.0) + facts.get(names[2], 0.0)
            assert summed == pytest.approx(facts[names[0]], rel=1e-6, abs=1e-6)


@given(st.floats(0, 1e5), st.one_of(MAYBE(), st.floats(1, 1e4)))
@CASES
def test_loads_hold_the_total(total, size):
    loads = loads_of(total, size)
    if size and total > 0:
        assert loads.full * size + loads.last == pytest.approx(total, rel=1e-7, abs=1e-5)
        assert 0 <= loads.last <= size * (1 + 1e-9)


@given(st.floats(0, 1e5), st.floats(1, 1000))
@CASES
def test_an_order_is_whole_bags_and_enough(total, bag):
    order = order_of(total, "kg", Product(form=Form.GRANULE, boron_pct=15, bag_kg=bag))
    assert order.amount >= total * 1.03 - 1e-6 * max(total, 1.0)
    assert order.amount <= total * 1.03 + bag + 1e-6
    assert order.bags * bag == pytest.approx(order.amount)


@given(st.sampled_from(["01", "02", "03", "04", "08"]), st.floats(1, 8), st.floats(0.8, 1.6),
       st.floats(3, 25))  # fmt: skip
@CASES
def test_flow_and_pressure_undo_each_other(size, bar, density, speed):
    machine = Machine(
        speed_km_h=speed, nozzle_size=size, pressure_low_bar=bar, pressure_high_bar=4 * bar
    )
    low, high = volume_band_l_ha(machine, density)
    assert high == pytest.approx(2 * low)  # four times the pressure, twice the flow
    assert pressure_bar(size, nozzle_flow_l_min(low, machine), density) == pytest.approx(bar)
    assert volume_l_ha(nozzle_flow_l_min(low, machine), machine) == pytest.approx(low)


@given(st.sampled_from(["boric acid", "borax", "pentahydrate", "octaborate"]),
       st.floats(0, 60), st.floats(0, 60))  # fmt: skip
@CASES
def test_warmer_water_never_holds_less(name, first, second):
    solid, (cold, warm) = solid_named(name), sorted((first, second))
    assert saturation_g_l(solid, cold) <= saturation_g_l(solid, warm) * (1 + 1e-12)


@given(GRANULES, machines())
@CASES
def test_a_blend_holds_between_nothing_and_all(product, machine):
    assert 0 < blend_share(product, machine) <= 1


@given(DOSES, st.floats(1.2, 8))
@CASES
def test_ways_out_never_give_a_zone_more(doses, turndown):
    ways = ways_out(doses, turndown)
    treated = [rate for _, rate in doses if rate > 0]
    if not treated or max(treated) <= min(treated) * turndown:
        assert not ways
        return
    assert [way.name for way in ways] == [
        "two passes", "lowest zones at 0", "two rates", "a tank for each rate",
    ]  # fmt: skip
    for way in ways:
        short = 0.0
        for (area, wanted), rate in zip(doses, way.rates_kg_ha, strict=True):
            assert 0 <= rate <= wanted + 1e-12
            short += area * (wanted - rate)
        assert way.short_kg == pytest.approx(short, abs=1e-9)
    # One pass of those that are one pass: highest over lowest within what the machine does.
    for way in ways[1:3]:
        given_rates = [rate for rate in way.rates_kg_ha if rate > 0]
        assert max(given_rates) <= min(given_rates) * turndown * (1 + 1e-6)


@given(DOSES)
@settings(max_examples=100, deadline=None)
def test_two_rates_are_the_best_two(doses):
    """Against every pair of rates."""
    ways = ways_out(doses, 2.0)
    assume(ways)
    rates = sorted({rate for _, rate in doses if rate > 0})
    least = math.inf
    for low in rates:
        for high in [one for one in rates if low <= one <= 2 * low] + [2 * low]:
            short = sum(
                area * (want - (high if want >= high else low if want >= low else 0.0))
                for area, want in doses
            )
            least = min(least, short)
    assert ways[2].short_kg <= least + 1e-6


# --- simplifying ------------------------------------------------------------------------------


def waves(count: int, seed: int):
    """A square field of strips with ragged edges between them, a valid coverage."""
    chance = np.random.default_rng(seed)
    east = np.linspace(0, 400, 81)
    lines = [np.column_stack([east, np.full(81, 0.0)])]
    for strip in range(1, count):
        north = 400 * strip / count + chance.normal(0, 3, 81)
        lines.append(np.column_stack([east, north]))
    lines.append(np.column_stack([east, np.full(81, 400.0)]))
    return [
        shapely.Polygon(np.vstack([below, above[::-1]]))
        for below, above in itertools.pairwise(lines)
    ]


@given(st.integers(2, 5), st.integers(0, 50), st.integers(0, 4))
@settings(max_examples=40, deadline=None)
def test_simpler_zones_cover_the_same_ground(count, seed, held):
    areas = waves(count, seed)
    fixed = [place == held for place in range(count)]
    rates = [float(place) for place in range(count)]
    profile = Profile(most_vertices=400, most_vertices_in_all=max(120, 165 * count - 120))
    try:
        fitted = fit_zones(areas, rates, fixed, profile, most_tolerance_m=12.0)
    except Refusal:
        return
    assert shapely.coverage_is_valid(list(fitted.areas))
    union = shapely.union_all(list(fitted.areas))
    assert shapely.symmetric_difference(union, shapely.union_all(areas)).area < 1e-6
    assert not shape_of(fitted.areas, single_parts=False).over(profile)
    for before, after, still in zip(areas, fitted.areas, fixed, strict=True):
        if still:
            assert shapely.symmetric_difference(before, after).area < 1e-9
    before_kg = sum(area.area / 1e4 * rate for area, rate in zip(areas, rates, strict=True))
    after_kg = sum(area.area / 1e4 * rate for area, rate in zip(fitted.areas, rates, strict=True))
    error = fitted.error
    assert error.more_kg - error.less_kg == pytest.approx(after_kg - before_kg, abs=1e-9)
    assert error == rate_error(areas, fitted.areas, rates)


@given(st.floats(0, 500), st.integers(0, 4), st.sampled_from(["kg/ha", "lb/ac"]))
@CASES
def test_a_controllers_rate_is_never_rounded_up(rate, decimals, unit):
    profile = Profile(rate_decimals=decimals, mass_unit=unit)
    factor = 1.0 if unit == "kg/ha" else 0.45359237 / 0.40468564224
    shown = profile.rate(rate, "kg") * factor
    assert shown <= rate + 2e-6 * 10.0**-decimals
    assert shown > rate - factor * 10.0**-decimals - 1e-9

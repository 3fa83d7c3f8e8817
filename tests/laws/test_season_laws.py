"""What must hold of any two seasons."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st

from schorl.model.change_summary import change_summary
from schorl.steps.comparing import compare
from schorl.steps.season_strips import check_strips, doubled_kg_ha
from schorl.steps.season_tests import holm
from support.seasons import halves, lattice, season

PLACES = lattice(24)


def borons(random, *, change=0.0):
    west = PLACES[:, 0] < PLACES[:, 0].mean()
    first = random.uniform(0.2, 1.2, len(PLACES))
    return first, np.maximum(first + change * west + random.normal(0, 0.1, len(PLACES)), 0.02)


def pair(seed, *, change=0.0, split=0.5):
    first, second = borons(np.random.default_rng(seed), change=change)
    return (
        season(first, places=PLACES),
        season(second, name="2026", places=PLACES, zones=halves((0.8, 0.4), split=split)),
    )


def figures(change):
    """A comparison as numbers, its words and the names of the seasons left out."""
    return {k: v for k, v in change_summary(change).items() if k not in ("text", "seasons")}


@given(seed=st.integers(0, 2**32), change=st.floats(-0.3, 0.3), split=st.floats(0.3, 0.7))
@settings(max_examples=40, deadline=None)
def test_backwards_is_forwards_reversed(seed, change, split):
    before, after = pair(seed, change=change, split=split)
    there, back = compare(before, after, draws=0), compare(after, before, draws=0)
    assert back.shift.mean == -there.shift.mean
    assert (back.shift.low, back.shift.high) == (-there.shift.high, -there.shift.low)
    assert [one.change for one in back.zones] == [-one.change for one in there.zones]
    assert [one.real for one in back.zones] == [one.real for one in there.zones]
    assert (back.change_map.change_mg_kg == -there.change_map.change_mg_kg).all()
    assert (back.change_map.real == there.change_map.real).all()
    assert (back.moved.transition_ha == there.moved.transition_ha.T).all()
    assert back.moved.moved_ha == there.moved.moved_ha
    assert figures(compare(before, after, draws=0)) == figures(there)


@given(seed=st.integers(0, 2**32))
@settings(max_examples=25, deadline=None)
def test_a_season_with_itself_shows_nothing(seed):
    before, _ = pair(seed)
    change = compare(before, before, draws=0)
    assert change.same
    assert (change.shift.mean, change.shift.low, change.shift.high) == (0.0, 0.0, 0.0)
    assert not any(one.real or one.change for one in change.zones)
    assert not change.change_map.real.any()
    assert change.moved.moved_ha == 0.0
    assert change.moved.kappa == change.moved.adjusted_rand == 1.0


@given(seed=st.integers(0, 2**32), factor=st.floats(0.5, 4.0), move=st.floats(-5000, 5000))
@settings(max_examples=25, deadline=None)
def test_units_and_places_do_not_decide(seed, factor, move):
    """All boron times a factor, all coordinates moved: the same zones are real."""
    before, after = pair(seed, change=0.15)
    there = compare(before, after, draws=0)

    def scaled(pack):
        boron = pack.samples.properties["boron"]
        taken = replace(boron, values=boron.values * factor)
        return replace(pack, samples=replace(pack.samples, properties={"boron": taken}))

    other = compare(scaled(before), scaled(after), draws=0)
    for one, again in zip(there.zones, other.zones, strict=True):
        assert again.change == pytest.approx(factor * one.change, rel=1e-9)
        assert again.p == pytest.approx(one.p, rel=1e-6, abs=1e-12)
    assert other.shift.relative == pytest.approx(there.shift.relative, rel=1e-9, abs=1e-12)


@given(seed=st.integers(0, 2**32), order=st.randoms(use_true_random=False))
@settings(max_examples=25, deadline=None)
def test_the_order_of_samples_changes_nothing(seed, order):
    before, after = pair(seed, change=0.1)
    turn = list(range(len(PLACES)))
    order.shuffle(turn)
    boron = after.samples.properties["boron"].values[turn]
    shuffled = replace(
        after, samples=replace(season(boron, places=PLACES[turn], name="2026").samples)
    )
    there, other = compare(before, after, draws=0), compare(before, shuffled, draws=0)
    assert [one.change for one in other.zones] == pytest.approx([o.change for o in there.zones])
    assert len(other.pairs) == len(there.pairs) == len(PLACES)


@given(st.lists(st.floats(0, 1), min_size=1, max_size=12))
def test_holm_is_between_raw_and_bonferroni_and_keeps_order(p):
    adjusted = holm(p)
    raw = np.array(p)
    assert (adjusted >= raw - 1e-15).all()
    assert (adjusted <= np.minimum(raw * len(raw), 1) + 1e-15).all()
    assert (np.diff(adjusted[np.argsort(raw, kind="stable")]) >= 0).all()


@given(
    rates=st.tuples(st.floats(0.1, 1.5), st.floats(0.1, 1.5)),
    cap=st.floats(0.1, 3.0),
    ceiling=st.floats(0.0, 3.0),
)
@settings(max_examples=100, deadline=None)
def test_strips_keep_the_limits_and_the_field(rates, cap, ceiling):
    limits = {"need": 0.5, "rate cap": cap, "soil ceiling": ceiling}
    zones = tuple(replace(zone, limits_kg_ha=limits) for zone in halves(rates))
    pack = season(np.full(len(PLACES), 0.5), places=PLACES, zones=zones)
    for strip in check_strips(pack):
        assert pack.boundary.buffer(1e-6).covers(strip.area)
        for number, rate in zip(strip.zones, strip.rates_kg_ha, strict=True):
            own = zones[number - 1].boron_kg_ha
            if strip.kind == "untreated":
                assert rate == 0
            else:
                assert own < rate <= min(2 * own, cap, ceiling) + 1e-12


def test_strips_keep_clear_of_ground_that_gets_none():
    pack = season(np.full(len(PLACES), 0.5), places=PLACES)
    assert check_strips(pack)
    for strip in check_strips(pack):
        west, south, *_ = strip.area.bounds  # strips run east: a spot on the southern side
        spot = shapely.box(west + 20, south - 2, west + 24, south + 2)
        kept = tuple(
            replace(zone, area=zone.area.difference(spot), limits_kg_ha={}) for zone in pack.zones
        )
        off = replace(kept[0], number=9, kind="keep-off", area=spot, boron_kg_ha=0.0)
        for other in check_strips(replace(pack, zones=(*kept, off))):
            assert other.area.intersection(spot).area < 1.0


def test_a_doubled_strip_keeps_the_limits_of_a_zone_it_touches():
    low = replace(halves()[0], boron_kg_ha=0.4, limits_kg_ha={"rate cap": 0.5})
    high = replace(low, number=2, boron_kg_ha=1.0, limits_kg_ha={"rate cap": 2.24})
    assert doubled_kg_ha(high) == 2.0
    assert doubled_kg_ha(high, beside=[low]) == 0.5


def test_numbers_are_never_given_twice():
    before = season(np.full(len(PLACES), 0.5), places=PLACES, retired_numbers=(3, 4))
    thirds = halves(split=0.02)  # the narrow western zone matches none of the earlier ones
    after = season(np.full(len(PLACES), 0.5), places=PLACES, name="2026", zones=thirds)
    moved = compare(before, after, draws=0).moved
    assert len(set(moved.kept.values())) == len(moved.kept)
    assert not set(moved.kept.values()) & {3, 4}
    assert {3, 4} <= set(moved.retired)

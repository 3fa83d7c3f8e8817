"""Comparing seasons: pairs, kinds of samples, ground that differs, tests that must not be made."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import shapely

from schorl.errors import Refusal
from schorl.steps.comparing import compare
from schorl.steps.season_map import change_map
from schorl.steps.season_revisit import sites_wanted
from schorl.steps.season_sites import fair_zones, site_pairs
from schorl.steps.season_tests import ZoneData, zone_changes
from schorl.steps.season_zones import agreement_by_chance
from support.seasons import EAST, HIGH_M, NORTH, WIDE_M, halves, lattice, season

PLACES = lattice(40)


def flat(value=0.5, count=None):
    return np.full(len(PLACES) if count is None else count, value)


def noisy(seed, level=0.5, sd=0.1):
    return np.random.default_rng(seed).normal(level, sd, len(PLACES))


def codes(change):
    return {one.code for one in change.findings}


def test_sites_are_paired_within_ten_metres_and_once():
    before = season(flat(), places=PLACES)
    moved = PLACES + np.array([6.0, -6.0])
    moved[0] += 20.0
    pairs = site_pairs(before.samples, season(flat(), places=moved).samples)
    assert list(pairs.before) == list(range(1, len(PLACES)))
    assert (pairs.before == pairs.after).all()
    twice = np.vstack([PLACES, PLACES[:3] + 1.0])
    pairs = site_pairs(before.samples, season(flat(count=len(twice)), places=twice).samples)
    assert (pairs.after == np.arange(len(PLACES))).all()  # the nearer of two


def composites(values, *, name, split=0.5):
    areas = tuple(zone.area for zone in halves(split=split))
    middles = np.array([[area.centroid.x, area.centroid.y] for area in areas])
    pack = season(values, name=name, places=middles)
    return replace(
        pack, samples=replace(pack.samples, kind=("zone", "zone"), areas=areas,
                              cores=np.array([15, 15])),
    )  # fmt: skip


def test_composites_are_paired_by_their_areas_and_tested_with_their_known_error():
    change = compare(
        composites([0.4, 0.5], name="2025"), composites([0.8, 0.52], name="2026"), draws=0
    )
    assert [(a, b) for a, b in zip(change.pairs.before, change.pairs.after, strict=True)] == [
        (0, 0), (1, 1),
    ]  # fmt: skip
    assert [one.test for one in change.zones] == ["one composite each"] * 2
    # Two composites of 15 cores, laboratory 15 %, cores 30 %: about 0.1 mg/kg each at 0.58.
    assert [one.real for one in change.zones] == [True, False]
    assert change.change_map is None
    assert "sites" in change.no_map
    other = compare(
        composites([0.4, 0.5], name="2025"), composites([0.8, 0.52], name="2026", split=0.8),
        draws=0,
    )  # fmt: skip
    assert len(other.pairs) < 2


def test_drawn_zones_take_samples_by_what_the_others_predict():
    """A low sample in the rich half stays in the poor zone that was drawn around it: unfair."""
    west = PLACES[:, 0] < EAST + WIDE_M / 2
    boron = np.where(west, 0.4, 0.8) + np.random.default_rng(1).normal(0, 0.02, len(PLACES))
    odd = int(np.flatnonzero(~west)[np.argmax(PLACES[~west, 0])])
    boron[odd] = 0.4
    spot = shapely.Point(PLACES[odd]).buffer(40)
    zones = halves()
    poor = replace(zones[0], area=zones[0].area.union(spot))
    rich = replace(zones[1], area=zones[1].area.difference(spot))
    pack = season(boron, places=PLACES, zones=(poor, rich), origin="clusters")
    cells = pack.grid.centres_m
    surface = np.where(cells[:, 0] < EAST + WIDE_M / 2, 0.4, 0.8)
    pack = replace(pack, surfaces={"boron": surface + 1e-3 * np.sin(cells[:, 1])})
    assert fair_zones(pack)[odd] == 1
    assert fair_zones(replace(pack, origin="own layer"))[odd] == 0


def test_no_difference_between_methods_depths_and_kinds_of_unit():
    before = season(noisy(1), places=PLACES)
    for campaign, word in (
        ({"method": "mehlich-3"}, "mehlich-3"), ({"depth_cm": 30.0}, "30 cm"),
        ({"per_volume": True}, "litre"),
    ):  # fmt: skip
        after = season(noisy(2), places=PLACES, name="2026")
        changed = replace(after.samples, campaign=replace(after.samples.campaign, **campaign))
        change = compare(before, replace(after, samples=changed), draws=0)
        assert word in change.refused
        assert (change.shift, change.zones, change.change_map) == (None, (), None)
        assert change.rates
        assert "SEASON-DIFFERENT" in codes(change)


def test_a_shift_of_the_whole_campaign_makes_nothing_real():
    before = season(noisy(1), places=PLACES)
    after = season(noisy(1) * 1.9 + 0.1, places=PLACES, name="2026")
    change = compare(before, after, draws=0)
    assert change.shift.warning
    assert not any(one.real for one in change.zones)
    assert not change.change_map.real.any()
    assert "SEASON-SHIFT" in codes(change)
    assert "analysed again" in change.text


def test_only_common_ground_counts():
    before = season(noisy(1), places=PLACES)
    smaller = shapely.box(EAST, NORTH, EAST + 0.7 * WIDE_M, NORTH + HIGH_M)
    after = replace(season(noisy(2), places=PLACES, name="2026"), boundary=smaller)
    change = compare(before, after, draws=0)
    assert change.common_ha == pytest.approx(0.7 * 24, rel=2e-3)
    assert change.moved.transition_ha.sum() == pytest.approx(0.7 * 24, rel=2e-3)
    assert "SEASON-AREA" in codes(change)
    far = shapely.affinity.translate(smaller, xoff=5000)
    with pytest.raises(Refusal) as refused:
        compare(before, replace(after, boundary=far), draws=0)
    assert refused.value.findings[0].code == "SEASON-ELSEWHERE"


def test_values_below_the_limit_are_told():
    after = season(noisy(2), places=PLACES, name="2026")
    boron = after.samples.properties["boron"]
    below = replace(boron, below_limit=np.arange(len(PLACES)) < 3)
    after = replace(after, samples=replace(after.samples, properties={"boron": below}))
    change = compare(season(noisy(1), places=PLACES), after, draws=0)
    note = next(one for one in change.findings if one.code == "SEASON-BELOW")
    assert note.what.startswith("3 values")


def test_new_sites_are_tested_as_two_samples_and_give_no_map():
    elsewhere = PLACES + np.array([25.0, 25.0])
    change = compare(
        season(noisy(1), places=PLACES), season(noisy(2, 0.8), places=elsewhere, name="2026"),
        draws=0,
    )  # fmt: skip
    assert len(change.pairs) == 0
    assert {one.test for one in change.zones} == {"new sites"}
    assert change.change_map is None
    assert np.isnan(change.shift.correlation)


def test_zones_without_enough_samples_are_not_tested_and_do_not_cost_the_others():
    few = ZoneData(zone=1, before=np.array([0.5]), after=np.array([0.9]), paired=True)
    many = ZoneData(zone=2, before=noisy(1), after=noisy(1) + 0.1 + 0.01 * noisy(3), paired=True)
    rows = zone_changes([few, many], doubted=False)
    assert (rows[0].test, rows[0].real) == ("too few samples", False)
    assert rows[1].p_adjusted == rows[1].p


def test_a_nugget_of_nothing_makes_no_cell_certain():
    pack = season(noisy(1), places=PLACES)
    smooth = 0.05 * np.sin(PLACES[:, 0] / 100.0)
    mapped = change_map(PLACES, smooth, pack.grid, lab_sd=0.1, doubted=False)
    assert mapped.sd_mg_kg.min() > 0.005
    assert mapped.p_adjusted.min() > 0.0


def test_sites_wanted_grow_with_noise():
    assert sites_wanted(0.02) == 3
    assert sites_wanted(0.10) == 8  # (1.96 + 0.84)² = 7.85
    assert sites_wanted(1.0) == 12


def test_boron_balance_adds_up():
    gained = 0.1
    change = compare(
        season(noisy(1), places=PLACES, removed_kg_ha=0.2),
        season(noisy(1) + gained + 1e-3 * noisy(5), places=PLACES, name="2026"),
        draws=0,
    )
    for row, zone in zip(change.balance, halves(), strict=True):
        assert row.applied == zone.boron_kg_ha
        assert row.change == pytest.approx(gained * 2.8, abs=0.01)
        assert row.recovery == pytest.approx((row.change + 0.2) / row.applied)
        assert row.recovery_low < row.recovery < row.recovery_high


def test_new_sites_move_zones_more_by_chance_than_the_same_ones():
    random = np.random.default_rng(3)
    wave = np.sin((PLACES[:, 0] - EAST) / WIDE_M * 2 * np.pi)
    boron = 0.6 + 0.25 * wave + random.normal(0, 0.05, len(PLACES))
    pack = season(boron, places=PLACES, origin="clusters")
    east = pack.grid.centres_m[:, 0]
    pack = replace(
        pack, surfaces={"boron": 0.6 + 0.25 * np.sin((east - EAST) / WIDE_M * 2 * np.pi)}
    )
    few = PLACES[:12] + 3.0
    new = season(boron[:12], name="2026", places=few)
    same, other = (
        agreement_by_chance(pack, later.samples, random=np.random.default_rng(1), draws=12)
        for later in (pack, new)
    )
    assert 0 < other[0] < same[0] < 1
    assert 0 < other[1] < same[1] < 1

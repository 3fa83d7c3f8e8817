"""Laws of ordinary kriging, whatever the data."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from schorl.geostat import Support, Variogram, krige, leave_one_out

FAMILIES = st.sampled_from(["spherical", "exponential", "matern32"])
SEEDS = st.integers(0, 10_000)


def case(seed, family, *, nugget=0.2):
    random = np.random.default_rng(seed)
    places = random.uniform(0, 400, (18, 2))
    values = random.normal(5, 2, 18)
    model = Variogram(family=family, nugget=nugget, partial_sill=1.0, practical_range_m=180.0)
    return places, values, random.uniform(0, 400, (30, 2)), model, random


@given(SEEDS, FAMILIES)
@settings(max_examples=60, deadline=None)
def test_exact_at_samples_without_filter(seed, family):
    places, values, _, model, _ = case(seed, family)
    estimate, variance = krige(places, values, places, model, filtered=False)
    assert (estimate == values).all()
    assert (variance == 0).all()


@given(SEEDS, FAMILIES)
@settings(max_examples=60, deadline=None)
def test_variance_is_never_negative_and_does_not_see_the_values(seed, family):
    places, values, targets, model, random = case(seed, family)
    _, first = krige(places, values, targets, model, block_m=20)
    _, second = krige(places, random.normal(0, 9, 18), targets, model, block_m=20)
    assert (first >= 0).all()
    assert (first == second).all()


@given(SEEDS, FAMILIES, st.floats(-50, 50), st.floats(0.1, 20))
@settings(max_examples=60, deadline=None)
def test_shift_and_scale_carry_through(seed, family, shift, scale):
    places, values, targets, model, _ = case(seed, family)
    plain, _ = krige(places, values, targets, model)
    moved, _ = krige(places, values * scale + shift, targets, model)
    assert moved == pytest.approx(plain * scale + shift, rel=1e-8, abs=1e-7)


@given(SEEDS, FAMILIES, st.floats(0, 6.28))
@settings(max_examples=60, deadline=None)
def test_order_turning_and_moving_change_nothing(seed, family, angle):
    places, values, targets, model, random = case(seed, family)
    plain, spread = krige(places, values, targets, model)
    order = random.permutation(len(values))
    turn = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    moved, again = krige(places[order] @ turn.T + 4e5, values[order], targets @ turn.T + 4e5, model)
    assert moved == pytest.approx(plain, abs=1e-7)
    assert again == pytest.approx(spread, abs=1e-7)


@given(SEEDS, FAMILIES)
@settings(max_examples=20, deadline=None)
def test_leave_one_out_is_what_leaving_out_gives(seed, family):
    places, values, _, model, _ = case(seed, family)
    residual, variance = leave_one_out(places, values, model)
    for i in range(0, len(values), 5):
        rest = np.arange(len(values)) != i
        estimate, spread = krige(places[rest], values[rest], places[[i]], model, filtered=False)
        assert values[i] - estimate[0] == pytest.approx(residual[i], abs=1e-9)
        assert spread[0] == pytest.approx(variance[i], abs=1e-9)


def test_a_point_support_is_a_point():
    places, values, targets, model, _ = case(3, "spherical")
    plain = krige(places, values, targets, model)
    support = [Support(points_m=one[None], cores=8, kind="point") for one in places]
    again = krige(places, values, targets, model, support=support)
    assert again[0] == pytest.approx(plain[0], abs=1e-12)


def test_a_zone_composite_predicts_its_own_mean():
    random = np.random.default_rng(2)
    centres = np.array([(x, y) for x in (50, 150, 250) for y in (50, 150, 250)], dtype=float)
    steps = np.linspace(-40, 40, 5)
    offsets = np.array([(x, y) for x in steps for y in steps])
    support = [Support(points_m=one + offsets, cores=15, kind="zone") for one in centres]
    values = random.normal(2, 0.5, 9)
    model = Variogram(family="spherical", nugget=1e-9, partial_sill=1.0, practical_range_m=200.0)
    estimate, _ = krige(centres, values, centres[4] + offsets, model, support=support)
    assert estimate.mean() == pytest.approx(values[4], abs=0.1)


def test_threads_do_not_change_a_bit(monkeypatch):
    places, values, _, model, random = case(9, "matern32")
    targets = random.uniform(0, 400, (30_000, 2))
    answers = []
    for count in ("1", "2", "8"):
        monkeypatch.setenv("SCHORL_THREADS", count)
        answers.append(krige(places, values, targets, model, block_m=5))
    for estimate, variance in answers[1:]:
        assert estimate.tobytes() == answers[0][0].tobytes()
        assert variance.tobytes() == answers[0][1].tobytes()

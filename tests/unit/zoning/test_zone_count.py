"""The gate and the number of zones."""

from __future__ import annotations

import numpy as np
import pytest

from schorl.zoning.zone_count import (
    choose_count,
    discrete_classes,
    enough_zones,
    gate_open,
    sample_table,
)

GOOD = {1: 0.0, 2: 0.20, 3: 0.27, 4: 0.30, 5: 0.31}


@pytest.mark.parametrize(
    ("savings", "p", "is_open"),
    [
        (GOOD, 0.002, True),
        (GOOD, 0.02, True),
        (GOOD, 0.021, False),  # no pattern in need and soil
        ({1: 0.0, 2: 0.05, 3: 0.059}, 0.002, False),  # nothing gained
        ({1: 0.0, 2: 0.05, 3: 0.06}, 0.002, True),
        ({1: 0.0}, 0.002, False),  # no map at all
    ],
)
def test_the_gate_needs_pattern_and_saving(savings, p, is_open):
    assert gate_open(savings, p) is is_open


def test_without_classes_the_least_number_with_85_percent_of_the_best_saving():
    assert enough_zones(GOOD) == 3  # 0.27 >= 0.85 x 0.31 = 0.2635 > 0.20
    assert choose_count(GOOD, 1) == 3
    assert choose_count(GOOD, None) == 3


def test_discrete_classes_decide_where_their_number_saves_enough():
    assert choose_count(GOOD, 2) == 2
    assert choose_count({**GOOD, 2: 0.05}, 2) == 3


def blobs(n: int, apart: float, classes: int, seed: int = 4):
    random = np.random.default_rng(seed)
    which = np.arange(n) % classes
    return random.normal(size=(n, 3)) + apart * np.column_stack([which, -which, 0 * which])


def test_well_separated_classes_are_counted_and_a_cloud_is_one():
    assert discrete_classes(blobs(60, 4.0, 3), seed=0) == 3
    assert discrete_classes(blobs(60, 0.0, 1), seed=0) == 1


def test_bic_is_that_of_the_formula():
    """p = kd + d(d+1)/2 + k - 1 free figures for one shared covariance."""
    from sklearn.mixture import GaussianMixture

    table = blobs(60, 4.0, 2)
    mixture = GaussianMixture(2, covariance_type="tied", random_state=0).fit(table)
    figures = 2 * 3 + 3 * 4 // 2 + 1
    by_hand = -2.0 * mixture.score(table) * len(table) + figures * np.log(len(table))
    assert mixture.bic(table) == pytest.approx(by_hand)


def test_few_samples_or_none_say_nothing():
    assert discrete_classes(blobs(14, 4.0, 2), seed=0) is None
    assert discrete_classes(np.empty((60, 0)), seed=0) is None


@pytest.mark.parametrize("seed", range(4))
def test_rounded_values_do_not_become_classes(seed):
    """Boron told in steps of 0.2: without spreading them the steps count as three to five."""
    random = np.random.default_rng(seed)
    rounded = np.round(random.normal(0.6, 0.12, 60) / 0.2) * 0.2
    table = sample_table([rounded, random.normal(20, 3, 60)], seed=0)
    assert discrete_classes(table, seed=0) == 1


def test_skewed_columns_and_outliers_do_not_become_classes():
    random = np.random.default_rng(6)
    skewed = random.lognormal(0.0, 0.8, 60)
    wild = random.normal(20.0, 3.0, 60)
    wild[:2] = 80.0
    table = sample_table([skewed, wild], seed=0)
    assert discrete_classes(table, seed=0) == 1


def test_incomplete_samples_and_constant_columns_are_dropped():
    columns = [np.array([1.0, 2.0, np.nan, 4.0]), np.array([3.0, 3.0, 3.0, 3.0])]
    assert sample_table(columns, seed=0).shape == (3, 1)

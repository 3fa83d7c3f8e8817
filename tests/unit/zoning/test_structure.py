"""The permutation test: finds order, and finds it as often as it says where there is none."""

from __future__ import annotations

import numpy as np

from schorl.zoning.structure import moran, nearest_neighbours, structure_p


def places(n: int, seed: int):
    return np.random.default_rng(seed).uniform(0, 500, (n, 2))


def test_a_gradient_is_found_at_the_least_p_that_999_shuffles_allow():
    where = places(40, 1)
    assert structure_p(where, where[:, 0], seed=0) == 1 / 1000


def test_noise_passes_at_one_in_ten_about_as_often_as_it_should():
    """Also with soil that the need is made from: what they share is no order."""
    random = np.random.default_rng(7)
    passed = np.zeros(2)
    for seed in range(200):
        boron, clay = random.normal(size=(2, 40))
        passed[0] += structure_p(places(40, seed), boron, seed=seed, permutations=99) <= 0.10
        passed[1] += (
            structure_p(
                places(40, seed), clay - boron, [boron, clay], seed=seed, permutations=99
            ) <= 0.10
        )  # fmt: skip
    # 200 draws of chance 0.10: 20 expected, SD 4.2; four SDs either way.
    assert ((passed >= 4) & (passed <= 37)).all()


def test_order_that_need_and_soil_share_is_found_where_the_need_alone_leaves_doubt():
    """Weak order in three properties, fields of 30 samples: found more often than in the need."""
    found = np.zeros(2)
    for seed in range(60):
        random = np.random.default_rng(seed)
        where = places(30, seed)
        half = (where[:, 0] > 250) * 1.0
        soil = [1.2 * half * sign + random.normal(size=30) for sign in (1.0, -1.0, 1.0)]
        need = soil[1] + soil[2] + 0.6 * soil[0]  # in part the order cancels
        found += [
            structure_p(where, need, seed=seed, permutations=99) <= 0.01,
            structure_p(where, need, soil, seed=seed, permutations=99) <= 0.01,
        ]
    assert found[1] > found[0] + 20


def test_missing_and_constant_properties_say_nothing():
    where = places(30, 4)
    need = np.random.default_rng(4).normal(size=30)
    alone = structure_p(where, need, seed=2)
    assert structure_p(where, need, [np.full(30, 22.0)], seed=2) == alone
    assert structure_p(where, need, [np.full(30, np.nan)], seed=2) == alone
    some = where[:, 1].copy()
    some[:10] = np.nan
    assert structure_p(where, need, [some], seed=2) < alone


def test_no_differences_or_too_few_samples_are_no_evidence():
    assert structure_p(places(30, 1), np.full(30, 0.4), seed=0) == 1.0
    assert structure_p(places(4, 1), np.arange(4.0), seed=0) == 1.0


def test_samples_without_a_value_are_left_out():
    where = places(30, 2)
    values = where[:, 1].copy()
    gaps = np.concatenate([values, [np.nan, np.nan]])
    more = np.vstack([where, [[1.0, 1.0], [2.0, 2.0]]])
    assert structure_p(more, gaps, seed=3) == structure_p(where, values, seed=3)


def test_every_sample_has_neighbours_other_than_itself_even_in_one_place():
    where = np.repeat([[0.0, 0.0], [5.0, 5.0]], 8, axis=0)
    found = nearest_neighbours(where)
    assert found.shape == (16, 6)
    assert (found != np.arange(16)[:, None]).all()


def test_few_samples_get_fewer_neighbours_so_that_the_statistic_can_vary():
    assert nearest_neighbours(places(7, 1)).shape == (7, 3)


def test_moran_of_a_worked_line():
    # Values 1 2 3 on a line, each with its one nearest neighbour: deviations -1 0 1, all
    # products with the middle are 0.
    assert moran(np.array([1.0, 2.0, 3.0]), np.array([[1], [0], [1]])) == 0.0
    # 1 1 3 3, neighbours in pairs: every product of deviations is 1, over a square sum of 4.
    assert moran(np.array([1.0, 1.0, 3.0, 3.0]), np.array([[1], [0], [3], [2]])) == 1.0

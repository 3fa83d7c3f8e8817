"""Zones of two seasons: matched by area, numbers kept for ever."""

from __future__ import annotations

import numpy as np
import pytest
import shapely

from schorl.zoning.matching import (
    adjusted_rand,
    adjusted_rand_by_area,
    disagreement,
    kappa,
    match_zones,
    matched_numbers,
    squared_table,
    transition_ha,
)

THIRDS = [shapely.box(0, 0, 100, 100), shapely.box(100, 0, 200, 100), shapely.box(200, 0, 300, 100)]


def test_a_map_matches_itself_whatever_the_order():
    match = match_zones(THIRDS, [THIRDS[2], THIRDS[0], THIRDS[1]])
    assert match.pairs == ((0, 1), (1, 2), (2, 0))
    assert match.overlap == (1.0, 1.0, 1.0)
    assert match.gone == match.fresh == ()
    assert matched_numbers(match, (1, 2, 3)) == ((3, 1, 2), ())


def test_transition_is_in_hectares():
    later = [shapely.box(0, 0, 150, 100), shapely.box(150, 0, 300, 100)]
    assert transition_ha(THIRDS, later).tolist() == [[1.0, 0.0], [0.5, 0.5], [0.0, 1.0]]


def test_zones_that_hardly_overlap_are_new_and_numbers_are_not_used_again():
    later = [
        shapely.box(0, 0, 100, 100),
        shapely.box(100, 0, 300, 10),
        shapely.box(100, 10, 300, 100),
    ]
    match = match_zones(THIRDS, later)
    # 9 000 m² of the 18 000 m² block lies in each earlier zone: 9/19 of the union, a match.
    assert match.pairs == ((0, 0), (1, 2))
    assert match.gone == (2,)
    assert match.fresh == (1,)
    numbers, retired = matched_numbers(match, (1, 2, 3), retired=(7,))
    assert numbers == (1, 8, 2)
    assert retired == (3, 7)


def test_the_whole_overlap_is_made_largest_not_each_pair_greedily():
    earlier = [shapely.box(0, 0, 100, 10), shapely.box(100, 0, 150, 10)]
    later = [shapely.box(40, 0, 150, 10), shapely.box(0, 0, 40, 10)]
    # Greedy would pair 0 with 0 (600 m²) and leave 1 with nothing; the best sum is 400 + 500.
    assert match_zones(earlier, later).pairs == ((0, 1), (1, 0))


def test_squared_table_puts_pairs_on_the_diagonal():
    later = [
        shapely.box(0, 0, 100, 100),
        shapely.box(100, 0, 300, 10),
        shapely.box(100, 10, 300, 100),
    ]
    table = squared_table(match_zones(THIRDS, later))
    assert table.shape == (4, 4)
    assert table.sum() == pytest.approx(3.0)
    assert table[0, 0] == pytest.approx(1.0)
    assert table[1, 1] == pytest.approx(0.9)
    assert table[2].tolist() == pytest.approx([0.0, 0.9, 0.0, 0.1])


def test_disagreement_splits_into_quantity_and_allocation():
    swapped = np.array([[30.0, 20.0], [20.0, 30.0]])
    assert disagreement(swapped) == pytest.approx((0.0, 0.4))
    grown = np.array([[50.0, 20.0], [0.0, 30.0]])
    assert disagreement(grown) == pytest.approx((0.2, 0.0))


def test_adjusted_rand_by_area_is_the_limit_of_ever_smaller_cells():
    table = np.array([[1.2, 0.3], [0.4, 2.1]])
    assert adjusted_rand_by_area(table) == pytest.approx(adjusted_rand(table * 1e7), abs=1e-6)


def test_same_partition_is_full_agreement():
    table = np.diag([3.0, 4.0, 5.0])
    assert adjusted_rand(table) == adjusted_rand_by_area(table) == kappa(table) == 1.0

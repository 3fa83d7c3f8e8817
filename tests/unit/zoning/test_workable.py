"""Opening to the machine's rectangle, merging small regions, strips in narrow fields."""

from __future__ import annotations

import numpy as np
import pytest

from schorl.zoning.regions import label_regions, merge_small
from schorl.zoning.workable import Kernel, domain_of, opened, strips


@pytest.mark.parametrize("across", [1, 2, 3, 4, 5, 6])
@pytest.mark.parametrize("along", [1, 2, 3, 6])
def test_a_rectangle_of_exactly_the_kernel_stays_and_one_cell_less_goes(across, along):
    labels = np.zeros((20, 20), np.int16)
    labels[5 : 5 + across, 7 : 7 + along] = 1
    kept = opened(labels, Kernel(across, along))
    assert kept[labels == 1].all()
    if along > 1:
        labels[5 : 5 + across, 7] = 0
        assert not opened(labels, Kernel(across, along))[labels == 1].any()


def brute_opening(labels, kernel):
    """Union of all kernel rectangles that hold one label, by trying every one."""
    rows, cols = labels.shape
    kept = np.zeros(labels.shape, bool)
    for row in range(rows - kernel.across + 1):
        for col in range(cols - kernel.along + 1):
            window = labels[row : row + kernel.across, col : col + kernel.along]
            if window.min() == window.max() >= 0:
                kept[row : row + kernel.across, col : col + kernel.along] = True
    return kept


@pytest.mark.parametrize("kernel", [Kernel(2, 3), Kernel(3, 2), Kernel(4, 4), Kernel(1, 5)])
def test_opening_is_the_union_of_all_rectangles_of_one_label(kernel):
    random = np.random.default_rng(3)
    coarse = random.integers(-1, 3, (6, 6))
    labels = np.kron(coarse, np.ones((4, 4))).astype(np.int16)
    labels[random.random(labels.shape) < 0.03] = 2
    assert (opened(labels, kernel) == brute_opening(labels, kernel)).all()


def test_half_a_rectangle_is_lent_beyond_the_edge():
    use = np.zeros((20, 20), bool)
    use[8:12, 8:12] = True
    lent = domain_of(use, Kernel(4, 2))
    assert (np.flatnonzero(lent.any(axis=1)) == np.arange(6, 14)).all()
    assert (np.flatnonzero(lent.any(axis=0)) == np.arange(7, 13)).all()


def two_small_regions():
    """Two regions of 8 cells side by side inside a third: a sieve at 10 leaves both alone."""
    labels = np.zeros((4, 4), np.int16)
    labels[:2] = 1
    labels[2:] = 2
    return labels


def test_small_regions_merge_even_where_all_their_neighbours_are_small():
    labels = two_small_regions()
    layers = np.stack([np.zeros((4, 4)), np.full((4, 4), 0.6), np.full((4, 4), 0.4)])
    merged = merge_small(labels, layers, 10)
    assert len(np.unique(merged)) == 1


def test_the_sieve_of_the_raster_library_does_leave_them():
    """The counter-example that our own merging exists for."""
    from rasterio.features import sieve

    labels = two_small_regions().astype(np.int16)
    assert (sieve(labels, size=10, connectivity=4) == labels).all()


def test_a_small_region_takes_the_label_its_cells_belong_to_most():
    labels = np.zeros((10, 10), np.int16)
    labels[:, 5:] = 1
    labels[4:6, 4:6] = 2
    layers = np.zeros((3, 10, 10))
    layers[2, 4:6, 4:6] = 0.5
    layers[1, 4:6, 4:6] = 0.3
    layers[0, 4:6, 4:6] = 0.2
    assert (merge_small(labels, layers, 6)[4:6, 4:6] == 1).all()


def test_merged_regions_join_neighbours_of_the_same_label():
    # 0 | 1 | 0: the strip of 1 joins both sides, and one region of 0 is left.
    labels = np.zeros((4, 9), np.int16)
    labels[:, 4] = 1
    merged = merge_small(labels, np.zeros((2, 4, 9)), 5)
    regions, label_of = label_regions(merged)
    assert len(label_of) == 1
    assert (regions >= 0).all()


def test_an_island_without_neighbours_stays():
    labels = np.full((5, 5), -1, np.int16)
    labels[2, 2] = 1
    assert (merge_small(labels, np.zeros((2, 5, 5)), 10) == labels).all()


def test_strips_have_no_run_under_the_least_and_keep_the_rest():
    best = np.repeat([0, 1, 0, 1], [10, 2, 12, 9])
    totals = np.stack([best == 0, best == 1]).astype(float)
    labels = strips(totals, np.full(33, 3), least_run=5, least_cells=10)
    assert labels.tolist() == [0] * 24 + [1] * 9


def test_strips_under_the_least_area_are_joined_though_long_enough():
    best = np.repeat([0, 1], [10, 6])
    totals = np.stack([best == 0, best == 1]).astype(float)
    assert set(strips(totals, np.full(16, 2), least_run=5, least_cells=15)) == {0}


def test_a_region_still_small_after_taking_a_neighbour_merges_again():
    labels = np.zeros((10, 10), np.int16)
    labels[0:2, 0:2], labels[0:2, 2:4] = 1, 2
    layers = np.zeros((3, 10, 10))
    layers[1, 0:2, 0:2] = layers[2, 0:2, 2:4] = 1.0  # each its own
    layers[2, 0:2, 0:2] = layers[1, 0:2, 2:4] = 0.5  # and each other's before the large one's
    assert (merge_small(labels, layers, 10) == 0).all()

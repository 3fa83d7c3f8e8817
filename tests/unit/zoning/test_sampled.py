"""Composites: coverage, errors and the chi-square test of their differences."""

from __future__ import annotations

import numpy as np
import pytest
import shapely

from schorl.zoning.sampled import (
    composite_error_mg_kg,
    covered_share,
    differences_p,
    label_in,
)


def test_the_share_covered_counts_overlaps_once():
    whole = shapely.box(0, 0, 100, 100)
    areas = [shapely.box(0, 0, 60, 100), shapely.box(40, 0, 80, 100)]
    assert covered_share(areas, whole) == pytest.approx(0.8)
    assert covered_share([], whole) == 0.0


def test_homogeneity_by_hand():
    """Values 1, 2, 3 with SD 1: Q = 2 on 2 degrees of freedom, p = exp(-1)."""
    assert differences_p(np.array([1.0, 2.0, 3.0]), np.ones(3)) == pytest.approx(np.exp(-1.0))


def test_one_in_ten_composites_without_differences_passes_the_test():
    random = np.random.default_rng(3)
    sd = composite_error_mg_kg(np.full(8, 0.6), np.full(8, 15), lab_relative_sd=0.15)
    passed = sum(
        differences_p(0.6 + sd * random.standard_normal(8), sd) <= 0.10 for _ in range(1000)
    )
    assert 70 <= passed <= 130  # 100 expected, SD 9.5


def test_missing_composites_are_left_out_and_one_value_says_nothing():
    values, sd = np.array([1.0, np.nan, 9.0]), np.full(3, 1.0)
    assert differences_p(values, sd) == pytest.approx(differences_p(values[[0, 2]], sd[:2]))
    assert differences_p(np.array([1.0]), np.ones(1)) == 1.0


def test_error_of_a_composite_falls_with_its_cores_down_to_the_laboratory():
    boron = np.full(3, 0.5)
    error = composite_error_mg_kg(boron, np.array([1, 15, 10**9]), lab_relative_sd=0.15)
    assert error[0] == pytest.approx(0.5 * np.hypot(0.15, 0.30))
    assert error[2] == pytest.approx(0.5 * 0.15)
    assert error[0] > error[1] > error[2]


def test_the_first_of_overlapping_areas_holds_a_point():
    areas = [shapely.box(0, 0, 10, 10), shapely.box(5, 0, 20, 10)]
    points = np.array([[7.0, 5.0], [15.0, 5.0], [30.0, 5.0]])
    assert label_in(areas, points).tolist() == [0, 1, -1]

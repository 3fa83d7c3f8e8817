"""Features: scaled by kriging error, nothing that has no pattern, the need as heavy as three."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from schorl.model.settings import ExtraLayer
from schorl.model.surface import Verdict
from schorl.zoning.features import build_features, structured_share, to_cells
from support.zone_fields import trial


def test_a_surface_is_scaled_by_its_root_mean_kriging_variance():
    one = trial()
    table = build_features(one.grid, one.surfaces, one.need)
    clay = one.surfaces["clay"]
    column = table.table[:, table.names.index("clay")]
    expected = (clay.estimate - clay.estimate.mean()) / np.sqrt(np.mean(clay.map_sd**2))
    assert np.allclose(column, expected)


def test_the_need_weighs_root_three_in_its_own_error():
    one = trial()
    one = replace(one, need=replace(one.need, need_sd_kg_ha=np.full(one.grid.n_cells, 0.4)))
    table = build_features(one.grid, one.surfaces, one.need)
    column = table.table[:, table.names.index("need")]
    # The need's kriging variance: its whole variance less boron's short-range part, which no map
    # can show.
    boron = one.surfaces["boron"]
    short_range = one.need.mass_need**2 * (boron.decision_sd**2 - boron.map_sd**2)
    error = np.sqrt(np.mean(one.need.need_sd_kg_ha**2 - short_range))
    mean = one.need.need_mean_kg_ha
    assert np.allclose(column, np.sqrt(3.0) * (mean - mean.mean()) / error)


def test_soil_only_leaves_the_need_out():
    one = trial()
    names = build_features(one.grid, one.surfaces, one.need, soil_only=True).names
    assert names == ("boron", "clay")


@pytest.mark.parametrize("verdict", [Verdict.NONE, Verdict.CONSTANT])
def test_a_surface_without_pattern_is_left_out_and_said_so(verdict):
    one = trial()
    surfaces = {**one.surfaces, "clay": replace(one.surfaces["clay"], verdict=verdict)}
    table = build_features(one.grid, surfaces, one.need)
    assert "clay" not in table.names
    assert "clay" in table.left_out


def test_a_flat_field_has_no_features_at_all():
    one = trial(boron_of=lambda e, n: 0.5 + 0 * e, clay_of=lambda e, n: 20.0 + 0 * e)
    assert build_features(one.grid, one.surfaces, one.need).table.shape == (one.grid.n_cells, 0)


def test_an_extra_layer_gets_the_mean_spread_of_the_soil_times_its_weight():
    one = trial()
    centres = one.grid.centres_m
    slope = ExtraLayer(
        name="conductivity",
        east_north_m=tuple(map(tuple, centres)),
        values=tuple(1000.0 + 3.0 * centres[:, 1]),
        weight=0.5,
    )
    table = build_features(one.grid, one.surfaces, one.need, (slope,))
    spreads = dict(zip(table.names, table.table.std(axis=0), strict=True))
    # Smooth from cell to cell, so hardly anything is taken off for noise.
    soil = (spreads["boron"] + spreads["clay"]) / 2
    assert spreads["conductivity"] == pytest.approx(0.5 * soil, rel=0.01)


def test_an_extra_layer_of_noise_is_left_out():
    one = trial()
    noise = np.random.default_rng(1).normal(size=one.grid.n_cells)
    layer = ExtraLayer(
        name="noise", east_north_m=tuple(map(tuple, one.grid.centres_m)), values=tuple(noise)
    )
    table = build_features(one.grid, one.surfaces, one.need, (layer,))
    assert "noise" not in table.names
    assert "cell" in table.left_out["noise"]


def test_points_in_one_cell_are_averaged_and_empty_cells_filled_from_near_ones():
    one = trial()
    centre = one.grid.centres_m[100]
    points = centre + np.array([[1.0, 1.0], [-1.0, -1.0], [200.0, 0.0]])
    column = to_cells(points, np.array([2.0, 4.0, 10.0]), one.grid)
    assert column[100] == 3.0
    assert np.isfinite(column).all()
    assert column.min() >= 2.0
    assert column.max() <= 10.0


def test_structured_share_is_near_one_for_a_slope_and_near_none_for_noise():
    slope = np.add.outer(np.arange(40.0), np.arange(40.0))
    noise = np.random.default_rng(2).normal(size=(40, 40))
    assert structured_share(slope) > 0.99
    assert structured_share(noise) < 0.1

"""Hot spots become patches of workable shape that hold every hot cell; keep-off strips."""

from __future__ import annotations

import numpy as np
import pytest
import shapely

from schorl.model.field import lay_grid
from schorl.model.settings import Machine
from schorl.zoning.cover import KEEP_OFF
from schorl.zoning.cutouts import hot_area, keep_off_area, workable_patch
from schorl.zoning.travel import ground_of, lay_travel_grid
from schorl.zoning.workable import Kernel, opened
from support.zone_fields import shifted


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("kernel", [Kernel(4, 5), Kernel(3, 3), Kernel(6, 2)])
def test_a_patch_holds_all_hot_cells_and_is_a_union_of_rectangles(seed, kernel):
    random = np.random.default_rng(seed)
    mask = np.zeros((40, 40), bool)
    mask[10:30, 10:30] = random.random((20, 20)) < (0.01 if seed % 2 else 0.4)
    patch = workable_patch(mask, kernel)
    assert patch[mask].all()
    fits = opened(np.where(patch, 0, -1).astype(np.int16), kernel)
    assert fits[patch].all()


def test_a_patch_of_workable_shape_is_left_as_it_is():
    mask = np.zeros((30, 30), bool)
    mask[5:15, 8:20] = True
    assert (workable_patch(mask, Kernel(4, 4)) == mask).all()


def test_one_hot_cell_becomes_one_rectangle():
    mask = np.zeros((30, 30), bool)
    mask[14, 15] = True
    assert workable_patch(mask, Kernel(4, 5)).sum() == 20


@pytest.mark.parametrize("heading", [0.0, 31.0, 90.0, 145.0])
def test_every_hot_cell_centre_lies_in_the_area_cut_out(heading):
    boundary = shifted(shapely.box(0, 0, 300, 200))
    grid = lay_grid(boundary, cell_m=5.0)
    random = np.random.default_rng(1)
    hot = random.random(grid.n_cells) < 0.01
    travel = lay_travel_grid(grid, heading, margin_m=45.0)
    ground = ground_of(Machine(), least_area_ha=0.25)
    cut = hot_area(hot, grid, travel, ground, boundary=boundary)
    assert shapely.contains_xy(cut.area, grid.centres_m[hot]).all()
    assert hot_area(hot & False, grid, travel, ground, boundary=boundary) is None


def test_a_strip_inside_the_boundary_runs_round_holes_too():
    pond = shapely.box(100, 80, 140, 120)
    boundary = shifted(shapely.box(0, 0, 300, 200).difference(pond))
    cut = keep_off_area(boundary, (), strip_m=10.0)
    assert cut.label == KEEP_OFF
    kept = cut.area.intersection(boundary)
    # 300 x 200 less 280 x 180, and the ring round the pond (its corners rounded: 4 less than
    # 10 x 10 squares by (1 - pi/4) each).
    around = 4 * 40 * 10 + np.pi * 10**2
    assert kept.area == pytest.approx(300 * 200 - 280 * 180 + around, rel=1e-2)


def test_keep_off_areas_elsewhere_are_none():
    boundary = shifted(shapely.box(0, 0, 300, 200))
    assert keep_off_area(boundary, (shifted(shapely.box(400, 0, 500, 50)),)) is None
    # Touching along an edge takes no ground.
    assert keep_off_area(boundary, (shifted(shapely.box(300, 0, 400, 50)),)) is None

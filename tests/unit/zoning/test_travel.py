"""Heading, ground and the grid along the direction of travel."""

from __future__ import annotations

import numpy as np
import pytest
import shapely
import shapely.affinity

from schorl.model.field import lay_grid
from schorl.model.settings import Machine
from schorl.zoning.travel import ground_of, lay_travel_grid, longest_side_deg
from support.zone_fields import shifted


@pytest.mark.parametrize("turn", [0.0, 25.0, 90.0, 133.0, 179.0])
def test_the_longest_side_of_a_turned_rectangle_gives_the_heading(turn):
    # Turning is counter-clockwise, headings clockwise from north; the long side starts at east.
    field = shapely.affinity.rotate(shapely.box(0, 0, 500, 200), turn)
    assert longest_side_deg(shifted(field)) == pytest.approx((90.0 - turn) % 180.0, abs=0.02)


def test_a_long_side_drawn_in_pieces_counts_as_long():
    # The long upper side of 520 m has 27 vertices that wobble by a metre; the straight right side
    # of 300 m must not win.
    top = [(x, 300 + (x // 20) % 2) for x in range(520, -1, -20)]
    field = shapely.Polygon([(40, 0), (260, 60), (520, 0), *top])
    assert longest_side_deg(field) == pytest.approx(90.0, abs=1.0)


def test_ground_is_width_by_three_rate_changes():
    ground = ground_of(Machine(speed_km_h=10.0, rate_change_s=3.0), least_area_ha=0.25)
    assert ground.width_m == 24.0
    assert ground.run_m == pytest.approx(25.0)  # 3 x 10 km/h x 3 s
    assert ground.least_m2 == 2500.0
    fast = ground_of(
        Machine(working_width_m=36.0, speed_km_h=12.0, rate_change_s=5.0), least_area_ha=0.25
    )
    assert fast.least_m2 == pytest.approx(2 * 36 * 50)


def test_sections_narrow_the_ground():
    assert ground_of(Machine(sections=8), least_area_ha=0.25).width_m == 3.0


@pytest.mark.parametrize("heading", [0.0, 90.0])
def test_main_directions_share_the_cells_of_the_field(heading):
    grid = lay_grid(shifted(shapely.box(0, 0, 120, 80)), cell_m=4.0)
    travel = lay_travel_grid(grid, heading, margin_m=20.0)
    used = travel.source[travel.inside]
    assert sorted(used.tolist()) == list(range(grid.n_cells))
    rows, cols = np.nonzero(travel.inside)
    middles = np.column_stack(
        [
            travel.across0_m + (rows + 0.5) * travel.cell_m,
            travel.along0_m + (cols + 0.5) * travel.cell_m,
        ]
    )
    assert np.abs(travel.to_field(middles) - grid.centres_m[used]).max() < 1e-6


def test_there_and_back_for_any_heading():
    grid = lay_grid(shifted(shapely.box(0, 0, 120, 80)), cell_m=4.0)
    travel = lay_travel_grid(grid, 37.0, margin_m=20.0)
    row, col = travel.cell_under(grid.centres_m)
    found = travel.source[row, col]
    # The travel cell under a centre lies on that cell or one beside it.
    away = np.linalg.norm(grid.centres_m[found] - grid.centres_m, axis=1)
    assert (found >= 0).mean() > 0.97
    assert away[found >= 0].max() <= 4.0 * np.sqrt(2.0)

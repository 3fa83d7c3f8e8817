"""Exact cover: where zones meet, where they are missing, and areas that are cut out exactly."""

from __future__ import annotations

import numpy as np
import pytest
import shapely
from rasterio.features import shapes

from schorl.model.field import lay_grid
from schorl.zoning.cells import cells_in
from schorl.zoning.cover import HOT, KEEP_OFF, Fixed, cover_faults, cover_field
from schorl.zoning.outlines import arcs, label_under
from schorl.zoning.sampled import label_in
from schorl.zoning.travel import lay_travel_grid
from support.zone_fields import shifted


def t_junction():
    """Three labels that meet on a long side: the long side has no vertex there in raw polygons."""
    labels = np.zeros((12, 12), np.intp)
    labels[:6, :6] = 1
    labels[:6, 6:] = 2
    return labels


def test_polygons_of_each_label_alone_are_no_coverage_at_a_t_junction():
    """The counter-example: polygons made label by label lack the node on the long side."""
    raw = [shapely.geometry.shape(shape) for shape, _ in shapes(t_junction().astype(np.int16))]
    assert not shapely.coverage_is_valid(raw)


def test_arcs_noded_once_are_a_coverage_at_the_same_t_junction():
    boundary = shifted(shapely.box(0, 0, 48, 48))
    grid = lay_grid(boundary, cell_m=4.0)
    travel = lay_travel_grid(grid, 90.0, margin_m=0.0)
    labels = np.full(travel.source.shape, -1, np.intp)
    labels[travel.inside] = t_junction().ravel()
    lines = arcs(labels, travel)
    cover = cover_field(
        boundary, lines, lambda points: label_under(labels, travel, points), small_m2=0.0
    )
    assert cover.faults == ()
    assert sorted(cover.areas) == [0, 1, 2]
    assert shapely.coverage_is_valid(list(cover.areas.values()))


def halves():
    left, right = shapely.box(0, 0, 50, 100), shapely.box(50, 0, 100, 100)
    return [shifted(left), shifted(right)], shifted(shapely.box(0, 0, 100, 100))


def test_a_missing_zone_is_a_fault_though_the_rest_is_a_valid_coverage():
    (left, _), whole = halves()
    assert shapely.coverage_is_valid([left])
    assert any("differs from the field" in fault for fault in cover_faults([left], whole))


def test_overlap_and_unshared_nodes_are_faults():
    (left, right), whole = halves()
    assert cover_faults([left, right], whole) == ()
    wide = left.buffer(1.0, join_style="mitre").intersection(whole)
    assert any("overlap" in fault for fault in cover_faults([wide, right], whole))


@pytest.mark.parametrize("tolerance", [0.0, 9.0])
def test_a_keep_off_outline_is_kept_exactly_and_zones_end_at_it(tolerance):
    (left, right), whole = halves()
    pond = shifted(shapely.Point(48.0, 40.0).buffer(15.0))
    cover = cover_field(
        whole,
        [shapely.boundary(left), shapely.boundary(right)],
        lambda points: label_in([left, right], points),
        fixed=[Fixed(label=KEEP_OFF, area=pond)],
        tolerance_m=tolerance,
        small_m2=0.0,
    )
    assert cover.faults == ()
    assert cover.areas[KEEP_OFF].symmetric_difference(pond).area < 1e-6
    assert cover.areas[0].intersection(pond).area < 1e-6


def test_keep_off_wins_over_a_hot_spot_where_they_overlap():
    (left, right), whole = halves()
    pond, yard = shifted(shapely.box(10, 10, 40, 40)), shifted(shapely.box(30, 10, 70, 40))
    cover = cover_field(
        whole,
        [shapely.boundary(left)],
        lambda points: label_in([left, right], points),
        fixed=[Fixed(label=KEEP_OFF, area=pond), Fixed(label=HOT, area=yard)],
    )
    assert cover.areas[KEEP_OFF].area == pytest.approx(900.0)
    assert cover.areas[HOT].area == pytest.approx(900.0)


def test_ground_no_zone_claims_goes_to_the_longest_border_and_is_told():
    (left, _), whole = halves()
    right = shifted(shapely.box(60, 0, 100, 100))
    cover = cover_field(
        whole,
        [shapely.boundary(left), shapely.boundary(right)],
        lambda points: label_in([left, right], points),
    )
    assert cover.faults == ()
    assert cover.unclaimed_m2 == pytest.approx(1000.0)
    assert sum(area.area for area in cover.areas.values()) == pytest.approx(10_000.0)


def test_slivers_of_two_nearly_equal_lines_do_not_stay():
    (left, _), whole = halves()
    # The neighbour's own drawing of the same edge, a hand's breadth off and back.
    right = shifted(shapely.Polygon([(50.004, 0), (100, 0), (100, 100), (49.996, 100)]))
    cover = cover_field(
        whole,
        [shapely.boundary(left), shapely.boundary(right)],
        lambda points: label_in([left, right], points),
    )
    assert cover.faults == ()
    assert all(len(shapely.get_parts(area)) == 1 for area in cover.areas.values())


def test_cells_lie_in_the_polygon_that_holds_their_centre():
    """Against shapely's own point-in-polygon test."""
    zones = [
        shifted(shapely.Polygon([(0, 0), (70, 0), (33, 90), (0, 90)])),
        shifted(shapely.Polygon([(70, 0), (120, 0), (120, 90), (33, 90)])),
    ]
    grid = lay_grid(shifted(shapely.box(0, 0, 120, 90)), cell_m=3.7)
    labels = cells_in(zones, grid)
    for place, zone in enumerate(zones):
        inner = shapely.contains_xy(zone.buffer(-1e-6), grid.centres_m)
        assert (labels[inner] == place).all()


def test_a_field_too_narrow_for_any_centre_still_has_labels():
    boundary = shifted(shapely.box(0.2, 0.2, 30, 1.4))
    grid = lay_grid(boundary, cell_m=4.0)
    assert (cells_in([boundary], grid) == 0).all()

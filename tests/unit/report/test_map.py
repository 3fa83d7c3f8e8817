"""The map keeps the field's shape: holes stay holes, labels stay in their zone."""

from __future__ import annotations

import re

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely.geometry import MultiPolygon, Point, box

from schorl.report.layers import doubtful_places
from schorl.report.map_svg import bar_length_m, cell_runs, label_places, path_of, sheet_of


def rings_of(path: str) -> list[list[tuple[float, float]]]:
    return [
        [tuple(map(float, pair.split())) for pair in ring.strip("Z").split("L")]
        for ring in path.split("M")[1:]
    ]


def test_path_keeps_area_and_holes(record):
    boundary = record.field.boundary
    outer, *holes = rings_of(path_of(boundary, sheet_of(boundary)))
    drawn = shapely.Polygon(outer, holes)
    assert len(holes) == len(boundary.interiors) == 1
    assert drawn.area == pytest.approx(boundary.area, rel=1e-4)


@settings(max_examples=40, deadline=None)
@given(st.lists(st.tuples(st.floats(0, 300), st.floats(0, 300)), max_size=30), st.floats(5, 30))
def test_labels_stay_in_their_zone_wherever_the_samples_lie(samples, clear_m):
    zone = MultiPolygon([box(0, 0, 200, 80), box(220, 0, 300, 300)]).difference(
        Point(100, 40).buffer(20)
    )
    points = np.array(samples, dtype=float).reshape(-1, 2)
    places = label_places(zone, least_radius_m=8, clear_of_m=points, clear_m=clear_m)
    assert places
    assert all(zone.contains(Point(*place)) for place in places)


def test_cell_runs_cover_exactly_the_chosen_cells(record):
    grid, chosen = record.grid, np.random.default_rng(1).integers(0, 2, record.grid.n_cells)
    path = cell_runs(grid, chosen, sheet_of(record.field.boundary))
    lengths = [float(one) for one in re.findall(r"h(\d+\.?\d*)v", path)]
    assert sum(lengths) / grid.cell_m == pytest.approx(chosen.sum())


@given(st.floats(20, 20_000), st.booleans())
def test_the_scale_bar_is_round_and_fits(width, us):
    length, said = bar_length_m(sheet_of(box(0, 0, width, width)), us=us)
    assert 0.15 * width < length < 0.52 * width
    digits = said.split()[0].replace(",", "").strip("0").replace(".", "")
    assert digits in {"1", "2", "25", "5"}


def test_areas_left_untreated_on_purpose_are_no_doubt(record):
    doubtful = doubtful_places(record)
    kinds = np.array([str(zone.kind) for zone in record.prescription.zone_map.zones])
    left = doubtful.left.astype(bool)
    assert (kinds[record.prescription.zone_map.labels[left]] == "zone").all()
    cell_ha = record.field.area_ha / record.grid.n_cells
    assert doubtful.fed_ha == pytest.approx(doubtful.fed.sum() * cell_ha)

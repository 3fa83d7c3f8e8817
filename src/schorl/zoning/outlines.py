"""Lines between the labels of a raster, as arcs that meet in shared nodes.

Turning each label into polygons on its own loses the node where three zones meet: the long side
has no vertex there and the polygons are no coverage. Arcs are made once instead, from the unit
edges between different labels, and drawn through the middles of those edges, so that stairs become
slopes; two arcs cannot cross, since each cuts only the corner of its own cells.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import shapely

from schorl.model.arrays import Counts, Flags, Floats
from schorl.zoning.regions import Labels
from schorl.zoning.travel import TravelGrid


def unit_edges(labels: Labels) -> Floats:
    """Edges between cells of different label (both >= 0), ``(m, 2, 2)`` as (row, col) corners."""
    row, col = np.nonzero(_differ(labels[:, :-1], labels[:, 1:]))
    upright = np.stack(
        [np.column_stack([row, col + 1]), np.column_stack([row + 1, col + 1])], axis=1
    )
    row, col = np.nonzero(_differ(labels[:-1, :], labels[1:, :]))
    level = np.stack([np.column_stack([row + 1, col]), np.column_stack([row + 1, col + 1])], axis=1)
    return np.concatenate([upright, level]).astype(np.float64)


def _differ(first: Labels, second: Labels) -> Flags:
    return np.asarray((first != second) & (first >= 0) & (second >= 0))


def arcs(labels: Labels, travel: TravelGrid) -> list[shapely.Geometry]:
    """Arcs between the labels ``(rows, cols)`` of a travel grid, in the field's metres.

    Arcs end in nodes (three labels, or two touching at a corner) or where labels end.
    """
    edges = unit_edges(labels)
    if not len(edges):
        return []
    pieces: Any = shapely.linestrings(edges)
    merged = shapely.line_merge(shapely.multilinestrings(pieces))
    turned: list[shapely.Geometry] = []
    for arc in shapely.get_parts(merged):
        corners = shapely.get_coordinates(arc)
        middles = 0.5 * (corners[1:] + corners[:-1])
        points = np.concatenate([corners[:1], middles, corners[-1:]])
        metres = np.array([travel.across0_m, travel.along0_m]) + points * travel.cell_m
        turned.append(shapely.LineString(travel.to_field(metres)))
    return turned


def areas_of(labels: Labels, travel: TravelGrid, label: int) -> shapely.Geometry:
    """Area of one label of a raster that is labelled everywhere, by the same arcs.

    The label must not touch the raster's rim.
    """
    faces = shapely.get_parts(shapely.polygonize([shapely.union_all(arcs(labels, travel))]))
    own = [face for face in faces if _label_under(face, labels, travel) == label]
    return shapely.coverage_union_all(own) if own else shapely.MultiPolygon()


def _label_under(face: shapely.Polygon, labels: Labels, travel: TravelGrid) -> int:
    row, col = travel.cell_under(shapely.get_coordinates(shapely.point_on_surface(face)))
    return int(labels[row[0], col[0]])


def label_under(labels: Labels, travel: TravelGrid, points: Floats) -> Counts:
    """Label of the cell under each of ``(m, 2)`` points; the nearest labelled cell's elsewhere."""
    from scipy.spatial import cKDTree

    row, col = travel.cell_under(points)
    rows, cols = labels.shape
    found = labels[np.clip(row, 0, rows - 1), np.clip(col, 0, cols - 1)].astype(np.intp)
    found[(row < 0) | (col < 0) | (row >= rows) | (col >= cols)] = -1
    lost = found < 0
    if lost.any() and (labels >= 0).any():
        places = np.argwhere(labels >= 0)
        turned = points[lost] @ travel.axes.T - [travel.across0_m, travel.along0_m]
        _, nearest = cKDTree(places + 0.5).query(turned / travel.cell_m)
        found[lost] = labels[tuple(places[nearest].T)]
    return found

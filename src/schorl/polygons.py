"""Polygons without holes for controllers that cannot take any.

A polygon with a hole is cut into two or more that touch, along lines between points it has already:
its neighbours keep every edge they share with it, so that no gap opens after rounding.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import shapely
from shapely.geometry import Polygon


def without_holes(polygon: Polygon) -> list[Polygon]:
    """Parts of a polygon, none with a hole, that cover it exactly.

    The polygon is cut into triangles between its own points, and the triangles on either side of a
    hole's middle are put together again, until no part has a hole.
    """
    if not polygon.interiors:
        return [polygon]
    triangles = np.array(
        [
            one
            for one in shapely.get_parts(shapely.constrained_delaunay_triangles(polygon))
            if one.area > 0
        ]
    )
    return _hole_free(triangles)


def _hole_free(triangles: Any) -> list[Polygon]:
    parts: list[Polygon] = []
    for part in shapely.get_parts(shapely.coverage_union_all(triangles)):
        if not part.interiors:
            parts.append(part)
            continue
        middles = shapely.get_coordinates(shapely.centroid(triangles))
        own = shapely.intersects_xy(part, middles)
        parts += _split(triangles[own], middles[own], part)
    return parts


def _split(triangles: Any, middles: np.ndarray, part: Polygon) -> list[Polygon]:
    """Both sides of the first hole, west and east or south and north."""
    hole = shapely.get_coordinates(shapely.centroid(Polygon(part.interiors[0])))[0]
    for axis in (0, 1):
        side = middles[:, axis] < hole[axis]
        if side.any() and not side.all():
            return [*_hole_free(triangles[side]), *_hole_free(triangles[~side])]
    raise ValueError("a hole cannot be cut open")

"""Zones that cover a field exactly once: all lines noded together, faces labelled and joined.

Clipping each zone to the field on its own gives gaps and overlaps; noding the zones' lines with
the boundary once and building faces from the result cannot. Every side of every face then is
shared by exactly two faces or lies on the boundary.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any, cast

import numpy as np
import shapely

from schorl.model.arrays import Counts, Floats
from schorl.model.field import Area

#: Faces under this area (m²) are leavings of two nearly equal lines.
SLIVER_M2 = 1.0
#: Largest difference between the union of the zones and the field (m²).
COVER_M2 = 0.1
#: A zone face under this area (m²) or thinner than this (m, 2 A / P) joins its neighbour.
SMALL_M2 = 250.0
THIN_M = 2.0
#: Labels of areas that are kept just as they are; zones count from 0.
UNKNOWN, KEEP_OFF, HOT = -1, -2, -3

LabelOf = Callable[[Floats], Counts]


@dataclass(frozen=True, eq=False, kw_only=True)
class Fixed:
    """An area whose outline is exact and which no zone may enter: keep-off, hot spot.

    ``lines`` are noded with the rest; ``area`` says what lies inside. The first of several wins.
    """

    label: int
    area: shapely.Geometry


@dataclass(frozen=True, eq=False, kw_only=True)
class Cover:
    """Areas by label (zones from 0, `KEEP_OFF`, `HOT`), and what had to be decided."""

    areas: dict[int, Area]
    unclaimed_m2: float = 0.0
    faults: tuple[str, ...] = field(default=())


def cover_field(
    boundary: Area,
    lines: Sequence[shapely.Geometry],
    label_of: LabelOf,
    *,
    fixed: Sequence[Fixed] = (),
    tolerance_m: float = 0.0,
    small_m2: float = SMALL_M2,
) -> Cover:
    """Cut a field along lines into labelled areas that cover it exactly.

    Parameters
    ----------
    boundary
        The field.
    lines
        Lines between zones; they may stick out of the field and end anywhere.
    label_of
        Zone of each of ``(m, 2)`` points, -1 where no zone claims it: such a face goes to the
        neighbour with which it shares the longest border.
    fixed
        Areas cut out exactly.
    tolerance_m
        Of `shapely.coverage_simplify` for the lines between zones; outlines are never moved.
    small_m2
        Zone faces under this area, or thinner than 2 m, join a neighbour; 0 keeps all but slivers.
    """
    faces = _faces(boundary, [*lines, *(shapely.boundary(one.area) for one in fixed)])
    labels = _labelled(faces, label_of, fixed)
    unclaimed = float(shapely.area(faces[labels == UNKNOWN]).sum())
    labels = _settled(faces, labels, small_m2)
    areas = _joined(faces, labels)
    for tolerance in (tolerance_m, tolerance_m / 2.0, 0.0):
        tried = _simplified(areas, tolerance)
        faults = cover_faults(list(tried.values()), boundary)
        if not faults:
            break
    return Cover(areas=tried, unclaimed_m2=unclaimed, faults=faults)


def _faces(boundary: Area, lines: Sequence[shapely.Geometry]) -> np.ndarray:
    """Faces inside the boundary of everything noded once, as an array of polygons."""
    west, south, east, north = boundary.bounds
    frame = shapely.box(west - 50.0, south - 50.0, east + 50.0, north + 50.0)
    near = [shapely.intersection(line, frame) for line in lines]
    noded = shapely.union_all([shapely.boundary(boundary), *near])
    faces = shapely.get_parts(shapely.polygonize([_only_lines(noded)]))
    shapely.prepare(boundary)
    inner = shapely.get_coordinates(shapely.point_on_surface(faces))
    return np.asarray(faces[shapely.contains_xy(boundary, inner)])


def _only_lines(geometry: shapely.Geometry) -> Any:
    parts: Any = shapely.get_parts(geometry)
    return shapely.multilinestrings(parts[shapely.get_dimensions(parts) == 1])


def _labelled(faces: np.ndarray, label_of: LabelOf, fixed: Sequence[Fixed]) -> Counts:
    inner = shapely.get_coordinates(shapely.point_on_surface(faces))
    labels = np.asarray(label_of(inner), dtype=np.intp).copy()
    for one in reversed(fixed):
        shapely.prepare(one.area)
        labels[shapely.contains_xy(one.area, inner)] = one.label
    return labels


def _settled(faces: np.ndarray, labels: Counts, small_m2: float) -> Counts:
    """Give slivers, small faces and unclaimed ones to the neighbour of the longest border."""
    labels = labels.copy()
    area = shapely.area(faces)
    thin = (2.0 * area / np.maximum(shapely.length(faces), 1e-9) < THIN_M) & (small_m2 > 0)
    zone = labels >= 0
    loose = (labels == UNKNOWN) | (area < SLIVER_M2) | (zone & (thin | (area < small_m2)))
    if not loose.any():
        return labels
    beside = _shared_borders(faces, np.flatnonzero(loose))
    waiting = sorted(beside, key=lambda face: (area[face], face))
    while waiting:
        left = []
        for face in waiting:
            sliver = bool(thin[face]) or area[face] < SLIVER_M2
            choice = _longest(beside[face], labels, any_kind=sliver or labels[face] == UNKNOWN)
            if choice is None:
                left.append(face)
            else:
                labels[face] = choice
        if len(left) == len(waiting):
            break
        waiting = left
    # Ground that nobody claims and that touches nothing is not treated.
    labels[labels == UNKNOWN] = KEEP_OFF
    return labels


def _shared_borders(faces: np.ndarray, chosen: Counts) -> dict[int, dict[int, float]]:
    """Length of border (m) that each chosen face shares with each neighbour."""
    tree = shapely.STRtree(faces)
    mine, other = tree.query(faces[chosen], predicate="intersects")
    length = shapely.length(
        shapely.intersection(shapely.boundary(faces[chosen[mine]]), shapely.boundary(faces[other]))
    )
    beside: dict[int, dict[int, float]] = {int(face): {} for face in chosen}
    for place, neighbour, shared in zip(mine, other, length, strict=True):
        if chosen[place] != neighbour and shared > 0:
            beside[int(chosen[place])][int(neighbour)] = float(shared)
    return beside


def _longest(beside: dict[int, float], labels: Counts, *, any_kind: bool) -> int | None:
    """Label with the longest shared border; fixed areas only where ``any_kind``."""
    shared: dict[int, float] = {}
    for neighbour, length in beside.items():
        label = int(labels[neighbour])
        if label == UNKNOWN or (label < 0 and not any_kind):
            continue
        # A zone is preferred: a fixed area takes only what has no zone beside it.
        shared[label] = shared.get(label, 0.0) + length
    if not shared:
        return None
    return max(shared, key=lambda label: (label >= 0, shared[label], -label))


def _joined(faces: np.ndarray, labels: Counts) -> dict[int, Area]:
    return {
        int(label): cast("Area", shapely.coverage_union_all(faces[labels == label]))
        for label in sorted(np.unique(labels), key=lambda label: (label < 0, abs(label)))
    }


def _simplified(areas: dict[int, Area], tolerance_m: float) -> dict[int, Area]:
    """Lines between zones simplified; outlines of the field and of fixed areas stay."""
    zones = [label for label in areas if label >= 0]
    if tolerance_m <= 0 or len(zones) < 2:
        return areas
    fresh = shapely.coverage_simplify(
        [areas[label] for label in zones], tolerance_m, simplify_boundary=False
    )
    return {**areas, **dict(zip(zones, fresh, strict=True))}


def cover_faults(areas: Sequence[Area], boundary: Area) -> tuple[str, ...]:
    """What is wrong with areas that should cover a field exactly once; empty where nothing is.

    A coverage may be valid with a whole zone missing, so the union is compared with the field too.
    """
    faults = [
        f"area {place + 1} of {len(areas)} is not a valid polygon: {shapely.is_valid_reason(area)}"
        for place, area in enumerate(areas)
        if not area.is_valid or area.is_empty
    ]
    if faults:
        return tuple(faults)
    if not shapely.coverage_is_valid(list(areas)):
        faults.append("zones overlap or do not share their nodes")
    apart = shapely.symmetric_difference(shapely.union_all(list(areas)), boundary).area
    if apart >= COVER_M2:
        faults.append(f"union of the zones differs from the field by {apart:.3g} m²")
    parts = shapely.get_parts(list(areas))
    if (shapely.area(parts) < SLIVER_M2).any():
        faults.append(f"a part of {shapely.area(parts).min():.3g} m² is left")
    return tuple(faults)

"""Zones made simple enough for a controller, still covering the field exactly once.

Edges between zones are simplified together (Visvalingam's measure, as GEOS applies it to a whole
coverage), so that no gap and no overlap can open. The field's boundary and the outlines of
keep-off areas and hot spots never move. Where there are too many polygons, the smallest (up to a
quarter of a hectare) join a neighbour that gets as much or less: no ground is moved to a higher rate for the sake of a count.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import cast

import numpy as np
import shapely
from shapely.geometry import Polygon

from schorl.errors import Refusal
from schorl.findings import Finding, finding
from schorl.model.field import Area
from schorl.model.profile import Profile
from schorl.polygons import without_holes

TOLERANCES_M = (0.25, 0.5, 1.0, 2.0, 3.0, 4.0, 6.0, 8.0, 12.0)
SLIVER_M2 = 1e-6
#: Parts up to this area may join a neighbour for the sake of a count: the least area of a zone.
MOST_JOIN_M2 = 2_500.0


@dataclass(frozen=True, slots=True, kw_only=True)
class RateError:
    """What moved edges do: ground at another rate than prescribed, boron too much and too little."""

    moved_ha: float = 0.0
    more_kg: float = 0.0
    less_kg: float = 0.0


@dataclass(frozen=True, eq=False, kw_only=True)
class Fitted:
    """Areas in the order given (an area that joined its neighbours is empty), and their error."""

    areas: tuple[Area, ...]
    tolerance_m: float
    error: RateError
    findings: tuple[Finding, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Shape:
    """Counts that a controller limits."""

    polygons: int
    vertices: int  # of the largest polygon
    vertices_in_all: int

    def over(self, profile: Profile) -> tuple[str, ...]:
        """What is over a profile's limits, in words."""
        limits = {
            "polygons": (self.polygons, profile.most_polygons),
            "points in one polygon": (self.vertices, profile.most_vertices),
            "points in all": (self.vertices_in_all, profile.most_vertices_in_all),
        }
        return tuple(
            f"{count} {name}, the controller takes {most}"
            for name, (count, most) in limits.items()
            if most is not None and count > most
        )


def shape_of(areas: Sequence[Area], *, single_parts: bool, holes: bool = True) -> Shape:
    """Counts of some areas as the controller gets them.

    Parts of an area are polygons of their own where they must be single, and where holes must be
    cut open.
    """
    kept: list[Area] = [area for area in areas if not area.is_empty]
    rows = [cast("Polygon", part) for part in shapely.get_parts(kept)]
    if not holes:
        rows = [piece for part in rows for piece in without_holes(part)]
    shown = rows if single_parts or not holes else kept
    points = [int(shapely.get_num_coordinates(row)) for row in shown]
    return Shape(
        polygons=len(shown),
        vertices=max(points, default=0),
        vertices_in_all=sum(points),
    )


def fit_zones(
    areas: Sequence[Area],
    boron_kg_ha: Sequence[float],
    fixed: Sequence[bool],
    profile: Profile,
    *,
    most_tolerance_m: float,
) -> Fitted:
    """Zones within a profile's limits, with the rate error that this makes.

    Parameters
    ----------
    areas
        Zones in metres, a valid coverage.
    boron_kg_ha
        Their rates; they do not change.
    fixed
        Whether an outline must not move (keep-off areas, hot spots).
    most_tolerance_m
        Edges move no further than about this; half a working width is what a machine can follow.

    Raises
    ------
    Refusal
        The limits cannot be met without moving the boundary, a fixed outline, or ground to a
        higher rate (exit 4).
    """
    current = list(areas)
    if profile.most_polygons is not None:
        current = _fewer_parts(current, boron_kg_ha, fixed, profile)
    drawn, tolerance = current, 0.0
    for wider in TOLERANCES_M:
        over = _shape(current, profile).over(profile)
        if not any("points" in one for one in over) or wider > most_tolerance_m:
            break
        tolerance, current = wider, _simpler(drawn, fixed, wider)
    over = _shape(current, profile).over(profile)
    if over:
        raise Refusal(
            [finding("PROFILE-LIMIT", where=profile.title or "profile", what="; ".join(over))]
        )
    error = rate_error(areas, current, boron_kg_ha)
    return Fitted(
        areas=tuple(current),
        tolerance_m=tolerance,
        error=error,
        findings=_said(error, tolerance, profile),
    )


def _shape(areas: Sequence[Area], profile: Profile) -> Shape:
    return shape_of(areas, single_parts=profile.single_parts, holes=profile.holes)


def _said(error: RateError, tolerance_m: float, profile: Profile) -> tuple[Finding, ...]:
    if error.moved_ha <= 0:
        return ()
    what = (
        f"{error.moved_ha:.3f} ha lie in another zone than before (edges moved by up to about "
        f"{tolerance_m:g} m): {error.more_kg:.3f} kg B more and {error.less_kg:.3f} kg B less there"
    )
    return (finding("PROFILE-SIMPLER", where=profile.title or "profile", what=what),)


def _simpler(areas: Sequence[Area], fixed: Sequence[bool], tolerance_m: float) -> list[Area]:
    """Edges between free zones simplified; all other lines stay."""
    free = [
        place
        for place, (area, held) in enumerate(zip(areas, fixed, strict=True))
        if not held and not area.is_empty
    ]
    fresh = shapely.coverage_simplify(
        [areas[place] for place in free], tolerance_m, simplify_boundary=False
    )
    result = list(areas)
    for place, area in zip(free, fresh, strict=True):
        result[place] = cast("Area", area)
    return result


def _fewer_parts(
    areas: list[Area], rates: Sequence[float], fixed: Sequence[bool], profile: Profile
) -> list[Area]:
    """The smallest free parts joined to neighbours until there are few enough, or none can join."""
    owner = [place for place, area in enumerate(areas) for _ in shapely.get_parts(area)]
    parts = [part for area in areas for part in shapely.get_parts(area)]
    most = profile.most_polygons or 0
    order = sorted(range(len(parts)), key=lambda one: (parts[one].area, one))
    for one in order:
        joined = _owned(parts, owner, len(areas))
        if _shape(joined, profile).polygons <= most:
            return joined
        if parts[one].area > MOST_JOIN_M2:
            break
        if not fixed[owner[one]]:
            owner[one] = _neighbour(one, parts, owner, rates, fixed)
    return _owned(parts, owner, len(areas))


def _owned(parts: Sequence[Polygon], owner: Sequence[int], count: int) -> list[Area]:
    return [
        cast(
            "Area",
            shapely.coverage_union_all(
                [part for part, whose in zip(parts, owner, strict=True) if whose == place]
            ),
        )
        if place in owner
        else Polygon()
        for place in range(count)
    ]


def _neighbour(
    one: int,
    parts: Sequence[Polygon],
    owner: Sequence[int],
    rates: Sequence[float],
    fixed: Sequence[bool],
) -> int:
    """The zone along the longest shared border that gets as much or less; its own if there is none."""
    own = owner[one]
    shared: dict[int, float] = {}
    for other, part in enumerate(parts):
        place = owner[other]
        if place == own or fixed[place] or rates[place] > rates[own]:
            continue
        border = float(shapely.intersection(parts[one], part).length)
        if border > 0:
            shared[place] = shared.get(place, 0.0) + border
    return max(shared, key=lambda place: (shared[place], -place)) if shared else own


def rate_error(
    before: Sequence[Area], after: Sequence[Area], boron_kg_ha: Sequence[float]
) -> RateError:
    """Ground that changed its zone, and the boron that it gets more or less for it."""
    moved = more = less = 0.0
    tree = shapely.STRtree(list(after))
    for place, area in enumerate(before):
        for other in np.sort(tree.query(area)):
            if other == place:
                continue
            ha = float(shapely.intersection(area, after[other]).area) / 10_000.0
            if ha * 10_000.0 < SLIVER_M2:
                continue
            change = ha * (boron_kg_ha[int(other)] - boron_kg_ha[place])
            moved, more, less = moved + ha, more + max(change, 0.0), less + max(-change, 0.0)
    return RateError(moved_ha=moved, more_kg=more, less_kg=less)

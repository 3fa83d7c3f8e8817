"""Boron that was really given: as-applied files as polygons, lines or logged points with rates."""

from __future__ import annotations

import math
from collections.abc import Sequence
from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import shapely

from schorl.findings import Finding, finding
from schorl.geodesy import transform_geometry
from schorl.intake.guards import Unreadable, refuse
from schorl.intake.quantities import plain_words
from schorl.intake.vectors import read_features
from schorl.model.field import Area, Field
from schorl.model.reading import Reading
from schorl.model.settings import AppliedBoron

MOST_KG_HA = 20.0
USUAL_WIDTH_M = 24.0
#: Share of the field that a file's rates must cover before it goes without saying.
COVERED = 0.95
#: A logged point speaks for ground up to this many widths (or gaps between points) away: more than
#: half a square's diagonal, less than the next pass.
REACH = 0.75
Rated = list[tuple[Any, float]]


def read_applied(
    path: Path,
    *,
    field: Field,
    on: date | None,
    column: str | None,
    unit: str | None,
    boron_pct: float | None,
    form: str,
    this_season: bool,
    width_m: float = USUAL_WIDTH_M,
) -> Reading[AppliedBoron]:
    """Read an as-applied layer; rates become kg B/ha.

    Polygons are taken as they are and may lie over each other (both passes count). Lines are passes
    of ``width_m``. A logged point stands for the ground nearer to it than to any other point, as
    far as the machine reached, so that a dense log and a sparse one give the same boron.

    The unit is never guessed: ``unit`` is "kg B/ha", or "kg/ha" or "lb/acre" of product with
    ``boron_pct``.
    """
    try:
        factor = _factor(path, unit, boron_pct)
        rows, without = _rows(path, column or "boron_kg_ha", field.crs)
        rated = [(area, _sane(path, value * factor)) for area, value in rows]
        areas, share = _in_field(path, _as_areas(rated, width_m), field)
    except Unreadable as problem:
        return Reading(value=None, findings=(problem.found,))
    held = [area.area for area, _ in areas]
    mean = float(np.average([rate for _, rate in areas], weights=held))
    applied = AppliedBoron(
        on=on, kg_ha=mean, form=form, areas=areas, this_season=this_season, source=path.name
    )
    return Reading(value=applied, findings=_notes(path, without, share))


def _rows(path: Path, column: str, crs: str) -> tuple[Rated, int]:
    """Geometries in metres with their figures, and how many features had no figure."""
    features = read_features(path, layer=None, crs=None, option="samples")
    wanted, without = plain_words(column), 0
    rows: Rated = []
    for geometry, attributes in zip(features.geometries, features.attributes, strict=True):
        found = [_figure(v) for key, v in attributes.items() if plain_words(key) == wanted]
        if geometry is None or not found or found[0] is None:
            without += 1
            continue
        rows.append((transform_geometry(geometry, source=features.crs, target=crs), found[0]))
    if not rows:
        there = sorted({key for one in features.attributes for key in one})
        said = f"no rates in a column `{column}`; there is {', '.join(there) or 'no column'}"
        raise refuse("IN-COLUMN", path, said)
    return rows, without


def _figure(value: object) -> float | None:
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        return None
    return float(value)


def _as_areas(rated: Rated, width_m: float) -> list[tuple[Area, float]]:
    """Every geometry as the ground it stands for."""
    points: Rated = []
    areas: list[tuple[Area, float]] = []
    for geometry, rate in rated:
        if geometry.geom_type in ("Point", "MultiPoint"):
            points += [(one, rate) for one in shapely.get_parts(geometry)]
        elif geometry.geom_type in ("LineString", "MultiLineString"):
            areas.append((shapely.buffer(geometry, width_m / 2, cap_style="flat"), rate))
        else:
            valid = geometry.is_valid
            areas.append(
                (geometry if valid else shapely.make_valid(geometry, method="structure"), rate)
            )
    return areas + _point_areas(points, width_m)


def _point_areas(points: Rated, width_m: float) -> list[tuple[Area, float]]:
    """The ground nearest each logged point, no farther than the machine reached from it."""
    if not points:
        return []
    places = shapely.get_coordinates([one for one, _ in points])
    places, of_point = np.unique(places.round(2), axis=0, return_inverse=True)
    counts = np.bincount(of_point.ravel())
    rates = np.bincount(of_point.ravel(), weights=[rate for _, rate in points]) / counts
    reach = REACH * max(width_m, _gap_m(places))
    rounds = shapely.buffer(shapely.points(places), reach)
    if len(places) > 1:
        cells = shapely.voronoi_polygons(
            shapely.multipoints(places), extend_to=shapely.box(*shapely.total_bounds(rounds)),
            ordered=True,
        )  # fmt: skip
        rounds = shapely.intersection(shapely.get_parts(cells), rounds)
    return list(zip(rounds.tolist(), rates.tolist(), strict=True))


def _gap_m(places: np.ndarray) -> float:
    """The usual distance to the fourth nearest point, metres: along and across a sparse log."""
    from scipy.spatial import cKDTree

    if len(places) == 1:
        return 0.0
    apart, _ = cKDTree(places).query(places, k=min(5, len(places)))
    return float(np.median(apart[:, -1]))


def _in_field(
    path: Path, areas: Sequence[tuple[Area, float]], field: Field
) -> tuple[tuple[tuple[Area, float], ...], float]:
    """What of the areas lies in the field, and the share of the field under them."""
    shapely.prepare(field.boundary)
    cut = shapely.intersection(np.array([area for area, _ in areas]), field.boundary)
    kept = [
        (part, rate) for part, (_, rate) in zip(cut.tolist(), areas, strict=True) if part.area > 0
    ]
    if not kept:
        raise refuse("IN-ELSEWHERE", path, "none of the applied rates lies in the field")
    covered = shapely.unary_union([part for part, _ in kept]).area / field.boundary.area
    return tuple(kept), float(covered)


def _notes(path: Path, without: int, share: float) -> tuple[Finding, ...]:
    notes = []
    if without:
        what = f"{without} places without a rate are left out"
        notes.append(finding("IN-APPLIED-BLANK", where=path.name, what=what))
    if share < COVERED:
        what = f"its rates cover {100 * share:.0f} % of the field; the rest counts as untreated"
        notes.append(finding("IN-APPLIED-PART", where=path.name, what=what))
    return tuple(notes)


def _factor(path: Path, unit: str | None, boron_pct: float | None) -> float:
    from schorl.units import KG_HA_PER_LB_ACRE

    bare = plain_words(unit or "")
    if bare in ("kg b/ha", "kg boron/ha"):
        return 1.0
    product = {"kg/ha": 1.0, "lb/acre": KG_HA_PER_LB_ACRE, "lb/ac": KG_HA_PER_LB_ACRE}.get(bare)
    if product is None or boron_pct is None:
        raise Unreadable(
            finding(
                "IN-UNIT",
                where=path.name,
                what=f"the unit of the applied rates is not clear: {unit or 'not given'}",
                hint='say unit = "kg B/ha", or "kg/ha" of product with boron_pct, in the entry',
            )
        )
    return product * boron_pct / 100.0


def _sane(path: Path, rate: float) -> float:
    if not 0 <= rate <= MOST_KG_HA:
        raise refuse("IN-IMPOSSIBLE", path, f"{rate:g} kg B/ha was never applied to a field")
    return rate

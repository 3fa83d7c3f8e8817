"""Boron that was really given: as-applied files as polygons or points with rates."""

from __future__ import annotations

from datetime import date
from pathlib import Path

import shapely

from schorl.findings import finding
from schorl.geodesy import transform_geometry
from schorl.intake.guards import Unreadable, refuse
from schorl.intake.quantities import plain_words
from schorl.intake.vectors import read_features
from schorl.model.field import Field
from schorl.model.reading import Reading
from schorl.model.settings import AppliedBoron

MOST_KG_HA = 20.0
HALF_CELL_M = 6.0  # a logged point stands for a square of this half side


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
) -> Reading[AppliedBoron]:
    """Read an as-applied layer; rates become kg B/ha.

    The unit is never guessed: ``unit`` is "kg B/ha", or "kg/ha" or "lb/acre" of product with
    ``boron_pct``.
    """
    try:
        factor = _factor(path, unit, boron_pct)
        features = read_features(path, layer=None, crs=None, option="samples")
        wanted = plain_words(column or "boron_kg_ha")
        areas = []
        for geometry, row in zip(features.geometries, features.attributes, strict=True):
            value = next((v for key, v in row.items() if plain_words(key) == wanted), None)
            if geometry is None or not isinstance(value, int | float):
                continue
            moved = transform_geometry(geometry, source=features.crs, target=field.crs)
            if not moved.is_valid:
                moved = shapely.make_valid(moved, method="structure")
            if moved.geom_type in ("Point", "MultiPoint"):
                moved = shapely.buffer(moved, HALF_CELL_M, cap_style="square")
            areas.append((moved, _sane(path, float(value) * factor)))
        if not areas:
            raise refuse("IN-COLUMN", path, f"no rates in a column `{column or 'boron_kg_ha'}`")
    except Unreadable as problem:
        return Reading(value=None, findings=(problem.found,))
    held = [(shapely.intersection(area, field.boundary).area, rate) for area, rate in areas]
    total = sum(area for area, _ in held)
    if total <= 0:
        found = refuse("IN-ELSEWHERE", path, "none of the applied rates lies in the field").found
        return Reading(value=None, findings=(found,))
    mean = sum(area * rate for area, rate in held) / total
    applied = AppliedBoron(
        on=on, kg_ha=mean, form=form, areas=tuple(areas), this_season=this_season, source=path.name
    )
    return Reading(value=applied)


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

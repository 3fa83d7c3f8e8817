"""The field's boundary and other areas, valid and in metres."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import shapely
from shapely.geometry import MultiPolygon, Polygon

from schorl.findings import Finding, finding
from schorl.geodesy import WGS84, area_ha, epsg_of, field_crs, transform_geometry
from schorl.intake.guards import Unreadable, refuse
from schorl.intake.vectors import Features, read_features
from schorl.model.field import Area, Field
from schorl.model.reading import Reading
from schorl.model.record import Recognition

SMALLEST_HA, LARGEST_HA = 0.02, 20_000.0
SLIVER_M2 = 1.0
FAR_PARTS_M = 1000.0
REPAIR_CHANGES = 0.005  # a repair that moves more of the area than this is asked about


def read_boundary(
    path: Path, *, layer: str | None = None, crs: str | None = None, name: str = ""
) -> Reading[Field]:
    """Read a field's boundary; all polygons of the file together are the field."""
    try:
        features = read_features(path, layer=layer, crs=crs, option="boundary")
        polygons = _polygons(path, features)
        boundary, found = _repaired(path, polygons, features.crs)
        field = _field(path, boundary, features, name=name)
    except Unreadable as problem:
        return Reading(value=None, findings=(problem.found,))
    found += [*_size_findings(path, field), *_far_parts(path, field)]
    how = f"{field.area_ha:.2f} ha, {features.crs_said}; worked in {_named(field)}"
    recognised = (Recognition(what="boundary", where=path.name, how=how),)
    stopped = any(one.code == "IN-NESTED" for one in found)
    value = None if stopped else field
    return Reading(value=value, findings=tuple(found), recognised=recognised)


def _named(field: Field) -> str:
    return field.crs if field.epsg else "a local metric system (the field straddles UTM zones)"


def _polygons(path: Path, features: Features) -> list[Polygon]:
    parts: list[Polygon] = []
    for place, drawn in enumerate(features.geometries, start=1):
        if drawn is None or drawn.is_empty:
            continue
        closed = drawn.geom_type == "LineString" and drawn.is_ring
        geometry = Polygon(drawn) if closed else drawn
        if geometry.geom_type not in ("Polygon", "MultiPolygon"):
            raise refuse(
                "IN-NOT-AREA",
                path,
                f"feature {place} is a {geometry.geom_type}, not a polygon",
            )
        parts.extend(shapely.get_parts(geometry))
    if not parts:
        raise refuse("IN-NO-AREA", path, "there is no polygon in the file")
    return parts


def _repaired(path: Path, parts: list[Polygon], crs: str) -> tuple[Area, list[Finding]]:
    """One valid area; what had to be mended is said with the area before and after."""
    found: list[Finding] = []
    mended = []
    for place, part in enumerate(parts, start=1):
        if part.is_valid:
            mended.append(part)
            continue
        reason = shapely.is_valid_reason(part)
        repaired = _areas_only(shapely.make_valid(part, method="structure"))
        before, after = abs(part.area), repaired.area
        change = abs(after - before) / max(after, 1e-30)
        what = f"polygon {place} crosses itself or touches itself ({reason.split('[')[0].strip()})"
        if change > REPAIR_CHANGES or after == 0:
            raise refuse("IN-INVALID", path, f"{what}; mending it would change its area much")
        what += f"; mended, {area_ha(part, crs=crs):.3f} ha before, {area_ha(repaired, crs=crs):.3f} after"
        found.append(finding("IN-MENDED", where=path.name, what=what))
        mended.append(repaired)
    found += _inside_others(path, mended)
    return _areas_only(shapely.union_all(mended)), found


def _inside_others(path: Path, parts: list[Any]) -> list[Finding]:
    """A polygon inside another may be a hole drawn apart; taken as a part it would be treated."""
    found = []
    pairs = shapely.STRtree(parts).query(parts, predicate="within").T
    for inner, outer in pairs:
        if inner != outer and not parts[inner].equals(parts[outer]):
            what = f"polygon {inner + 1} lies inside polygon {outer + 1}"
            found.append(finding("IN-NESTED", where=path.name, what=what))
    return found


def _areas_only(geometry: Any) -> Area:
    parts = [one for one in shapely.get_parts(geometry) if one.geom_type == "Polygon"]
    inner = [p for one in shapely.get_parts(geometry) if one.geom_type == "MultiPolygon"
             for p in one.geoms]  # fmt: skip
    parts = [*parts, *inner]
    if len(parts) == 1:
        return parts[0]
    return MultiPolygon(parts)


def _field(path: Path, boundary: Area, features: Features, *, name: str) -> Field:
    degrees = transform_geometry(boundary, source=features.crs, target=WGS84)
    west, south, east, north = degrees.bounds
    if not (east - west < 5.0 and north - south < 5.0):
        what = f"it reaches from {west:.3f}, {south:.3f} to {east:.3f}, {north:.3f} degrees"
        raise refuse("IN-LARGE", path, what)
    metric = field_crs((west + east) / 2, (south + north) / 2, west=west, east=east)
    metres = transform_geometry(boundary, source=features.crs, target=metric)
    if not shapely.is_valid(metres):
        metres = _areas_only(shapely.make_valid(metres, method="structure"))
    kept = [one for one in shapely.get_parts(metres) if one.area >= SLIVER_M2]
    if not kept:
        raise refuse("IN-NO-AREA", path, "the boundary encloses less than 1 m²")
    metres = kept[0] if len(kept) == 1 else MultiPolygon(kept)
    return Field(
        name=name or _name_in(features) or path.stem,
        boundary=shapely.normalize(metres),
        crs=metric,
        epsg=epsg_of(metric),
        area_ha=area_ha(metres, crs=metric),
        source=path.name,
    )


def _name_in(features: Features) -> str:
    for key in ("field", "name", "Name", "FIELD", "NAME", "field_name"):
        values = {row.get(key) for row in features.attributes}
        if len(values) == 1 and (value := values.pop()):
            return str(value)
    return ""


def _size_findings(path: Path, field: Field) -> list[Finding]:
    if field.area_ha < SMALLEST_HA:
        what = f"the boundary encloses {field.area_ha * 10_000:.0f} m²"
        return [finding("IN-SMALL", where=path.name, what=what)]
    if field.area_ha > LARGEST_HA:
        what = f"the boundary encloses {field.area_ha:,.0f} ha"
        return [finding("IN-LARGE", where=path.name, what=what)]
    return []


def _far_parts(path: Path, field: Field) -> list[Finding]:
    """Parts of one field that lie far from all others may be another field."""
    parts = list(shapely.get_parts(field.boundary))
    gaps = [
        min(shapely.distance(one, other) for other in parts if other is not one) for one in parts
    ] if len(parts) > 1 else [0.0]  # fmt: skip
    far = [(gap, one) for gap, one in zip(gaps, parts, strict=True) if gap > FAR_PARTS_M]
    if not far:
        return []
    gap, one = max(far, key=lambda pair: pair[0])
    what = (
        f"a part of {area_ha(one, crs=field.crs):.2f} ha lies {gap / 1000:.1f} km from the nearest "
        f"other of {len(parts)} parts"
    )
    return [finding("IN-FAR-PARTS", where=path.name, what=what)]


def read_areas(
    path: Path, *, crs_to: str, layer: str | None = None, crs: str | None = None
) -> Reading[tuple[tuple[str, Area, Mapping[str, object]], ...]]:
    """Polygons with their names and attributes, in the field's metres."""
    try:
        features = read_features(path, layer=layer, crs=crs, option="boundary")
        rows = []
        for place, (geometry, row) in enumerate(
            zip(features.geometries, features.attributes, strict=True), start=1
        ):
            if geometry is None or geometry.is_empty:
                continue
            if geometry.geom_type not in ("Polygon", "MultiPolygon"):
                what = f"feature {place} is a {geometry.geom_type}, not a polygon"
                raise refuse("IN-NOT-AREA", path, what)
            moved = transform_geometry(geometry, source=features.crs, target=crs_to)
            if not shapely.is_valid(moved):
                moved = _areas_only(shapely.make_valid(moved, method="structure"))
            rows.append((_row_name(row, place), moved, row))
    except Unreadable as problem:
        return Reading(value=None, findings=(problem.found,))
    if not rows:
        found = finding("IN-NO-AREA", where=path.name, what="there is no polygon in the file")
        return Reading(value=None, findings=(found,))
    return Reading(value=tuple(rows))


def _row_name(row: Mapping[str, object], place: int) -> str:
    for key, value in row.items():
        if key.lower() in ("name", "zone", "id", "sample", "label") and value not in (None, ""):
            return str(value)
    return str(place)

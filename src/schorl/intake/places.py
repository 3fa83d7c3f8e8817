"""Where samples are: coordinates in columns, geometries, or sample zones joined by name."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely

from schorl.geodesy import WGS84, transform_geometry, transform_points
from schorl.intake.columns import Chosen
from schorl.intake.draft import Draft
from schorl.intake.lab_tables import Table
from schorl.intake.quantities import plain_words, read_cell
from schorl.intake.vectors import Features, read_features
from schorl.model.field import Area, Field
from schorl.model.reading import SampleHints

DECIMAL_DEGREES = (
    "degrees with minutes and seconds are not read: write decimal degrees, 52.0533 for 52°03'12\"N, "
    "west and south negative"
)


@dataclass(frozen=True, kw_only=True)
class Places:
    """Where samples are: points in metres, their kind, areas of sample zones."""

    east_north_m: np.ndarray
    kind: tuple[str, ...]
    areas: tuple[Area | None, ...]


def places_of(
    table: Table,
    chosen: Chosen,
    rows: list[int],
    ids: tuple[str, ...],
    *,
    features: Features | None,
    field: Field,
    hints: SampleHints,
    draft: Draft,
) -> Places | None:
    """Where the wanted rows lie, in the field's metres; None with findings where that fails."""
    if features is not None:
        return _from_features(features, rows, ids, field, draft)
    if hints.zone_layer is not None:
        return _from_zone_layer(hints, ids, field, draft)
    pairs = [
        (chosen.longitude, chosen.latitude, WGS84),
        (chosen.east, chosen.north, hints.crs),
    ]
    for first, second, system in pairs:
        if first is None or second is None:
            continue
        return _from_columns(
            table,
            (first, second),
            rows,
            ids,
            system=system,
            field=field,
            hints=hints,
            draft=draft,
        )
    draft.note(
        "IN-NO-PLACE",
        "no columns of coordinates were understood",
        'name them with `--column longitude="..." --column latitude="..."` or `east` and `north`, '
        "or join sample zones with `--zone-layer FILE`",
    )
    return None


def _from_features(
    features: Features, rows: list[int], ids: tuple[str, ...], field: Field, draft: Draft
) -> Places | None:
    kinds, areas, points = [], [], []
    for place, name in zip(rows, ids, strict=True):
        geometry = features.geometries[place]
        if geometry is None or geometry.is_empty:
            draft.note("IN-NO-PLACE", "the sample has no geometry", where=name)
            continue
        moved = transform_geometry(geometry, source=features.crs, target=field.crs)
        kind, area, point = _placed(moved)
        if point is None:
            draft.note("IN-NOT-PLACE", f"a {geometry.geom_type} is no sample place", where=name)
            continue
        kinds.append(kind)
        areas.append(area)
        points.append(point)
    if draft.broken:
        return None
    draft.saw("places", "geometries", f"{sorted(set(kinds))[0]} samples, {features.crs_said}")
    return Places(east_north_m=np.array(points), kind=tuple(kinds), areas=tuple(areas))


def _placed(geometry: Any) -> tuple[str, Area | None, tuple[float, float] | None]:
    if geometry.geom_type == "MultiPoint" and len(geometry.geoms) == 1:
        geometry = geometry.geoms[0]
    if geometry.geom_type == "Point":
        return "point", None, (geometry.x, geometry.y)
    if geometry.geom_type in ("Polygon", "MultiPolygon"):
        if not geometry.is_valid:
            geometry = shapely.make_valid(geometry, method="structure")
        inner = geometry.representative_point()
        return "zone", geometry, (inner.x, inner.y)
    return "", None, None


def _from_zone_layer(
    hints: SampleHints, ids: tuple[str, ...], field: Field, draft: Draft
) -> Places | None:
    assert hints.zone_layer is not None
    features = read_features(hints.zone_layer, layer=None, crs=None, option="samples")
    named: dict[str, Any] = {}
    column = hints.zone_column
    for row, geometry in zip(features.attributes, features.geometries, strict=True):
        keys = [column] if column else _name_columns(features, ids, draft)
        for key in keys:
            if row.get(key) is not None:
                named.setdefault(plain_words(str(row[key])), geometry)
    kinds, areas, points = [], [], []
    for name in ids:
        geometry = named.get(plain_words(name))
        if geometry is None:
            there = ", ".join(sorted(named)[:8])
            draft.note(
                "IN-JOIN",
                f"no zone is called `{name}` in {hints.zone_layer.name}; there are: {there}",
                "name the column with `--zone-column`, or mend the names",
            )
            continue
        moved = transform_geometry(geometry, source=features.crs, target=field.crs)
        kind, area, point = _placed(moved)
        kinds.append(kind)
        areas.append(area)
        points.append(point or (np.nan, np.nan))
    if draft.broken:
        return None
    draft.saw("places", "zone layer", f"{len(ids)} sample zones joined by name")
    return Places(east_north_m=np.array(points), kind=tuple(kinds), areas=tuple(areas))


def _name_columns(features: Features, ids: tuple[str, ...], draft: Draft) -> list[str]:
    """The one column of a zone layer that holds the composites' names; two are asked about."""
    wanted = {plain_words(name) for name in ids}
    names = {
        key: [plain_words(str(row.get(key))) for row in features.attributes]
        for key in sorted({key for row in features.attributes for key in row})
        if key.lower() in ("zone", "name", "id")
    }
    shares = {key: len(wanted & set(held)) for key, held in names.items()}
    best = [key for key, share in shares.items() if share and share == max(shares.values())]
    if len({tuple(names[key]) for key in best}) > 1 and not draft.broken:
        what = f"several columns of the zone layer hold the names: {', '.join(best)}"
        draft.note("IN-TWO-COLUMNS", what, f'say which with `--zone-column "{best[0]}"`')
    return best[:1] or list(names)


def _from_columns(
    table: Table,
    columns: tuple[int, int],
    rows: list[int],
    ids: tuple[str, ...],
    *,
    system: str | None,
    field: Field,
    hints: SampleHints,
    draft: Draft,
) -> Places | None:
    names = " and ".join(f"`{table.headers[one]}`" for one in columns)
    if system is None:
        draft.note(
            "IN-CRS",
            f"the columns {names} do not say their coordinate system",
            "give it with `--samples-crs EPSG:...`",
        )
        return None
    if hints.crs is not None:
        system = hints.crs
    points = np.full((len(rows), 2), np.nan)
    for place, row in enumerate(rows):
        for axis, column in enumerate(columns):
            cell = read_cell(table.rows[row][column], decimal_comma=table.decimal_comma)
            if cell.value is None:
                text = table.rows[row][column]
                draft.note(
                    "IN-NO-PLACE",
                    f"`{text}` is no coordinate",
                    DECIMAL_DEGREES if re.search(r"\d\D+\d+\D+\d|°", text) else "",
                    where=f"line {table.lines[row]}, sample {ids[place]}",
                )
                continue
            points[place, axis] = cell.value
    if draft.broken:
        return None
    if _outside_degrees(points, system):
        draft.note(
            "IN-DEGREES",
            f"the columns {names} are no longitude and latitude: {points[0, 0]:g}, {points[0, 1]:g}",
            "they may be metres, or swapped: name them with `--column` and give `--samples-crs`",
        )
        return None
    try:
        metres = transform_points(points, source=system, target=field.crs)
    except Exception:
        draft.note(
            "IN-CRS", f"`{system}` is not a coordinate system", "give `--samples-crs EPSG:...`"
        )
        return None
    if not np.isfinite(metres).all():
        draft.note("IN-DEGREES", f"some coordinates cannot lie in {system}")
        return None
    draft.saw("places", f"columns {names}", f"points, {system}")
    return Places(east_north_m=metres, kind=("point",) * len(rows), areas=(None,) * len(rows))


def _outside_degrees(points: np.ndarray, system: str) -> bool:
    if not _in_degrees(system):
        return False
    return bool((np.abs(points[:, 0]) > 180).any() or (np.abs(points[:, 1]) > 90).any())


def _in_degrees(system: str) -> bool:
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    try:
        return bool(CRS.from_user_input(system).is_geographic)
    except CRSError:
        return False  # said by who asks for it

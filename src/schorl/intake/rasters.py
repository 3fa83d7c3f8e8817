"""Further layers for zoning: conductivity, yield, elevation, an index; GeoTIFF or points."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import shapely

from schorl.geodesy import WGS84, transform_points
from schorl.intake.columns import choose_columns
from schorl.intake.guards import Unreadable, refuse
from schorl.intake.lab_tables import read_table
from schorl.intake.quantities import plain_words, read_cell
from schorl.intake.vectors import read_features
from schorl.model.field import Field
from schorl.model.reading import Reading, SampleHints
from schorl.model.settings import ExtraLayer

MOST_POINTS = 20_000  # an evenly thinned layer holds all a zone map can use


def read_extra_layer(
    path: Path, *, field: Field, name: str, weight: float, column: str | None = None
) -> Reading[ExtraLayer]:
    """Read a GeoTIFF's first band, or the values of a point layer, inside the field."""
    try:
        if path.suffix.lower() in (".tif", ".tiff"):
            points, values = _raster(path, field)
        else:
            points, values = _points(path, field, column)
        inside = shapely.contains_xy(
            shapely.buffer(field.boundary, 10.0), points[:, 0], points[:, 1]
        )
        points, values = points[inside], values[inside]
        if len(values) < 4:
            raise refuse("IN-NO-ROWS", path, f"{len(values)} values lie in the field")
    except Unreadable as problem:
        return Reading(value=None, findings=(problem.found,))
    step = max(len(values) // MOST_POINTS, 1)
    layer = ExtraLayer(
        name=name,
        east_north_m=tuple((float(x), float(y)) for x, y in points[::step]),
        values=tuple(float(one) for one in values[::step]),
        weight=weight,
    )
    return Reading(value=layer)


def _raster(path: Path, field: Field) -> tuple[np.ndarray, np.ndarray]:
    import rasterio

    try:
        with rasterio.open(path, driver="GTiff") as source:
            if source.crs is None:
                raise refuse("IN-CRS", path, "the raster does not say its coordinate system")
            band = source.read(1, masked=True)
            filled = np.ma.filled(band.astype(np.float64), np.nan)
            row, col = np.nonzero(np.isfinite(filled))
            east, north = rasterio.transform.xy(source.transform, row, col)
            points = np.column_stack([east, north]).astype(np.float64)
            values = filled[row, col]
            system = source.crs.to_wkt()
    except rasterio.errors.RasterioError as reason:
        raise refuse("IN-BROKEN", path, f"cannot be read as GeoTIFF: {reason}") from None
    return transform_points(points, source=system, target=field.crs), values


def _points(path: Path, field: Field, column: str | None) -> tuple[np.ndarray, np.ndarray]:
    if path.suffix.lower() in (".csv", ".txt", ".tsv", ".xlsx"):
        return _table_points(path, field, column)
    features = read_features(path, layer=None, crs=None, option="samples")
    wanted = plain_words(column or "value")
    rows = []
    for geometry, row in zip(features.geometries, features.attributes, strict=True):
        value = next((v for key, v in row.items() if plain_words(key) == wanted), None)
        if geometry is not None and isinstance(value, int | float):
            middle = geometry.representative_point()
            rows.append((middle.x, middle.y, float(value)))
    table = np.array(rows, dtype=np.float64).reshape(-1, 3)
    points = transform_points(table[:, :2], source=features.crs, target=field.crs)
    return points, table[:, 2]


def _table_points(path: Path, field: Field, column: str | None) -> tuple[np.ndarray, np.ndarray]:
    from schorl.intake.draft import Draft

    table = read_table(path, layer=None)
    chosen = choose_columns(table, SampleHints(), Draft(source=path.name))
    wanted = plain_words(column or "value")
    place = next((i for i, one in enumerate(table.headers) if plain_words(one) == wanted), None)
    if place is None or chosen.longitude is None or chosen.latitude is None:
        raise refuse("IN-COLUMN", path, f"no columns longitude, latitude and `{column or 'value'}`")
    rows = [
        [read_cell(row[at], decimal_comma=table.decimal_comma).value
         for at in (chosen.longitude, chosen.latitude, place)]
        for row in table.rows
    ]  # fmt: skip
    kept = np.array([row for row in rows if None not in row], dtype=np.float64).reshape(-1, 3)
    return transform_points(kept[:, :2], source=WGS84, target=field.crs), kept[:, 2]

"""Vector files of a prescription: GeoJSON (RFC 7946), shapefile, GeoPackage."""

from __future__ import annotations

import io
import json
import struct
import zipfile
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import shapely

from schorl.errors import OutputProblem
from schorl.findings import finding
from schorl.formats.shapes import (
    ZoneShape,
    attributes,
    boundary_degrees,
    profile_of,
    rate_column,
)
from schorl.geodesy import WGS84, transform_geometry, transform_points
from schorl.model.record import RunRecord

LARGEST_RATE = 9_999_999.99  # what N(10,2) holds
SHAPEFILE_STEM = "BORON01"
SHAPEFILE_SUFFIXES = (".shp", ".shx", ".dbf", ".prj", ".cpg")
FIXED_DAY = (126, 1, 1)  # dBASE's own date of last change: no clock in a file
FIXED_MOMENT = "2026-01-01T00:00:00.000Z"


def geojson_bytes(record: RunRecord, shapes: Iterable[ZoneShape]) -> bytes:
    """Zones as RFC 7946 GeoJSON: WGS 84, seven decimals, right-hand rings, no `crs` member.

    Where the controller's profile asks for single parts, or takes no holes, each part is a feature.
    """
    profile = profile_of(record)
    unit = profile.rate_unit(record.prescription.unit)
    single = profile.single_parts or not profile.holes
    features = []
    for shape in shapes:
        said = attributes(record, shape) | {
            "product_rate": round(rate_column(record, shape), 6), "product_unit": unit,
        }  # fmt: skip
        rings = [_rings(part) for part in shape.parts]
        for geometry in _geometries(rings, single=single):
            features.append({"type": "Feature", "properties": said, "geometry": geometry})
    west, south, east, north = boundary_degrees(record).bounds
    document = {
        "type": "FeatureCollection",
        "bbox": [round(one, 7) for one in (west, south, east, north)],
        "features": features,
    }
    return json.dumps(document, ensure_ascii=False, allow_nan=False, indent=1).encode("utf-8")


def _geometries(rings: list[Any], *, single: bool) -> list[dict[str, Any]]:
    if len(rings) == 1 or single:
        return [{"type": "Polygon", "coordinates": one} for one in rings]
    return [{"type": "MultiPolygon", "coordinates": rings}]


def _rings(part: Any) -> list[list[list[float]]]:
    rings = [part.exterior, *part.interiors]
    return [[[float(x), float(y)] for x, y in ring.coords] for ring in rings]


def write_shapefile(folder: Path, record: RunRecord, shapes: Iterable[ZoneShape]) -> None:
    """BORON01.* with RATE and ZONE N(4,0), one single-part polygon a row, and its zip.

    RATE is N(10,2), or has the decimals and unit of the controller's profile.

    Raises
    ------
    OutputProblem
        A rate that the column cannot hold.
    """
    import fiona

    decimals = profile_of(record).rate_decimals
    rows = [(part, shape) for shape in shapes for part in shape.parts]
    for _, shape in rows:
        if not 0 <= shape.rate.product_rate <= LARGEST_RATE:
            what = f"rate {shape.rate.product_rate:g} of zone {shape.zone.number} does not fit"
            raise OutputProblem([finding("OUT-RATE", where="shapefile", what=what)])
    path = folder / f"{SHAPEFILE_STEM}.shp"
    schema = {
        "geometry": "Polygon",
        "properties": {"RATE": f"float:10.{decimals}", "ZONE": "int:4"},
    }
    with fiona.open(
        path, "w", driver="ESRI Shapefile", schema=schema, crs=WGS84, encoding="UTF-8"
    ) as layer:
        layer.writerecords(
            {
                "type": "Feature",
                "geometry": shapely.geometry.mapping(part),
                "properties": {
                    "RATE": round(rate_column(record, shape), decimals),
                    "ZONE": shape.zone.number,
                },
            }
            for part, shape in rows
        )
    _fix_day(path.with_suffix(".dbf"))
    (folder / f"{SHAPEFILE_STEM}.zip").write_bytes(_zipped(folder))


def _fix_day(dbf: Path) -> None:
    data = bytearray(dbf.read_bytes())
    data[1:4] = struct.pack("3B", *FIXED_DAY)
    dbf.write_bytes(bytes(data))


def _zipped(folder: Path) -> bytes:
    return zip_bytes(
        {
            f"{SHAPEFILE_STEM}{suffix}": (folder / f"{SHAPEFILE_STEM}{suffix}").read_bytes()
            for suffix in SHAPEFILE_SUFFIXES
        }
    )


def zip_bytes(members: dict[str, bytes]) -> bytes:
    """An archive without clock, machine or compressor in its bytes."""
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", compression=zipfile.ZIP_STORED) as archive:
        for name in sorted(members):
            info = zipfile.ZipInfo(name, date_time=(1980, 1, 1, 0, 0, 0))
            info.create_system = 3
            info.external_attr = 0o644 << 16
            archive.writestr(info, members[name])
    return buffer.getvalue()


def write_geopackage(path: Path, record: RunRecord, shapes: Iterable[ZoneShape]) -> None:
    """Zones, samples and boundary as layers of one GeoPackage 1.2."""
    import geopandas

    samples = record.samples
    degrees = transform_points(samples.east_north_m, source=record.field.crs, target=WGS84)
    zones = list(shapes)
    layers = {
        "zones": geopandas.GeoDataFrame(
            [attributes(record, shape) for shape in zones],
            geometry=[shape.whole for shape in zones],
            crs=WGS84,
        ),
        "samples": geopandas.GeoDataFrame(
            _sample_rows(record), geometry=shapely.points(degrees), crs=WGS84
        ),
        "boundary": geopandas.GeoDataFrame(
            [{"field": record.field.name, "area_ha": record.field.area_ha}],
            geometry=[shapely.multipolygons(shapely.get_parts(boundary_degrees(record)))],
            crs=WGS84,
        ),
    }
    areas = [(name, area) for name, area in zip(samples.ids, samples.areas, strict=True) if area]
    if areas:
        layers["sample_areas"] = geopandas.GeoDataFrame(
            [{"sample": quoted(name)} for name, _ in areas],
            geometry=[
                transform_geometry(
                    shapely.multipolygons(shapely.get_parts(area)), source=record.field.crs,
                    target=WGS84,
                )
                for _, area in areas
            ],
            crs=WGS84,
        )  # fmt: skip
    write_layers(path, layers)


def write_layers(path: Path, layers: Mapping[str, Any]) -> None:
    """Write frames as layers of one GeoPackage 1.2, without a clock in its bytes."""
    import pyogrio

    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": FIXED_MOMENT})
    try:
        for place, (name, frame) in enumerate(layers.items()):
            frame.to_file(
                path, layer=name, driver="GPKG", engine="pyogrio", mode="w" if place == 0 else "a",
                VERSION="1.2",
            )  # fmt: skip
    finally:
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})


def _sample_rows(record: RunRecord) -> list[dict[str, object]]:
    samples, campaign = record.samples, record.samples.campaign
    rows = []
    for place, name in enumerate(samples.ids):
        row: dict[str, object] = {
            "sample": quoted(name),
            "kind": samples.kind[place],
            "cores": int(samples.cores[place]),
            "method": campaign.method,
            "depth_cm": campaign.depth_cm,
            "sampled_on": campaign.sampled_on.isoformat() if campaign.sampled_on else None,
            "laboratory": quoted(campaign.laboratory),
        }
        for prop, one in samples.properties.items():
            value = one.values[place]
            row[prop] = float(value) if np.isfinite(value) else None
            row[f"{prop}_below_limit"] = bool(one.below_limit[place])
        rows.append(row)
    return rows


def quoted(text: str) -> str:
    """Text that a spreadsheet would run as a formula gets a quote in front."""
    return f"'{text}" if text[:1] in ("=", "+", "-", "@", "\t", "\r", "\0") else text

"""Vector files of any allowed kind as plain features with their coordinate system."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import shapely

from schorl.geodesy import WGS84
from schorl.intake.guards import (
    DRIVERS,
    Unreadable,
    checked_bytes,
    refuse,
    refuse_xml_tricks,
    unpacked,
)


@dataclass(frozen=True, kw_only=True)
class Features:
    """Features of one layer: geometries without height, attributes, system as declared or given."""

    geometries: tuple[Any, ...]
    attributes: tuple[Mapping[str, object], ...]
    crs: str
    crs_said: str  # how the system became known, in words


def read_features(path: Path, *, layer: str | None, crs: str | None, option: str) -> Features:
    """Read a GeoJSON, shapefile (also zipped), GeoPackage or KML file.

    Parameters
    ----------
    option
        "boundary" or "samples", to name the right options in hints.

    Raises
    ------
    Unreadable
        With the finding: unknown kind, broken, several layers, no coordinate system.
    """
    suffix = path.suffix.lower()
    data = checked_bytes(path)
    if suffix == ".zip":
        return _zipped_shapefile(path, data, layer=layer, crs=crs, option=option)
    if suffix not in DRIVERS:
        known = ", ".join(sorted([*DRIVERS, ".zip"]))
        raise refuse(
            "IN-KIND", path, f"`{suffix or path.name}` is not a kind that is read: {known}"
        )
    _check_content(path, suffix, data)
    return _opened(path, DRIVERS[suffix], path, layer=layer, crs=crs, option=option)


def _check_content(path: Path, suffix: str, data: bytes) -> None:
    """The content must be what the name says: hidden formats are refused."""
    if suffix in (".geojson", ".json"):
        try:
            document = json.loads(data.decode("utf-8-sig"))
        except (UnicodeDecodeError, json.JSONDecodeError, RecursionError) as reason:
            raise refuse("IN-BROKEN", path, f"not valid JSON: {reason}") from None
        if isinstance(document, dict) and "crs" in document and document["crs"] is None:
            what = "the file says that its coordinate system is not known (`crs` is null)"
            raise refuse("IN-CRS", path, what, "write it in longitude and latitude")
        if not isinstance(document, dict) or "type" not in document:
            raise refuse("IN-BROKEN", path, "JSON, but not GeoJSON: it has no `type`")
    if suffix == ".gpkg" and not data.startswith(b"SQLite format 3\0"):
        raise refuse("IN-BROKEN", path, "not a GeoPackage: it does not start as one")
    if suffix == ".shp" and data[:4] != b"\0\0\x27\x0a":
        raise refuse("IN-BROKEN", path, "not a shapefile: it does not start as one")
    if suffix == ".kml":
        refuse_xml_tricks(path, data)


def _zipped_shapefile(
    path: Path, data: bytes, *, layer: str | None, crs: str | None, option: str
) -> Features:
    import tempfile

    members = unpacked(path, data)
    shapes = sorted(name for name in members if name.lower().endswith(".shp"))
    if layer:
        shapes = [name for name in shapes if Path(name).stem == layer]
    if len(shapes) != 1:
        names = ", ".join(Path(name).stem for name in shapes) or "none"
        raise refuse(
            "IN-LAYERS",
            path,
            f"the archive must hold one shapefile to read; it holds: {names}",
            f"name one with `--{option}-layer`",
        )
    stem = shapes[0][:-4]
    with tempfile.TemporaryDirectory() as folder:
        # Members keep a name of ours: nothing in an archive decides where a file goes.
        for suffix in (".shp", ".shx", ".dbf", ".prj", ".cpg"):
            for name, content in members.items():
                if name.lower() == (stem + suffix).lower():
                    Path(folder, f"layer{suffix}").write_bytes(content)
        inner = Path(folder, "layer.shp")
        _check_content(inner, ".shp", inner.read_bytes())
        return _opened(inner, "ESRI Shapefile", path, layer=None, crs=crs, option=option)


def _opened(
    source: Path, driver: str, path: Path, *, layer: str | None, crs: str | None, option: str
) -> Features:
    import fiona

    os.environ.setdefault("GDAL_DISABLE_READDIR_ON_OPEN", "FALSE")
    drivers = ["LIBKML", "KML"] if driver == "KML" else [driver]
    fiona.supported_drivers["KML"] = "r"
    fiona.supported_drivers["LIBKML"] = "r"
    last: Exception | None = None
    for one in drivers:
        try:
            chosen = _layer(source, one, path, layer, option)
            with fiona.open(source, driver=one, layer=chosen) as collection:
                declared = _declared(collection, driver)
                rows = [(_shape(path, row.geometry), dict(row.properties)) for row in collection]
            break
        except Unreadable:
            raise
        except Exception as reason:  # GDAL's many kinds of failure all mean: not readable
            last = reason
    else:
        raise refuse("IN-BROKEN", path, f"cannot be read as {driver}: {last}") from None
    system, said = _system(path, crs, declared, option)
    _check_degrees(path, system, [shape for shape, _ in rows], option)
    return Features(
        geometries=tuple(shape for shape, _ in rows),
        attributes=tuple(properties for _, properties in rows),
        crs=system,
        crs_said=said,
    )


def _layer(source: Path, driver: str, path: Path, layer: str | None, option: str) -> str | None:
    import fiona

    if driver in ("GeoJSON", "ESRI Shapefile"):
        return None
    names = fiona.listlayers(source)
    if layer is not None:
        if layer not in names:
            raise refuse("IN-LAYERS", path, f"no layer `{layer}`; it has {', '.join(names)}")
        return layer
    if len(names) != 1:
        raise refuse(
            "IN-LAYERS",
            path,
            f"it has {len(names)} layers: {', '.join(names)}",
            f"name one with `--{option}-layer`",
        )
    return str(names[0])


def _declared(collection: Any, driver: str) -> str | None:
    if driver == "KML":
        return WGS84  # the KML standard allows no other
    text = collection.crs_wkt or ""
    if not text:
        return WGS84 if driver == "GeoJSON" else None
    from pyproj import CRS

    system = CRS.from_wkt(text)
    code = system.to_epsg(min_confidence=70)
    return f"EPSG:{code}" if code else str(text)


def _system(path: Path, given: str | None, declared: str | None, option: str) -> tuple[str, str]:
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    if given is not None:
        try:
            CRS.from_user_input(given)
        except CRSError:
            raise refuse("IN-CRS", path, f"`{given}` is not a coordinate system") from None
        if declared and not same_system(given, declared):
            raise refuse(
                "IN-CRS-CLASH",
                path,
                f"`--{option}-crs` says {given}, the file itself says {_short(declared)}",
            )
        return given, f"{given}, as given"
    if declared is None:
        raise refuse(
            "IN-CRS",
            path,
            "the file does not say its coordinate system",
            f"give it with `--{option}-crs EPSG:...`",
        )
    return declared, f"{_short(declared)}, as the file declares"


def same_system(one: str, other: str) -> bool:
    """Whether two names mean one coordinate system, however they order its axes.

    Coordinates are read as east, north whatever the system's own order: OGC:CRS84 and EPSG:4326
    are the same here.
    """
    from pyproj import CRS

    return CRS.from_user_input(one).equals(CRS.from_user_input(other), ignore_axis_order=True)


def _short(system: str) -> str:
    from pyproj import CRS

    return system if len(system) < 20 else CRS.from_user_input(system).name


def _shape(path: Path, geometry: Any) -> Any:
    if geometry is None:
        return None
    try:
        return shapely.force_2d(shapely.geometry.shape(geometry))
    except (ValueError, TypeError, AttributeError) as reason:
        raise refuse("IN-BROKEN", path, f"a geometry cannot be read: {reason}") from None


def _check_degrees(path: Path, system: str, shapes: list[Any], option: str) -> None:
    from pyproj import CRS

    if not CRS.from_user_input(system).is_geographic:
        return
    for place, one in enumerate(shapes, start=1):
        if one is None or one.is_empty:
            continue
        west, south, east, north = one.bounds
        if not (-180 <= west <= east <= 180 and -90 <= south <= north <= 90):
            raise refuse(
                "IN-DEGREES",
                path,
                f"feature {place}: {west:g}, {south:g} is no longitude and latitude",
                f"the coordinates may be metres: give their system with `--{option}-crs`",
            )

"""Reading prescription files back, each by another route than it was written by."""

from __future__ import annotations

import json
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import shapely
from shapely.geometry import Polygon

from schorl.formats.reading_grid import TaskCells, read_cells
from schorl.formats.reading_shapefile import length_faults, ring_faults
from schorl.formats.task_rules import task_faults
from schorl.formats.taskdata import MASS_COUNTS, MASS_DDI, VOLUME_COUNTS, VOLUME_DDI

RATE_STEP = {"geojson": 1e-6, "gpkg": 1e-6, "shapefile": 0.005, "taskdata": 0.005}
UNITS = {MASS_DDI: "kg", VOLUME_DDI: "L"}


@dataclass(frozen=True, kw_only=True)
class Fault:
    """One thing that is wrong with a file."""

    file: str
    place: str
    what: str


@dataclass(frozen=True, kw_only=True)
class FileZone:
    """A zone as a file has it: one polygon or several, its number, its product rate."""

    number: int | None
    geometry: Any
    rate: float | None


@dataclass(frozen=True, kw_only=True)
class FileZones:
    """All zones of a file, and faults met while reading."""

    kind: str
    zones: tuple[FileZone, ...]
    faults: tuple[Fault, ...] = ()
    boundary: Any = None
    cells: TaskCells | None = None  # of a grid, instead of zones
    unit: str = ""  # "kg" or "L" where the kind of file says it by itself


def read_zones(path: Path) -> FileZones:
    """Zones of a GeoJSON, shapefile, GeoPackage or TASKDATA.XML.

    What cannot be read at all comes back as a fault, never as an exception.
    """
    readers = {
        ".geojson": _geojson, ".json": _geojson, ".shp": _shapefile, ".gpkg": _geopackage,
        ".xml": _taskdata,
    }  # fmt: skip
    reader = readers.get(path.suffix.lower())
    if reader is None:
        return _unread(path, f"`{path.suffix}` is not a kind of prescription file")
    try:
        return reader(path)
    except Exception as reason:  # whatever a broken file does to a reader is a fault of the file
        return _unread(path, f"cannot be read: {type(reason).__name__}: {reason}")


def _unread(path: Path, what: str) -> FileZones:
    fault = Fault(file=path.name, place="file", what=what)
    return FileZones(kind="", zones=(), faults=(fault,))


def _geojson(path: Path) -> FileZones:
    import pyogrio

    faults = []
    document = json.loads(path.read_text(encoding="utf-8"))
    if "crs" in document:
        faults.append(Fault(file=path.name, place="top", what="a `crs` member is not RFC 7946"))
    meta, _, wkb, columns = pyogrio.raw.read(path)
    table = dict(zip(meta["fields"], columns, strict=True))
    missing = {"zone", "product_rate"} - set(table)
    if missing:
        what = f"columns missing: {', '.join(sorted(missing))}"
        return FileZones(
            kind="geojson", zones=(), faults=(Fault(file=path.name, place="top", what=what),)
        )
    zones = _rows(table["zone"], shapely.from_wkb(wkb), table["product_rate"])
    faults += _ring_faults(path, document)
    return FileZones(kind="geojson", zones=zones, faults=tuple(faults))


def _ring_faults(path: Path, document: dict[str, Any]) -> list[Fault]:
    """Rings that turn the wrong way (RFC 7946, 3.1.6)."""
    faults = []
    for place, feature in enumerate(document.get("features", []), start=1):
        geometry = feature.get("geometry") or {}
        polygons = geometry.get("coordinates", [])
        if geometry.get("type") == "Polygon":
            polygons = [polygons]
        for rings in polygons:
            for index, ring in enumerate(rings):
                if len(ring) < 4 or ring[0] != ring[-1]:
                    faults.append(_fault(path, place, "a ring is not closed"))
                elif shapely.is_ccw(shapely.linearrings(ring)) != (index == 0):
                    faults.append(_fault(path, place, "a ring turns the wrong way"))
    return faults


def _fault(path: Path, place: int, what: str) -> Fault:
    return Fault(file=path.name, place=f"feature {place}", what=what)


def _rows(numbers: Any, geometries: Any, rates: Any) -> tuple[FileZone, ...]:
    return tuple(
        FileZone(number=_whole(number), geometry=geometry, rate=_real(rate))
        for number, geometry, rate in zip(numbers, geometries, rates, strict=True)
    )


def _whole(value: Any) -> int | None:
    try:
        return int(value)
    except (TypeError, ValueError):
        return None


def _real(value: Any) -> float | None:
    try:
        return float(value)
    except (TypeError, ValueError):
        return None


def _shapefile(path: Path) -> FileZones:
    import pyogrio

    faults = [
        Fault(file=path.with_suffix(suffix).name, place="file", what="is missing")
        for suffix in (".shx", ".dbf", ".prj", ".cpg")
        if not path.with_suffix(suffix).exists()
    ]
    if any(fault.file.endswith((".shx", ".dbf")) for fault in faults):
        return FileZones(kind="shapefile", zones=(), faults=tuple(faults))
    said = length_faults(path)  # of a set cut short the rings cannot be told
    said = said or ring_faults(path)
    faults += [Fault(file=name, place=place, what=what) for name, place, what in said]
    meta, _, wkb, columns = pyogrio.raw.read(path)
    table = dict(zip(meta["fields"], columns, strict=True))
    if {"RATE", "ZONE"} - set(table):
        faults.append(Fault(file=path.name, place="table", what="no columns RATE and ZONE"))
        return FileZones(kind="shapefile", zones=(), faults=tuple(faults))
    zones = _rows(table["ZONE"], shapely.from_wkb(wkb), table["RATE"])
    return FileZones(kind="shapefile", zones=zones, faults=tuple(faults))


def _geopackage(path: Path) -> FileZones:
    import fiona

    faults = _database_faults(path)
    with fiona.open(path, layer="zones") as layer:
        rows = [(row.properties, shapely.geometry.shape(row.geometry)) for row in layer]
    with fiona.open(path, layer="boundary") as layer:
        boundary = shapely.union_all([shapely.geometry.shape(row.geometry) for row in layer])
    zones = tuple(
        FileZone(
            number=_whole(row.get("zone")), geometry=shape, rate=_real(row.get("product_rate"))
        )
        for row, shape in rows
    )
    return FileZones(kind="gpkg", zones=zones, faults=tuple(faults), boundary=boundary)


def _database_faults(path: Path) -> list[Fault]:
    import sqlite3

    faults = []
    for side in ("-journal", "-wal"):
        if path.with_name(path.name + side).exists():
            faults.append(Fault(file=path.name, place="file", what=f"a {side} file lies beside it"))
    with sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True) as database:
        if database.execute("pragma integrity_check").fetchone()[0] != "ok":
            faults.append(Fault(file=path.name, place="database", what="not sound inside"))
        if database.execute("pragma application_id").fetchone()[0] != 0x47504B47:
            faults.append(Fault(file=path.name, place="database", what="not marked as GeoPackage"))
        if database.execute("pragma foreign_key_check").fetchall():
            faults.append(Fault(file=path.name, place="database", what="dangling references"))
    database.close()
    return faults


def _taskdata(path: Path) -> FileZones:
    data = path.read_bytes()
    if b"<!DOCTYPE" in data.upper() or b"<!ENTITY" in data.upper():
        raise ValueError("it declares a document type or entities")
    root = ElementTree.fromstring(data)
    faults = [
        Fault(file=path.name, place=place, what=what) for place, what in task_faults(path, root)
    ]
    tasks = root.findall("TSK")
    first = next(root.iter("PDV"), None)
    unit = "" if first is None else UNITS.get(first.get("A", ""), "")
    if len(tasks) == 1 and tasks[0].find("GRD") is not None:
        return replace(_task_cells(path, root, tasks[0], faults), unit=unit)
    zones: list[FileZone] = []
    for zone in tasks[0].findall("TZN") if tasks else []:
        polygons = [_task_polygon(one) for one in zone.findall("PLN")]
        if not polygons:
            continue
        value = zone.find("PDV")
        said = zone.get("B", "").removeprefix("zone ")
        zones.append(
            FileZone(
                number=_whole(said),
                geometry=shapely.union_all([one for one in polygons if one is not None]),
                rate=_task_rate(value),
            )
        )
    return FileZones(kind="taskdata", zones=tuple(zones), faults=tuple(faults), unit=unit)


def _task_cells(
    path: Path, root: ElementTree.Element, task: ElementTree.Element, faults: list[Fault]
) -> FileZones:
    cells, said = read_cells(path, task)
    faults += [Fault(file=path.name, place=place, what=what) for place, what in said]
    fields = [_task_polygon(one) for one in root.iterfind("PFD/PLN")]
    outline = shapely.union_all([one for one in fields if one is not None]) if fields else None
    return FileZones(kind="taskdata", zones=(), faults=tuple(faults), boundary=outline, cells=cells)


def _task_rate(value: ElementTree.Element | None) -> float | None:
    if value is None:
        return None
    per = {MASS_DDI: MASS_COUNTS, VOLUME_DDI: VOLUME_COUNTS}.get(value.get("A", ""))
    counts = _whole(value.get("B"))
    return None if per is None or counts is None else counts / per


def _task_polygon(polygon: ElementTree.Element) -> Any:
    """The area of a polygon element: outer rings less inner ones."""
    rings: dict[str, list[Polygon]] = {"1": [], "2": []}
    for line in polygon.findall("LSG"):
        points = [(float(one.get("D", "nan")), float(one.get("C", "nan"))) for one in line]
        rings.setdefault(line.get("A", ""), []).append(Polygon(points))
    if len(rings["1"]) == 1:
        return Polygon(rings["1"][0].exterior, [one.exterior for one in rings["2"]])
    whole = shapely.union_all(rings["1"])
    return shapely.difference(whole, shapely.union_all(rings["2"])) if rings["1"] else None

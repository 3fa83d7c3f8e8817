"""Answer whether a pack or file is whole, valid, inside its field and as its record says."""

from __future__ import annotations

import hashlib
import json
import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import shapely

from schorl.formats.reading import RATE_STEP, Fault, FileZone, FileZones, read_zones
from schorl.formats.reading_grid import treated_outside
from schorl.formats.sealing import json_bytes, sealed
from schorl.formats.whole_folder import complete_swaps
from schorl.formats.writing import safe_name
from schorl.geodesy import WGS84, area_ha, field_crs, transform_geometry
from schorl.model.profile import RATE_UNITS

GAP_M2, GAP_M2_PER_M = 0.1, 0.02  # cover after rounding: 0.1 m² and 2 cm along the edge
TOTAL_TOLERANCE = 0.005
ZIPPED, MOST_ZIPPED = (".shp", ".shx", ".dbf", ".prj", ".cpg", ".xml", ".bin"), 2**26
ZONE_FILES = ("prescription.geojson", "shapefile/BORON01.shp", "prescription.gpkg",
              "TASKDATA/TASKDATA.XML")  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class Verification:
    """The answer: whole or not, every fault, and what the record says where there is one."""

    whole: bool
    faults: tuple[Fault, ...]
    record: dict[str, Any] | None


def verify(path: Path, *, boundary: Path | None = None, held: Any = None) -> Verification:
    """Verify a pack's folder, a TASKDATA folder or a single file.

    Parameters
    ----------
    boundary
        A boundary file to hold the zones to; a pack brings its own.
    held
        The same as a geometry in degrees.
    """
    complete_swaps(path)
    outline = _outline(boundary) if boundary is not None else held
    if not path.exists():
        return _answer([Fault(file=path.name, place="file", what="there is nothing here")], None)
    if path.is_dir() and (path / "manifest.json").exists():
        faults, record = _verify_pack(path, outline)
        return _answer(faults, record)
    if path.is_dir() and (path / "TASKDATA.XML").exists():
        path = path / "TASKDATA.XML"
    if path.is_dir():
        what = "neither a pack (no manifest.json) nor a TASKDATA folder"
        return _answer([Fault(file=path.name, place="folder", what=what)], None)
    if path.suffix.lower() in (".tif", ".tiff"):
        return _answer(_raster_faults(path), None)
    if path.suffix.lower() == ".zip":
        return _answer(_zip_faults(path, outline), None)
    read = read_zones(path)
    if read.cells is not None:
        return _answer(cell_faults(path.name, read, outline, None, ()), None)
    return _answer(zone_faults(path.name, read, outline, None), None)


def _answer(faults: list[Fault], record: dict[str, Any] | None) -> Verification:
    return Verification(whole=not faults, faults=tuple(faults), record=record)


def _outline(path: Path) -> Any:
    from schorl.formats.outline import read_outline

    return read_outline(path)


def _verify_pack(folder: Path, outline: Any) -> tuple[list[Fault], dict[str, Any] | None]:
    faults, manifest, summary = _records(folder)
    if manifest is None or summary is None:
        return faults, summary
    if not _sealed(folder, manifest):
        return [
            Fault(file="manifest.json", place="seal", what="was changed after writing")
        ], summary
    faults += _manifest_faults(folder, manifest)
    if any(fault.file == "summary.json" for fault in faults):
        return faults, summary  # what was recorded is not known
    if "seasons" in summary:  # a comparison holds no rates
        return faults + _raster_faults_in(folder, "change.tif"), summary
    held = outline
    package = folder / "prescription.gpkg"
    if held is None and package.exists():
        held = read_zones(package).boundary
    zones = read_zones(package).zones if package.exists() else ()
    for path in _zone_files(folder):
        name = path.relative_to(folder).as_posix()
        read = read_zones(path)
        if read.cells is not None:
            faults += cell_faults(name, read, held, summary, zones)
        else:
            faults += zone_faults(name, read, held, summary)
    faults += _raster_faults_in(folder, "surfaces/*.tif")
    faults += _total_faults(summary)
    return faults, summary


def _raster_faults_in(folder: Path, names: str) -> list[Fault]:
    return [fault for one in sorted(folder.glob(names)) for fault in _raster_faults(one)]


def _zone_files(folder: Path) -> list[Path]:
    """Files of a pack that hold zones or rates, in the order a contractor looks for them."""
    named = [folder / name for name in ZONE_FILES if (folder / name).exists()]
    return [*named, *sorted(folder.glob("task_data/*/TASKDATA/TASKDATA.XML"))]


def _records(folder: Path) -> tuple[list[Fault], dict[str, Any] | None, dict[str, Any] | None]:
    faults: list[Fault] = []
    read: list[dict[str, Any] | None] = []
    for name in ("manifest.json", "summary.json"):
        try:
            document = json.loads((folder / name).read_text(encoding="utf-8"))
            read.append(document if isinstance(document, dict) else None)
        except (OSError, ValueError) as reason:
            faults.append(Fault(file=name, place="file", what=f"cannot be read: {reason}"))
            read.append(None)
    return faults, read[0], read[1]


def _sealed(folder: Path, manifest: dict[str, Any]) -> bool:
    """Whether a manifest is the one that was written, to the byte."""
    try:
        return json_bytes(sealed(manifest)) == (folder / "manifest.json").read_bytes()
    except ValueError:  # numbers that JSON does not know
        return False


def _manifest_faults(folder: Path, manifest: dict[str, Any]) -> list[Fault]:
    faults = []
    listed = {row["path"]: row for row in manifest.get("files", [])}
    for name, row in listed.items():
        path = folder / name
        if not path.is_file():
            faults.append(Fault(file=name, place="file", what="is missing"))
            continue
        data = path.read_bytes()
        if len(data) != row["bytes"] or hashlib.sha256(data).hexdigest() != row["sha256"]:
            what = f"is not the file that was written ({len(data)} bytes, {row['bytes']} recorded)"
            faults.append(Fault(file=name, place="file", what=what))
    there = {one.relative_to(folder).as_posix() for one in folder.rglob("*") if one.is_file()}
    for name in sorted(there - set(listed) - {"manifest.json"}):
        faults.append(Fault(file=name, place="file", what="was not written with this pack"))
    return faults


def zone_faults(
    name: str, read: FileZones, outline: Any, summary: dict[str, Any] | None
) -> list[Fault]:
    """Faults of a file's zones: geometry, cover, rates, and agreement with the record."""
    faults = [Fault(file=name, place=one.place, what=one.what) for one in read.faults]
    if not read.zones:
        if not faults:
            faults.append(Fault(file=name, place="file", what="there is no zone in it"))
        return faults
    for place, zone in enumerate(read.zones, start=1):
        where = f"zone {zone.number}" if zone.number is not None else f"feature {place}"
        faults += [Fault(file=name, place=where, what=what) for what in _one_zone(zone)]
    if faults:
        return faults
    faults += _cover_faults(name, [zone.geometry for zone in read.zones], outline)
    if summary is not None:
        faults += _record_faults(name, read, summary)
    return faults


def cell_faults(
    name: str,
    read: FileZones,
    outline: Any,
    summary: dict[str, Any] | None,
    zones: tuple[FileZone, ...],
) -> list[Fault]:
    """Faults of a grid of rates: its own, ground outside the field, and rates against the record.

    ``zones`` are those of the pack's own GeoPackage: a cell has the rate of the zone under its
    middle, or none where it touches ground that is shut off.
    """
    faults = [Fault(file=name, place=one.place, what=one.what) for one in read.faults]
    cells = read.cells
    assert cells is not None
    for where in (outline, read.boundary):
        count = 0 if where is None else treated_outside(cells, where)
        if count:
            what = f"{count} cells outside the field get product"
            faults.append(Fault(file=name, place="cells", what=what))
    if summary is None or faults:
        return faults
    faults += _unit_faults(name, read, summary)
    recorded = {row["zone"]: row for row in summary["zones"]}
    step = RATE_STEP[read.kind] * (1 + 1e-9) + 1e-9
    for zone in zones:
        row = recorded.get(zone.number)
        if row is None or zone.geometry is None:
            continue
        shapely.prepare(zone.geometry)
        own = cells.rates[shapely.contains_xy(zone.geometry, cells.east, cells.north)]
        wrong = own[(np.abs(own - row["product_rate"]) > step) & (own != 0)]
        if len(wrong):
            what = f"a cell has {wrong[0]:g}, recorded {row['product_rate']:g}"
            faults.append(Fault(file=name, place=f"zone {zone.number}", what=what))
    return faults


def _one_zone(zone: Any) -> list[str]:
    said = []
    if zone.number is None:
        said.append("no zone number")
    if zone.rate is None or not math.isfinite(zone.rate):
        said.append(f"its rate is {zone.rate}")
    elif zone.rate < 0:
        said.append(f"its rate {zone.rate:g} is negative")
    if zone.geometry is None or zone.geometry.is_empty:
        said.append("it has no geometry")
    elif zone.geometry.geom_type not in ("Polygon", "MultiPolygon"):
        said.append(f"it is a {zone.geometry.geom_type}")
    elif not zone.geometry.is_valid:
        said.append(f"its geometry is invalid: {shapely.is_valid_reason(zone.geometry)}")
    elif not _in_degrees(zone.geometry):
        said.append("its coordinates are no longitude and latitude")
    return said


def _in_degrees(geometry: Any) -> bool:
    west, south, east, north = geometry.bounds
    return bool(-180 <= west <= east <= 180 and -90 <= south <= north <= 90)


def _cover_faults(name: str, zones: list[Any], outline: Any) -> list[Fault]:
    """Overlaps, gaps and what lies outside, in square metres."""
    whole = shapely.union_all(zones)
    west, south, east, north = whole.bounds
    crs = field_crs((west + east) / 2, (south + north) / 2, west=west, east=east)
    metres = [transform_geometry(one, source=WGS84, target=crs) for one in zones]
    union = shapely.union_all(metres)
    allowed = GAP_M2 + GAP_M2_PER_M * union.length
    faults = []
    overlap = sum(one.area for one in metres) - union.area
    if overlap > allowed:
        faults.append(Fault(file=name, place="zones", what=f"zones overlap by {overlap:.1f} m²"))
    if outline is None:
        return faults
    field = transform_geometry(outline, source=WGS84, target=crs)
    allowed = GAP_M2 + GAP_M2_PER_M * field.length
    for what, area in (
        ("lie outside the field", shapely.difference(union, field).area),
        ("leave a gap in the field", shapely.difference(field, union).area),
    ):
        if area > allowed:
            faults.append(Fault(file=name, place="zones", what=f"zones {what}: {area:.1f} m²"))
    return faults


def _record_faults(name: str, read: FileZones, summary: dict[str, Any]) -> list[Fault]:
    """Rates, zones and total against the record."""
    recorded = {row["zone"]: row for row in summary["zones"]}
    faults = _unit_faults(name, read, summary)
    per, step = _scale(read.kind, summary)
    total = 0.0
    for zone in read.zones:
        row = recorded.get(zone.number)
        if row is None:
            what = "is not in the record"
            faults.append(Fault(file=name, place=f"zone {zone.number}", what=what))
            continue
        assert zone.rate is not None
        if abs(zone.rate * per - row["product_rate"]) > step:
            what = f"rate {zone.rate:g}, recorded {row['product_rate'] / per:g}"
            faults.append(Fault(file=name, place=f"zone {zone.number}", what=what))
        total += zone.rate * per * area_ha(zone.geometry, crs=WGS84)
    gone = set(recorded) - {zone.number for zone in read.zones}
    for number in sorted(gone):
        faults.append(Fault(file=name, place=f"zone {number}", what="is missing"))
    said = summary["totals"]["product"]
    rounded = step * sum(row["area_ha"] for row in recorded.values() if row["product_rate"] > 0)
    if abs(total - said) > TOTAL_TOLERANCE * max(said, 1.0) + rounded:
        what = f"its rates add up to {total:.1f}, recorded {said:.1f}"
        faults.append(Fault(file=name, place="total", what=what))
    return faults


def _unit_faults(name: str, read: FileZones, summary: dict[str, Any]) -> list[Fault]:
    said = summary["totals"]["unit"]
    if read.unit in ("", said):
        return []
    return [Fault(file=name, place="rates", what=f"they are {read.unit}/ha, recorded {said}/ha")]


def _scale(kind: str, summary: dict[str, Any]) -> tuple[float, float]:
    """What one unit of a file's rate column is in kg/ha or L/ha, and how far rounding may be off.

    The controller's profile sets unit and decimals of what it reads; it rounds down.
    """
    profile = summary.get("profile")
    if profile is None or kind not in ("geojson", "shapefile"):
        return 1.0, RATE_STEP[kind] * (1 + 1e-9) + 1e-9
    per = RATE_UNITS[profile["rate_unit"]][1]
    return per, per * 10.0 ** -profile["rate_decimals"] * (1 + 1e-6)


def _total_faults(summary: dict[str, Any]) -> list[Fault]:
    faults = []
    for key, rate in (("product", "product_rate"), ("boron_kg", "boron_kg_ha")):
        total = sum(row["area_ha"] * row[rate] for row in summary["zones"])
        said = summary["totals"][key]
        if abs(total - said) > 1e-6 * max(abs(said), 1.0):
            what = f"{key} {said:g} is not the sum of area times rate, {total:g}"
            faults.append(Fault(file="summary.json", place="totals", what=what))
    for row in summary["zones"]:
        held = {k: v for k, v in row["limits_kg_ha"].items() if k != "need" and v is not None}
        most = min(held.values(), default=math.inf)
        if row["boron_kg_ha"] > most + 1e-6:
            what = f"{row['boron_kg_ha']:g} kg B/ha is above its limit {most:g}"
            faults.append(Fault(file="summary.json", place=f"zone {row['zone']}", what=what))
    return faults


def _raster_faults(path: Path) -> list[Fault]:
    """Read every block: a file cut short still has a sound header."""
    import rasterio

    try:
        with rasterio.open(path) as source:
            values = source.read(1, masked=True)
            if source.crs is None:
                return [Fault(file=path.name, place="header", what="no coordinate system")]
            if source.nodata is None:
                return [Fault(file=path.name, place="header", what="no value for missing cells")]
            if not np.isfinite(values.compressed()).all():
                return [Fault(file=path.name, place="cells", what="cells that are not numbers")]
            if values.count() == 0:
                return [Fault(file=path.name, place="cells", what="no cell has a value")]
            if path.stem == "rate" and (values.compressed() < 0).any():
                return [Fault(file=path.name, place="cells", what="negative rates")]
    except Exception as reason:  # whatever a broken file does to the reader
        return [Fault(file=path.name, place="file", what=f"cannot be read: {reason}")]
    return []


def _zip_faults(path: Path, outline: Any) -> list[Fault]:
    """A zipped shapefile or task data set: unpacked to names of ours, then read as any other."""
    import tempfile
    import zipfile

    try:
        with zipfile.ZipFile(path) as archive, tempfile.TemporaryDirectory() as folder:
            inner = _unpacked(archive, Path(folder))
            if inner is None:
                what = "neither a shapefile nor a TASKDATA folder in it"
                return [Fault(file=path.name, place="archive", what=what)]
            return [
                Fault(file=path.name, place=f"{one.file}, {one.place}", what=one.what)
                for one in verify(inner, held=outline).faults
            ]
    except (zipfile.BadZipFile, OSError, NotImplementedError) as reason:
        return [Fault(file=path.name, place="archive", what=f"cannot be read: {reason}")]


def _unpacked(archive: Any, folder: Path) -> Path | None:
    """The set inside an archive, at most 20 members of 64 MB under names that lead nowhere else."""
    for info in archive.infolist()[:20]:
        inside = Path(info.filename)
        named = f"zipped{inside.suffix.lower()}"
        if (
            len(inside.parts) == 2
            and inside.parts[0] == "TASKDATA"
            and safe_name(inside.name) == inside.name
        ):
            named = inside.name
        if inside.suffix.lower() in ZIPPED and info.file_size < MOST_ZIPPED:
            (folder / named).write_bytes(archive.read(info))
    for name in ("TASKDATA.XML", "zipped.shp"):
        if (folder / name).exists():
            return folder / name
    return None

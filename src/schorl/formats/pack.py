"""The pack: everything a run leaves, whole or absent, read back by other readers."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from schorl.errors import OutputProblem
from schorl.findings import finding
from schorl.formats.sealing import sealed, write_json
from schorl.formats.verify import verify
from schorl.formats.whole_folder import Rows, listed, put_folder, sha256_of
from schorl.formats.writing import safe_name
from schorl.model.record import RunRecord
from schorl.model.summary import SCHEMA, summary

__all__ = ["PackWritten", "safe_name", "write_pack"]


@dataclass(frozen=True, kw_only=True)
class PackWritten:
    """Where a pack went, and its files: path, bytes, sha256."""

    folder: Path
    files: tuple[tuple[str, int, str], ...]


def prescription_files(record: RunRecord) -> tuple[str, ...]:
    """Files for the controller, in the order a contractor looks for them."""
    from schorl.formats.shapes import profile_of
    from schorl.formats.taskdata import XML_NAME, task_place

    profile = profile_of(record)
    files = {
        "geojson": ("prescription.geojson",),
        "shapefile": ("shapefile/BORON01.shp", "shapefile/BORON01.zip"),
        "task data": (f"{task_place(profile)}/{XML_NAME}", f"{task_place(profile)}.zip"),
        "geopackage": ("prescription.gpkg",),
        "geotiff": ("surfaces/rate.tif",),
    }
    return tuple(name for kind, names in files.items() if kind in profile.formats for name in names)


def write_pack(
    record: RunRecord,
    folder: Path,
    *,
    extras: Mapping[str, bytes],
    replace: bool,
) -> PackWritten:
    """Write a whole pack into ``folder``.

    Raises
    ------
    UsageProblem
        There is a pack already and ``replace`` is not set (exit 2).
    OutputProblem
        Writing failed, or a file reads back differently (exit 5); nothing is left behind.
    """

    def fill(beside: Path) -> Rows:
        _write_files(record, beside, extras)
        files = listed(beside)
        write_json(beside / "manifest.json", sealed(_manifest(record, files)))
        _read_back(beside)
        data = (beside / "manifest.json").read_bytes()
        return (*files, ("manifest.json", len(data), sha256_of(data)))

    return PackWritten(folder=folder, files=put_folder(folder, fill, replace=replace))


def _write_files(record: RunRecord, folder: Path, extras: Mapping[str, bytes]) -> None:
    from schorl.formats.note import note_bytes
    from schorl.formats.rasters import write_surfaces
    from schorl.formats.record_file import RECORD_FILE, record_bytes
    from schorl.formats.shapes import TASK_DECIMALS, profile_of, zone_shapes
    from schorl.formats.taskdata import task_files, task_place
    from schorl.formats.vectors import (
        geojson_bytes,
        write_geopackage,
        write_shapefile,
        zip_bytes,
    )

    profile, shapes = profile_of(record), zone_shapes(record)
    note = note_bytes(record)
    (folder / "READ_ME.txt").write_bytes(note)
    if "geojson" in profile.formats:
        (folder / "prescription.geojson").write_bytes(geojson_bytes(record, shapes))
    if "shapefile" in profile.formats:
        (folder / "shapefile").mkdir()
        write_shapefile(folder / "shapefile", record, shapes)
        (folder / "shapefile" / "READ_ME.txt").write_bytes(note)
    if "task data" in profile.formats:
        task_shapes = zone_shapes(record, decimals=TASK_DECIMALS)
        place = folder / task_place(profile)
        place.mkdir(parents=True)
        files = task_files(record, task_shapes, profile)
        for name, data in files.items():
            (place / name).write_bytes(data)
        zipped = {f"{place.name}/{name}": data for name, data in files.items()}
        place.with_suffix(".zip").write_bytes(zip_bytes(zipped))
    # Both stay whatever the controller takes: later seasons and checks read them.
    write_geopackage(folder / "prescription.gpkg", record, shapes)
    (folder / "surfaces").mkdir()
    write_surfaces(folder / "surfaces", record)
    for name, data in extras.items():
        (folder / name).write_bytes(data)
    (folder / RECORD_FILE).write_bytes(record_bytes(record))
    write_json(folder / "summary.json", summary(record))


def _manifest(record: RunRecord, files: Sequence[tuple[str, int, str]]) -> dict[str, Any]:
    settings = record.settings
    return {
        "schema": SCHEMA,
        "files": [{"path": path, "bytes": size, "sha256": sha} for path, size, sha in files],
        "inputs_sha256": dict(record.inputs_sha256),
        "versions": dict(record.versions),
        "seed": settings.seed,
        "made_on": settings.made_on.isoformat() if settings.made_on else None,
        "settings": _plain(settings),
    }


def _plain(value: Any) -> Any:
    """Settings as JSON; geometries by their checksum."""
    if hasattr(value, "wkb"):
        return f"geometry {sha256_of(value.wkb)[:16]}"
    if hasattr(value, "__dataclass_fields__"):
        return {name: _plain(getattr(value, name)) for name in value.__dataclass_fields__}
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [_plain(item) for item in value]
    if hasattr(value, "isoformat"):
        return value.isoformat()
    return value if isinstance(value, str | int | float | bool | None) else str(value)


def _read_back(folder: Path) -> None:
    seen = verify(folder)
    if not seen.whole:
        raise OutputProblem(
            [
                finding("OUT-READ-BACK", where=fault.file, what=f"{fault.place}: {fault.what}")
                for fault in seen.faults
            ]
        )

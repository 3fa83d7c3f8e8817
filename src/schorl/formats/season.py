"""A written pack, read as one season of a comparison."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import shapely

from schorl.errors import Refusal
from schorl.findings import Finding, finding
from schorl.formats.pack import PackContents, read_pack
from schorl.formats.record_file import RECORD_FILE
from schorl.formats.verify import verify
from schorl.formats.whole_folder import sha256_of
from schorl.geodesy import WGS84, transform_geometry, transform_points
from schorl.model.arrays import Floats
from schorl.model.change import SeasonPack, SeasonZone
from schorl.model.field import CellGrid, Field
from schorl.model.samples import PROPERTY_UNITS, Campaign, Measured, SampleSet
from schorl.model.summary import SCHEMA

#: Files of a pack that a comparison reads, which a controller's profile may leave out.
LAYERS_READ = ("prescription.gpkg", "surfaces/boron.tif")
#: Faults shown of a pack that is not whole; more of them say no more.
MOST_FAULTS = 6
DEFAULT_LAB_SD = 0.15


def read_season(folder: Path, *, crs: str | None = None) -> SeasonPack:
    """Read a pack that is whole as one season.

    Parameters
    ----------
    crs
        Metric system to bring everything into; the pack's own where None.

    Raises
    ------
    Refusal
        Not a pack, not whole, or written by a version that recorded less or more (exit 3).
    """
    contents = read_pack(folder)
    _check(folder, contents)
    try:
        return _season(folder, contents, crs)
    except KeyError as lacking:
        what = f"its record does not hold {lacking}"
        raise Refusal([finding("SEASON-RECORD", where=folder.name, what=what)]) from None


def _season(folder: Path, contents: PackContents, crs: str | None) -> SeasonPack:
    summary = contents.summary
    own_crs = summary["field"]["crs"]
    metres = crs or own_crs
    machine = contents.manifest["settings"]["machine"]
    grid, surfaces = _surfaces(folder)
    if metres != own_crs:
        grid, surfaces = _moved_cells(grid, surfaces, _boundary(folder, metres), own_crs, metres)
    samples, notes = _samples(folder, summary, metres)
    return SeasonPack(
        field_name=summary["field"]["name"],
        season=summary["season"],
        crs=metres,
        boundary=_boundary(folder, metres),
        grid=grid,
        samples=samples,
        surfaces=surfaces,
        zones=_zones(contents, metres),
        origin=summary["zoning"]["origin"],
        heading_deg=float(summary["zoning"]["heading_deg"] or 0.0),
        working_width_m=float(machine["working_width_m"]),
        crop=summary["crop"]["crop"],
        identity=sha256_of((folder / "manifest.json").read_bytes()),
        retired_numbers=tuple(summary["zoning"].get("retired_numbers", ())),
        findings=notes,
    )


def season_of(folder: Path) -> str:
    """The season that a pack is of.

    Raises
    ------
    Refusal
        Not a pack, or one whose profile left out the layers that a comparison reads (exit 3).
    """
    whole = all((folder / name).exists() for name in ("manifest.json", RECORD_FILE))
    lacking = [name for name in LAYERS_READ if not (folder / name).exists()]
    if whole and lacking:
        what = f"its profile left out {' and '.join(lacking)}"
        hint = f"`schorl adapt {folder.name} --profile every-format --out DIR` writes all of it"
        raise Refusal([finding("SEASON-RECORD", where=folder.name, what=what, hint=hint)])
    return str(read_pack(folder).summary["season"])


def field_of(folder: Path, *, crs: str | None = None) -> Field:
    """The field of a pack, for reading as-applied files against it."""
    summary = read_pack(folder).summary["field"]
    metres = crs or summary["crs"]
    return Field(
        name=summary["name"], boundary=_boundary(folder, metres), crs=metres,
        epsg=summary["epsg"], area_ha=float(summary["area_ha"]), source=folder.name,
    )  # fmt: skip


def _check(folder: Path, contents: PackContents) -> None:
    schema = contents.summary.get("schema")
    if not isinstance(schema, int) or schema > SCHEMA:
        what = f"its record has schema {schema}, this version knows up to {SCHEMA}"
        raise Refusal([finding("SEASON-SCHEMA", where=folder.name, what=what)])
    seen = verify(folder)
    if not seen.whole:
        raise Refusal(
            [
                finding(
                    "SEASON-PACK",
                    where=f"{folder.name}: {fault.file}",
                    what=f"{fault.place}: {fault.what}",
                )
                for fault in seen.faults[:MOST_FAULTS]
            ]
        )


def _layer(folder: Path, name: str) -> list[tuple[Mapping[str, Any], Any]]:
    """Attributes and geometries (degrees) of a layer of the pack; none where there is no layer."""
    import fiona

    package = folder / "prescription.gpkg"
    if name not in fiona.listlayers(package):
        return []
    with fiona.open(package, layer=name) as layer:
        return [(dict(row.properties), shapely.geometry.shape(row.geometry)) for row in layer]


def _boundary(folder: Path, metres: str) -> Any:
    (_, outline), *_ = _layer(folder, "boundary")
    parts = shapely.get_parts(outline)
    whole = parts[0] if len(parts) == 1 else outline
    moved = transform_geometry(whole, source=WGS84, target=metres)
    return moved if moved.is_valid else shapely.make_valid(moved, method="structure")


def _zones(contents: PackContents, metres: str) -> tuple[SeasonZone, ...]:
    zones = []
    for zone, row in zip(contents.zones, contents.summary["zones"], strict=True):
        area = transform_geometry(zone.geometry, source=contents.crs, target=metres)
        zones.append(
            SeasonZone(
                number=zone.number,
                kind=zone.kind,
                area=area if area.is_valid else shapely.make_valid(area, method="structure"),
                area_ha=zone.area_ha,
                boron_mg_kg=_number(row["boron_mean_mg_kg"]),
                boron_kg_ha=float(row["boron_kg_ha"]),
                product_rate=float(row["product_rate"]),
                product_unit=row["product_unit"],
                soil_mass=row.get("soil_mass_kg_ha_per_mg_kg"),
                limits_kg_ha={
                    name: float(value)
                    for name, value in row["limits_kg_ha"].items()
                    if value is not None
                },
            )
        )
    return tuple(zones)


def _number(value: float | None) -> float:
    return float("nan") if value is None else float(value)


def _samples(
    folder: Path, summary: Mapping[str, Any], metres: str
) -> tuple[SampleSet, tuple[Finding, ...]]:
    rows = _layer(folder, "samples")
    places = np.array([[point.x, point.y] for _, point in rows]).reshape(-1, 2)
    said, table = summary["samples"], [row for row, _ in rows]
    areas = {
        row["sample"]: transform_geometry(area, source=WGS84, target=metres)
        for row, area in _layer(folder, "sample_areas")
    }
    names = [str(row["sample"]) for row in table]
    kinds = [str(row["kind"]) for row in table]
    known = [kind != "zone" or name in areas for kind, name in zip(kinds, names, strict=True)]
    notes: tuple[Finding, ...] = ()
    if not all(known):
        what = f"{known.count(False)} composites without their areas"
        notes = (finding("SEASON-AREAS", where=folder.name, what=what),)
    samples = SampleSet(
        ids=tuple(name.removeprefix("'") for name in names),
        east_north_m=transform_points(places, source=WGS84, target=metres),
        properties={
            name: _measured(table, name) for name in said["properties"] if name in PROPERTY_UNITS
        },
        kind=tuple(kind if whole else "point" for kind, whole in zip(kinds, known, strict=True)),
        cores=np.array([int(row["cores"]) for row in table], dtype=np.intp),
        campaign=_campaign(said),
        areas=tuple(areas.get(name) for name in names),
        constants={key: float(value) for key, value in said["constants"].items()},
        source=folder.name,
    )
    return samples, notes


def _measured(table: list[Mapping[str, Any]], name: str) -> Measured:
    return Measured(
        values=np.array([_number(row.get(name)) for row in table]),
        below_limit=np.array([bool(row.get(f"{name}_below_limit")) for row in table]),
    )


def _campaign(said: Mapping[str, Any]) -> Campaign:
    on = said["sampled_on"]
    return Campaign(
        method=said["method"],
        depth_cm=float(said["depth_cm"]),
        sampled_on=date.fromisoformat(on) if on else None,
        laboratory=said["laboratory"] or "",
        per_volume=bool(said["per_volume"]),
        lab_relative_sd=float(said.get("lab_relative_sd", DEFAULT_LAB_SD)),
    )


def _surfaces(folder: Path) -> tuple[CellGrid, dict[str, Floats]]:
    """Cells of the pack's rasters and the estimates on them, whole to the file's precision."""
    import rasterio

    surfaces: dict[str, Floats] = {}
    grid: CellGrid | None = None
    for name in ("boron", "organic_matter", "clay"):
        path = folder / "surfaces" / f"{name}.tif"
        if not path.exists():
            continue
        with rasterio.open(path) as raster:
            values, inside = raster.read(1).astype(np.float64), raster.read_masks(1) > 0
            if grid is None:
                grid = CellGrid(
                    west_m=raster.transform.c, north_m=raster.transform.f,
                    cell_m=raster.transform.a, inside=inside,
                )  # fmt: skip
            surfaces[name] = values[grid.inside]
    if grid is None:
        what = "no surfaces"
        raise Refusal([finding("SEASON-PACK", where=folder.name, what=what)])
    return grid, surfaces


def _moved_cells(
    grid: CellGrid, surfaces: dict[str, Floats], boundary: Any, source: str, target: str
) -> tuple[CellGrid, dict[str, Floats]]:
    """The same surfaces on cells of another metric system: each takes the nearest value."""
    from scipy.spatial import cKDTree

    from schorl.model.field import lay_grid

    moved = transform_points(grid.centres_m, source=source, target=target)
    new = lay_grid(boundary, cell_m=grid.cell_m)
    _, nearest = cKDTree(moved).query(new.centres_m)
    return new, {name: values[nearest] for name, values in surfaces.items()}

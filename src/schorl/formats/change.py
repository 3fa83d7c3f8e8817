"""Files of a comparison: change.tif, zones_moved.gpkg, sites, check strips, note, summary."""

from __future__ import annotations

import csv
import io
import json
import textwrap
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import shapely

from schorl.agronomy.cautions import cautions
from schorl.formats.rasters import NODATA
from schorl.formats.sealing import sealed, write_json
from schorl.formats.vectors import quoted, write_layers
from schorl.formats.whole_folder import Rows, listed, put_folder, sha256_of
from schorl.geodesy import WGS84, transform_geometry, transform_points
from schorl.model.change import SeasonChange
from schorl.model.change_summary import change_summary

DECIMALS = 7
LINE = 90  # characters of a line of the note


def write_change(
    change: SeasonChange,
    folder: Path,
    *,
    extras: Mapping[str, bytes],
    replace: bool,
    versions: Mapping[str, str],
    result: Mapping[str, Any] | None = None,
) -> Rows:
    """Write a comparison's folder, whole or not at all; path, bytes and sha256 of each file.

    Parameters
    ----------
    extras
        Further files by name, such as the page.
    result
        What ``summary.json`` holds; the comparison's own summary where None.

    Raises
    ------
    UsageProblem
        There is a folder already and ``replace`` is not set (exit 2).
    OutputProblem
        Writing failed (exit 5); nothing is left behind.
    """

    def fill(beside: Path) -> Rows:
        if change.change_map is not None:
            write_change_raster(beside / "change.tif", change)
        write_moved(beside / "zones_moved.gpkg", change)
        (beside / "READ_ME.txt").write_bytes(change_note(change))
        (beside / "revisit_sites.csv").write_bytes(revisit_csv(change))
        (beside / "revisit_sites.geojson").write_bytes(revisit_geojson(change))
        (beside / "check_strips.geojson").write_bytes(strips_geojson(change))
        for name, data in extras.items():
            (beside / name).write_bytes(data)
        write_json(beside / "summary.json", dict(result or change_summary(change)))
        files = listed(beside)
        manifest = {
            "files": [{"path": path, "bytes": size, "sha256": sha} for path, size, sha in files],
            "packs": [change.before.identity, change.after.identity],
            "versions": dict(versions),
        }
        write_json(beside / "manifest.json", sealed(manifest))
        data = (beside / "manifest.json").read_bytes()
        return (*files, ("manifest.json", len(data), sha256_of(data)))

    return put_folder(folder, fill, replace=replace)


def write_change_raster(path: Path, change: SeasonChange) -> None:
    """Change, its standard deviation and adjusted p as bands of a cloud-optimised GeoTIFF."""
    import rasterio
    from rasterio.transform import from_origin

    mapped = change.change_map
    assert mapped is not None
    grid = mapped.grid
    bands = (
        (mapped.change_mg_kg, "change of available boron", "mg/kg"),
        (mapped.sd_mg_kg, "standard deviation of the change", "mg/kg"),
        (mapped.p_adjusted, "adjusted p (false discovery rate)", ""),
    )
    with rasterio.open(
        path, "w", driver="COG", height=grid.rows, width=grid.cols, count=len(bands),
        dtype="float32", crs=change.before.crs, nodata=NODATA, compress="deflate", blocksize=128,
        transform=from_origin(grid.west_m, grid.north_m, grid.cell_m, grid.cell_m),
        overview_resampling="nearest",
    ) as target:  # fmt: skip
        for place, (values, words, unit) in enumerate(bands, start=1):
            target.write(grid.to_raster(values, fill=NODATA).astype(np.float32), place)
            target.set_band_description(place, words)
            target.update_tags(place, unit=unit)


def write_moved(path: Path, change: SeasonChange) -> None:
    """Layers before, after and moved of one GeoPackage in WGS 84."""
    import geopandas

    def frame(rows: list[dict[str, object]], areas: list[Any], columns: list[str]) -> Any:
        moved = [
            transform_geometry(
                shapely.multipolygons(shapely.get_parts(area)), source=change.before.crs,
                target=WGS84,
            )
            for area in areas
        ]  # fmt: skip
        if rows:
            return geopandas.GeoDataFrame(rows, geometry=moved, crs=WGS84)
        return geopandas.GeoDataFrame(columns=[*columns, "geometry"], geometry=[], crs=WGS84)

    layers = {
        name: frame(
            [
                {"zone": zone.number, "kind": zone.kind, "boron_kg_ha": zone.boron_kg_ha,
                 "season": pack.season}
                for zone in pack.zones
            ],
            [zone.area for zone in pack.zones], ["zone", "kind", "boron_kg_ha", "season"],
        )
        for name, pack in (("before", change.before), ("after", change.after))
    }  # fmt: skip
    moved = change.moved.moved
    layers["moved"] = frame(
        [
            {"zone_before": one.before, "zone_after": one.after, "area_ha": one.area_ha}
            for one in moved
        ],
        [one.area for one in moved], ["zone_before", "zone_after", "area_ha"],
    )  # fmt: skip
    write_layers(path, layers)


def change_note(change: SeasonChange) -> bytes:
    """What a person needs to know who has only the files: what they hold, units, cautions."""
    before, after = change.before.season, change.after.season
    raster = (
        "bands: change of available boron (mg/kg), its standard deviation (mg/kg), and p adjusted "
        "for the number of cells; where that is over 0.10 the change cannot be told from noise"
        if change.change_map is not None
        else f"not written: {change.no_map}"
    )
    files = (
        ("compare.html", "the whole comparison; needs no network"),
        ("change.tif", raster),
        ("zones_moved.gpkg", f"layers before ({before}), after ({after}) and moved: ground that "
                             "lies in another zone; each pack's own zone numbers"),
        ("check_strips.geojson", "strips to leave untreated or to give double; boron_kg_ha is kg of "
                                 "boron per hectare, one a zone: a proposal, not a prescription"),
        ("revisit_sites.csv, .geojson", "sites to sample again; longitude and latitude (WGS 84)"),
        ("summary.json", "every figure, unrounded"),
    )  # fmt: skip
    lines = [f"{change.after.field_name}: what changed from {before} to {after}", ""]
    for name, said in files:
        lines += textwrap.wrap(f"{name}: {said}", LINE, subsequent_indent="  ")
    lines += ["", *textwrap.wrap(change.text, LINE), ""]
    for one in cautions():
        lines += textwrap.wrap(one, LINE, subsequent_indent="  ")
    return ("\n".join(lines) + "\n").encode("utf-8")


def revisit_csv(change: SeasonChange) -> bytes:
    """Sites to sample again, one a row, with longitude and latitude (WGS 84)."""
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\r\n")
    writer.writerow(["site", "longitude", "latitude", "zone", "why"])
    for site, (lon, lat) in zip(change.revisit, _degrees(change), strict=True):
        row = [quoted(site.name), f"{lon:.{DECIMALS}f}", f"{lat:.{DECIMALS}f}", site.zone]
        writer.writerow([*row, site.why])
    return text.getvalue().encode("utf-8")


def revisit_geojson(change: SeasonChange) -> bytes:
    """Sites to sample again as RFC 7946 GeoJSON."""
    features = [
        _feature(
            {"type": "Point", "coordinates": [round(lon, DECIMALS), round(lat, DECIMALS)]},
            site=site.name, zone=site.zone, why=site.why,
        )
        for site, (lon, lat) in zip(change.revisit, _degrees(change), strict=True)
    ]  # fmt: skip
    return _collection(features)


def strips_geojson(change: SeasonChange) -> bytes:
    """Check strips as RFC 7946 GeoJSON, with the boron each zone's part of them gets."""
    features = []
    for strip in change.strips:
        area = transform_geometry(strip.area, source=change.before.crs, target=WGS84)
        ring = shapely.get_coordinates(shapely.orient_polygons(area)).round(DECIMALS).tolist()
        features.append(
            _feature(
                {"type": "Polygon", "coordinates": [ring]}, kind=strip.kind,
                zones=list(strip.zones), boron_kg_ha=list(strip.rates_kg_ha), what=strip.said,
            )
        )  # fmt: skip
    return _collection(features)


def _degrees(change: SeasonChange) -> np.ndarray:
    places = np.array([[one.east_m, one.north_m] for one in change.revisit]).reshape(-1, 2)
    return transform_points(places, source=change.before.crs, target=WGS84)


def _feature(geometry: dict[str, Any], **properties: object) -> dict[str, Any]:
    return {"type": "Feature", "geometry": geometry, "properties": properties}


def _collection(features: list[dict[str, Any]]) -> bytes:
    document = {"type": "FeatureCollection", "features": features}
    return (json.dumps(document, ensure_ascii=False, allow_nan=False) + "\n").encode("utf-8")

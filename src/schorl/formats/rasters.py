"""Surfaces as cloud-optimised GeoTIFF in the field's metres."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import shapely

from schorl.model.arrays import Floats
from schorl.model.field import CellGrid
from schorl.model.record import RunRecord

NODATA = -9999.0
NO_ZONE = 255


def write_surfaces(folder: Path, record: RunRecord) -> None:
    """boron, boron_sd, organic_matter, clay, zones and rate on the cells inside the field."""
    surfaces, grid = record.surfaces, record.grid
    boron = surfaces["boron"]
    layers = {
        "boron": (boron.estimate, boron.unit, "available boron"),
        "boron_sd": (boron.map_sd_in_unit, boron.unit, "standard deviation of the boron surface"),
    }
    for name in ("organic_matter", "clay"):
        if name in surfaces:
            layers[name] = (surfaces[name].estimate, "%", name.replace("_", " "))
    for name, (values, unit, words) in layers.items():
        _write(folder / f"{name}.tif", grid, record, values, unit=unit, words=words)
    places = cells_of_zones(record)
    numbers = np.array([zone.number for zone in record.prescription.zone_map.zones])
    rates = np.array([rate.product_rate for rate in record.prescription.rates])
    _write(folder / "zones.tif", grid, record, numbers[places], unit="", words="zone number")
    unit = f"{record.prescription.unit}/ha"
    _write(folder / "rate.tif", grid, record, rates[places], unit=unit, words="product rate")


def cells_of_zones(record: RunRecord) -> np.ndarray:
    """Place in ``zones`` of each cell, drawn from the final polygons, ``(n_cells,)``."""
    zones = record.prescription.zone_map.zones
    points = record.grid.centres_m
    places = np.array(record.prescription.zone_map.labels)
    for place, zone in enumerate(zones):
        shapely.prepare(zone.geometry)
        places[shapely.contains_xy(zone.geometry, points[:, 0], points[:, 1])] = place
    return places


def _write(
    path: Path, grid: CellGrid, record: RunRecord, values: Floats, *, unit: str, words: str
) -> None:
    import rasterio
    from rasterio.transform import from_origin

    whole = np.issubdtype(values.dtype, np.integer)
    nodata = float(NO_ZONE) if whole else NODATA
    kind = "uint8" if whole else "float32"
    raster = grid.to_raster(values.astype(np.float64), fill=nodata).astype(kind)
    # Overviews repeat cells instead of mixing them: a mixed rate would be one nobody prescribed.
    resampling = "mode" if whole else "nearest"
    with rasterio.open(
        path, "w", driver="COG", height=grid.rows, width=grid.cols, count=1, dtype=kind,
        crs=record.field.crs, transform=from_origin(grid.west_m, grid.north_m, grid.cell_m, grid.cell_m),
        nodata=nodata, compress="deflate", blocksize=128, overview_resampling=resampling,
    ) as target:  # fmt: skip
        target.write(raster, 1)
        target.set_band_description(1, words)
        target.update_tags(1, unit=unit)

"""The grid of ISO 11783-10 task data: rates by cells of longitude and latitude.

The file's cells run from the south-west corner, row by row to the north. They are laid afresh over
the field in degrees: a raster in metres, relabelled, would lie up to tens of metres off. A cell
takes the zone under its centre; one that touches a keep-off area or hot spot at all is shut off.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import shapely

from schorl.formats.shapes import TASK_DECIMALS, ZoneShape, boundary_degrees
from schorl.geodesy import area_ha
from schorl.model.arrays import Counts, lock
from schorl.model.record import RunRecord
from schorl.model.zones import ZoneKind

GRID_NAME = "GRD00001"
SIZE_DECIMALS = 12
METRES_PER_DEGREE = 111_195.0
OUTSIDE = -1


@dataclass(frozen=True, eq=False, kw_only=True)
class TaskGrid:
    """Cells in degrees; ``places`` ``(rows, cols)`` is the position of each cell's zone.

    Row 0 is the south; ``OUTSIDE`` marks cells that no zone holds.
    """

    south: float
    west: float
    cell_north: float
    cell_east: float
    places: Counts

    def __post_init__(self) -> None:
        lock(self, places=self.places)

    @property
    def cell_ha(self) -> np.ndarray:
        """Hectares of a cell of each row, ``(rows, 1)``: cells narrow towards the poles."""
        rows = self.places.shape[0]
        sides = [self.south + place * self.cell_north for place in (0, rows - 1)]
        ends = [
            area_ha(
                shapely.box(
                    self.west, side, self.west + self.cell_east, side + self.cell_north
                ),
                crs="EPSG:4326",
            )
            for side in sides
        ]  # fmt: skip
        return np.linspace(ends[0], ends[1], rows)[:, None]


def lay_task_grid(record: RunRecord, shapes: Sequence[ZoneShape]) -> TaskGrid:
    """A grid over the field, its cells about as large as the run's own."""
    west, south, east, north = boundary_degrees(record).bounds
    south, west = (round(one - 1e-9, TASK_DECIMALS) for one in (south, west))
    metres = METRES_PER_DEGREE * np.array([1.0, np.cos(np.radians((south + north) / 2))])
    size = np.array([north - south, east - west])
    count = np.maximum(np.ceil(size * metres / record.grid.cell_m), 1).astype(int)
    cell = np.ceil(size / count * 10**SIZE_DECIMALS) / 10**SIZE_DECIMALS
    up, right = (np.arange(count[axis]) for axis in (0, 1))
    centre_east, centre_north = np.meshgrid(
        west + (right + 0.5) * cell[1], south + (up + 0.5) * cell[0]
    )
    places = np.full(centre_east.shape, OUTSIDE, dtype=np.intp)
    for place, shape in enumerate(shapes):
        shapely.prepare(shape.geometry)
        places[shapely.contains_xy(shape.geometry, centre_east, centre_north)] = place
    half = 0.5 * cell
    boxes = shapely.box(
        centre_east - half[1], centre_north - half[0], centre_east + half[1], centre_north + half[0]
    )
    for place, shape in enumerate(shapes):
        if shape.zone.kind is not ZoneKind.ZONE:
            shut = shapely.intersects(boxes, shape.geometry) & (places != OUTSIDE)
            places[shut & ~shapely.touches(boxes, shape.geometry)] = place
    return TaskGrid(
        south=south, west=west, cell_north=float(cell[0]), cell_east=float(cell[1]), places=places
    )


def grid_line(grid: TaskGrid, *, kind: int, data: bytes, zone_code: int | None = None) -> str:
    """The GRD element of a grid of type 1 or 2."""
    rows, cols = grid.places.shape
    code = "" if zone_code is None else f' J="{zone_code}"'
    return (
        f'<GRD A="{grid.south:.{TASK_DECIMALS}f}" B="{grid.west:.{TASK_DECIMALS}f}" '
        f'C="{grid.cell_north:.{SIZE_DECIMALS}f}" D="{grid.cell_east:.{SIZE_DECIMALS}f}" '
        f'E="{cols}" F="{rows}" G="{GRID_NAME}" H="{len(data)}" I="{kind}"{code}/>'
    )


def code_bytes(grid: TaskGrid, *, off_code: int) -> bytes:
    """Type 1: one byte a cell, the code of its treatment zone (zone at place i has code i + 1)."""
    codes = np.where(grid.places == OUTSIDE, off_code, grid.places + 1)
    return codes.astype(np.uint8).tobytes()


def rate_bytes(grid: TaskGrid, counts: Sequence[int]) -> bytes:
    """Type 2: one signed 32-bit little-endian rate a cell, 0 outside the field."""
    values = np.array([*counts, 0], dtype="<i4")  # OUTSIDE is the last
    return values[grid.places].tobytes()


def grid_product(grid: TaskGrid, rates: Sequence[float]) -> float:
    """Product that the cells add up to, in the unit of the rates a hectare."""
    values = np.array([*rates, 0.0])[grid.places]
    return float((values * grid.cell_ha).sum())

"""The field and the cell grid laid over it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TypeAlias

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, Polygon

from schorl.model.arrays import Flags, Floats, locked

Area: TypeAlias = Polygon | MultiPolygon


@dataclass(frozen=True, slots=True, kw_only=True)
class Field:
    """A field's boundary in metres.

    ``boundary`` is valid, two-dimensional, in the metric system ``crs`` (an authority code or a
    PROJ string; ``epsg`` is None for a local one). ``area_ha`` is ellipsoidal.
    """

    name: str
    boundary: Area
    crs: str
    epsg: int | None
    area_ha: float
    source: str = ""


@dataclass(frozen=True, eq=False, kw_only=True)
class CellGrid:
    """Square cells over a field; row 0 is the north, only cells inside the field count.

    ``west_m`` and ``north_m`` are the outer edges and whole multiples of ``cell_m``, so that two
    seasons share their cells. ``inside`` has shape ``(rows, cols)``: cells whose centre lies in
    the field. Arrays "per cell" have shape ``(n_cells,)`` in the row-major order of ``inside``.
    """

    west_m: float
    north_m: float
    cell_m: float
    inside: Flags

    def __post_init__(self) -> None:
        object.__setattr__(self, "inside", locked(self.inside, np.bool_))

    @property
    def rows(self) -> int:
        """Number of rows."""
        return int(self.inside.shape[0])

    @property
    def cols(self) -> int:
        """Number of columns."""
        return int(self.inside.shape[1])

    @cached_property
    def n_cells(self) -> int:
        """Number of cells inside the field."""
        return int(self.inside.sum())

    @cached_property
    def centres_m(self) -> Floats:
        """East and north of the centres of the cells inside, shape ``(n_cells, 2)``."""
        row, col = np.nonzero(self.inside)
        east = self.west_m + (col + 0.5) * self.cell_m
        north = self.north_m - (row + 0.5) * self.cell_m
        return locked(np.column_stack([east, north]))  # type: ignore[no-any-return]

    def to_raster(self, per_cell: Floats, *, fill: float = np.nan) -> Floats:
        """Spread per-cell values ``(n_cells,)`` over ``(rows, cols)``; ``fill`` off the field."""
        raster = np.full(self.inside.shape, fill, dtype=np.float64)
        raster[self.inside] = per_cell
        return raster

    def cell_of(self, east_north_m: Floats) -> np.ndarray:
        """Per-cell index of the cell each of ``(n, 2)`` points falls in; -1 where none does."""
        col = np.floor((east_north_m[:, 0] - self.west_m) / self.cell_m).astype(np.intp)
        row = np.floor((self.north_m - east_north_m[:, 1]) / self.cell_m).astype(np.intp)
        index = np.full(self.inside.shape, -1, dtype=np.intp)
        index[self.inside] = np.arange(self.n_cells)
        valid = (row >= 0) & (row < self.rows) & (col >= 0) & (col < self.cols)
        cells = np.full(len(east_north_m), -1, dtype=np.intp)
        cells[valid] = index[row[valid], col[valid]]
        return cells

    def same_cells(self, other: CellGrid) -> bool:
        """Whether two grids have exactly the same cells."""
        return (
            (self.west_m, self.north_m, self.cell_m) == (other.west_m, other.north_m, other.cell_m)
            and self.inside.shape == other.inside.shape
            and bool((self.inside == other.inside).all())
        )


def lay_grid(boundary: Area, *, cell_m: float) -> CellGrid:
    """Lay north-up cells of ``cell_m`` metres over a boundary, anchored to whole multiples.

    A cell is inside where its centre is. A field so small or narrow that no centre falls inside
    keeps the cells that its boundary touches, so that no field is without cells.
    """
    west, south, east, north = boundary.bounds
    first_col, last_col = int(np.floor(west / cell_m)), int(np.ceil(east / cell_m))
    first_row, last_row = int(np.floor(south / cell_m)), int(np.ceil(north / cell_m))
    cols, rows = max(last_col - first_col, 1), max(last_row - first_row, 1)
    east_m = (first_col + np.arange(cols) + 0.5) * cell_m
    north_m = (last_row - np.arange(rows) - 0.5) * cell_m
    east_grid, north_grid = np.meshgrid(east_m, north_m)
    shapely.prepare(boundary)
    inside = shapely.contains_xy(boundary, east_grid.ravel(), north_grid.ravel())
    if not inside.any():
        half = cell_m / 2
        boxes = shapely.box(
            east_grid.ravel() - half,
            north_grid.ravel() - half,
            east_grid.ravel() + half,
            north_grid.ravel() + half,
        )
        inside = shapely.intersects(boundary, boxes)
    return CellGrid(
        west_m=first_col * cell_m,
        north_m=last_row * cell_m,
        cell_m=cell_m,
        inside=np.asarray(inside).reshape(rows, cols),
    )

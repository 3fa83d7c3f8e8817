"""The direction of travel, and a grid of cells with its axis along it.

Columns run along the direction of travel, rows across it, so that the ground a machine covers
while it changes its rate is an axis-parallel rectangle.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import shapely

from schorl.model.arrays import Counts, Flags, Floats
from schorl.model.field import Area, CellGrid
from schorl.model.settings import Machine

#: Sides whose directions differ by less than this (degrees) count as one.
SAME_DIRECTION_DEG = 5.0
#: Bends smaller than this (m) do not end a side.
BEND_M = 5.0
MIN_RUN_FACTOR = 3.0


def longest_side_deg(boundary: Area) -> float:
    """Direction of a boundary's longest side, degrees from north, 0 up to (not with) 180.

    Bends under 5 m are ignored; the lengths of all sides within 5 degrees of a side are added to
    its own, so that a long edge drawn in pieces counts as long.
    """
    smooth = shapely.simplify(boundary, BEND_M)
    parts = shapely.get_parts(smooth if not smooth.is_empty else boundary)
    steps = np.concatenate(
        [
            np.diff(shapely.get_coordinates(shapely.get_exterior_ring(part)), axis=0)
            for part in parts
        ]
    )
    length = np.hypot(steps[:, 0], steps[:, 1])
    direction = np.degrees(np.arctan2(steps[:, 0], steps[:, 1])) % 180.0
    apart = np.abs(direction[:, None] - direction[None, :])
    near = np.minimum(apart, 180.0 - apart) < SAME_DIRECTION_DEG
    support = (near * length[None, :]).sum(axis=1)
    best = int(np.argmax(support + 1e-6 * length))
    # The mean of the sides that agree, as doubled angles since 0 and 180 are one direction.
    angle = np.radians(2.0 * direction[near[best]])
    weight = length[near[best]]
    mean = 0.5 * np.degrees(
        np.arctan2((weight * np.sin(angle)).sum(), (weight * np.cos(angle)).sum())
    )
    return float(round(mean % 180.0, 2) % 180.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Ground:
    """What a machine needs: width across and run along travel (m), least area of a zone (m²)."""

    width_m: float
    run_m: float
    least_m2: float


def ground_of(machine: Machine, *, least_area_ha: float) -> Ground:
    """Ground that one rate must hold for.

    The width is that of one section where sections switch, else the working width; the run is three
    times the way driven while the rate changes (a spreader needs 3-5 s); the least area the larger
    of the job's figure and two such rectangles.
    """
    width = machine.working_width_m / max(machine.sections, 1)
    run = MIN_RUN_FACTOR * machine.speed_km_h / 3.6 * machine.rate_change_s
    return Ground(
        width_m=width,
        run_m=run,
        least_m2=max(least_area_ha * 10_000.0, 2.0 * width * run),
    )


@dataclass(frozen=True, eq=False, kw_only=True)
class TravelGrid:
    """Cells along the direction of travel.

    ``source`` ``(rows, cols)`` is the per-cell index of the field's cell under each centre, -1 off
    the field. ``across0_m`` and ``along0_m`` are the outer edges of row 0 and column 0.
    """

    heading_deg: float
    cell_m: float
    across0_m: float
    along0_m: float
    source: Counts

    @property
    def inside(self) -> Flags:
        """Cells whose centre lies on a cell of the field, ``(rows, cols)``."""
        return np.asarray(self.source >= 0)

    @cached_property
    def axes(self) -> Floats:
        """Unit vectors (rows): across and along, as east and north."""
        return axes_of(self.heading_deg)

    def to_field(self, across_along_m: Floats) -> Floats:
        """East and north of ``(n, 2)`` points given across and along."""
        return np.asarray(across_along_m @ self.axes)

    def cell_under(self, east_north_m: Floats) -> tuple[Counts, Counts]:
        """Row and column under ``(n, 2)`` points; they may lie beyond the grid."""
        turned = east_north_m @ self.axes.T
        row = np.floor((turned[:, 0] - self.across0_m) / self.cell_m).astype(np.intp)
        col = np.floor((turned[:, 1] - self.along0_m) / self.cell_m).astype(np.intp)
        return row, col

    def flags(self, per_cell: Flags) -> Flags:
        """Per-cell flags ``(n_cells,)`` of the field on these cells; False off the field."""
        return np.asarray(self.inside & per_cell[np.maximum(self.source, 0)])


def axes_of(heading_deg: float) -> Floats:
    """Unit vectors across and along a heading (degrees from north), as rows of east and north."""
    angle = np.radians(heading_deg)
    # Exact zeros for the four main directions, so that those grids share the field's own cells.
    sine, cosine = np.round([np.sin(angle), np.cos(angle)], 15)
    return np.array([[cosine, -sine], [sine, cosine]])


def lay_travel_grid(grid: CellGrid, heading_deg: float, *, margin_m: float) -> TravelGrid:
    """Lay cells along a heading over a field, ``margin_m`` beyond it on every side."""
    axes, cell = axes_of(heading_deg), grid.cell_m
    row = np.nonzero(grid.inside)[0]
    # Only the outermost cells of each row of the field can be outermost in the turned grid.
    edge = np.concatenate([[True], np.diff(row) != 0]) | np.concatenate([np.diff(row) != 0, [True]])
    turned = grid.centres_m[edge] @ axes.T
    low = np.floor((turned.min(axis=0) - margin_m - cell) / cell) * cell
    high = turned.max(axis=0) + margin_m + cell
    rows, cols = np.ceil((high - low) / cell).astype(int)
    across = low[0] + (np.arange(rows) + 0.5) * cell
    along = low[1] + (np.arange(cols) + 0.5) * cell
    index = np.full((grid.rows + 2, grid.cols + 2), -1, dtype=np.intp)
    index[1:-1, 1:-1][grid.inside] = np.arange(grid.n_cells)
    east = across[:, None] * axes[0, 0] + along[None, :] * axes[1, 0]
    north = across[:, None] * axes[0, 1] + along[None, :] * axes[1, 1]
    field_col = np.clip(np.floor((east - grid.west_m) / cell), -1, grid.cols).astype(np.intp)
    field_row = np.clip(np.floor((grid.north_m - north) / cell), -1, grid.rows).astype(np.intp)
    return TravelGrid(
        heading_deg=heading_deg,
        cell_m=cell,
        across0_m=float(low[0]),
        along0_m=float(low[1]),
        source=index[field_row + 1, field_col + 1],
    )

"""Areas cut out of the field before anything else: keep-off areas and hot spots.

Both get rate 0. Keep-off outlines are exact. A hot spot becomes a patch that a machine can leave
out: every part of it lies in a rectangle of working width by run length, and it holds every hot
cell.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import shapely
from scipy import ndimage

from schorl.model.arrays import Flags
from schorl.model.field import Area, CellGrid
from schorl.zoning.cover import HOT, KEEP_OFF, Fixed
from schorl.zoning.outlines import areas_of
from schorl.zoning.travel import Ground, TravelGrid
from schorl.zoning.workable import EIGHT, Kernel, kernel_of, opened

#: Cells added round a patch, so that a hot cell's centre is not on its edge.
RIM_CELLS = 1


def keep_off_area(boundary: Area, areas: Sequence[Area], *, strip_m: float = 0.0) -> Fixed | None:
    """Keep-off areas and a strip inside the boundary as one area; None where none is near.

    Ground inside the ring of a hole is the field's outside and gets its strip too.
    """
    near: list[shapely.Geometry] = [area for area in areas if area.intersects(boundary)]
    if strip_m > 0:
        near.append(shapely.difference(boundary.buffer(1.0), boundary.buffer(-strip_m)))
    if not near:
        return None
    whole = shapely.union_all(near)
    if shapely.intersection(whole, boundary).area <= 0:
        return None
    return Fixed(label=KEEP_OFF, area=whole)


def hot_area(
    hot: Flags, grid: CellGrid, travel: TravelGrid, ground: Ground, *, boundary: Area
) -> Fixed | None:
    """Patches of workable shape that hold all hot cells ``(n_cells,)``; None without any."""
    if not hot.any():
        return None
    mask = _hot_on(travel, hot, grid)
    kernel = kernel_of(ground, travel.cell_m)
    patch = workable_patch(mask, kernel)
    patch = ndimage.binary_dilation(patch, structure=EIGHT, iterations=RIM_CELLS)
    # A rim of other cells all round lets the outline close.
    framed = np.pad(patch.astype(np.intp), 2)
    shifted = TravelGrid(
        heading_deg=travel.heading_deg,
        cell_m=travel.cell_m,
        across0_m=travel.across0_m - 2 * travel.cell_m,
        along0_m=travel.along0_m - 2 * travel.cell_m,
        source=np.pad(travel.source, 2, constant_values=-1),
    )
    area = shapely.make_valid(areas_of(framed, shifted, 1))
    plain = shapely.simplify(area, 0.5 * travel.cell_m)
    centres = grid.centres_m[hot]
    chosen = plain if shapely.contains_xy(plain, centres).all() else area
    if not shapely.contains_xy(chosen, centres).all():
        half = grid.cell_m / 2.0
        low, high = (centres - half).T, (centres + half).T
        boxes: Any = shapely.box(low[0], low[1], high[0], high[1])
        chosen = shapely.union_all([chosen, *boxes])
    if shapely.intersection(chosen, boundary).area <= 0:
        return None
    return Fixed(label=HOT, area=chosen)


def _hot_on(travel: TravelGrid, hot: Flags, grid: CellGrid) -> Flags:
    """Hot cells on the travel grid; a cell that resampling would miss is marked where it lies."""
    mask = travel.flags(hot).copy()
    row, col = travel.cell_under(grid.centres_m[hot])
    mask[row, col] = True
    return mask


def workable_patch(mask: Flags, kernel: Kernel) -> Flags:
    """The smaller of two covers of each clump: its box widened to the rectangle, or its spread.

    What already holds rectangles stays as it is.
    """
    size = (kernel.across, kernel.along)
    room = np.pad(mask, [(side, side) for side in size])
    core = opened(np.where(room, 0, -1).astype(np.int16), kernel)
    clumps, count = ndimage.label(room & ~core, structure=EIGHT)
    patch = core.copy()
    for place, box in enumerate(ndimage.find_objects(clumps), start=1):
        wide = tuple(
            _widened(side, least, limit)
            for side, least, limit in zip(box, size, room.shape, strict=True)
        )
        own = clumps == place
        spread = own
        for axis, least in enumerate(size):
            grown = ndimage.maximum_filter1d(spread.view(np.uint8), least | 1, axis=axis)
            spread = grown.astype(bool)
        boxed = np.zeros_like(own)
        boxed[wide] = True
        patch |= boxed if boxed.sum() <= spread.sum() else spread
    inner = tuple(slice(side, -side) for side in size)
    return np.asarray(patch[inner] if count else mask | core[inner])


def _widened(side: slice, least: int, limit: int) -> slice:
    """A range of at least ``least`` cells about the same middle, inside 0 to ``limit``."""
    missing = max(least - (side.stop - side.start), 0)
    start = min(max(side.start - missing // 2, 0), max(limit - least, 0))
    return slice(start, min(max(side.stop + missing - missing // 2, start + least), limit))

"""Which zone each cell of the field lies in, and how much of it a machine cannot follow."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import shapely

from schorl.model.arrays import Counts, Flags
from schorl.model.field import Area, CellGrid
from schorl.zoning.travel import Ground, TravelGrid
from schorl.zoning.workable import domain_of, filled, kernel_of, opened


def cells_in(areas: Sequence[Area], grid: CellGrid) -> Counts:
    """Position of the area that holds each cell's centre, shape ``(n_cells,)``.

    A centre outside all of them (cells of a field too narrow for a centre) takes the nearest.
    """
    from affine import Affine
    from rasterio.features import rasterize

    burned = rasterize(
        [(area, place) for place, area in enumerate(areas)],
        out_shape=grid.inside.shape,
        fill=-1,
        transform=Affine(grid.cell_m, 0.0, grid.west_m, 0.0, -grid.cell_m, grid.north_m),
        dtype="int32",
    )
    labels: Counts = burned[grid.inside].astype(np.intp)
    lost = labels < 0
    if lost.any():
        points = shapely.points(grid.centres_m[lost])
        labels[lost] = shapely.STRtree(list(areas)).nearest(points)
    return labels


def narrow_share(labels: Counts, use: Flags, travel: TravelGrid, ground: Ground) -> float:
    """Share of the used cells that lie in no rectangle of their own zone, 0 to 1.

    ``labels`` and ``use`` have shape ``(n_cells,)``. Ground outside the field next to a zone counts
    as its own up to half a rectangle, since a pass may reach over the edge.
    """
    inside = travel.flags(use)
    if not inside.any():
        return 0.0
    raster = np.where(inside, labels[np.maximum(travel.source, 0)], -1).astype(np.int16)
    kernel = kernel_of(ground, travel.cell_m)
    fits = opened(filled(raster, domain_of(inside, kernel)), kernel)
    return 1.0 - float((fits & inside).sum() / inside.sum())

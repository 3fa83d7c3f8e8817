"""Which zone each cell of the field lies in, and how much of it a machine cannot follow."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import shapely
from affine import Affine

from schorl.model.arrays import Counts
from schorl.model.field import Area, CellGrid
from schorl.zoning.regions import Labels
from schorl.zoning.travel import Ground, TravelGrid
from schorl.zoning.workable import domain_of, filled, least_kernel_of, opened


def cells_in(areas: Sequence[Area], grid: CellGrid) -> Counts:
    """Position of the area that holds each cell's centre, shape ``(n_cells,)``.

    A centre outside all of them (cells of a field too narrow for a centre) takes the nearest.
    """
    burned = _burned(
        areas,
        grid.inside.shape,
        Affine(grid.cell_m, 0.0, grid.west_m, 0.0, -grid.cell_m, grid.north_m),
    )
    labels: Counts = burned[grid.inside].astype(np.intp)
    lost = labels < 0
    if lost.any():
        points = shapely.points(grid.centres_m[lost])
        labels[lost] = shapely.STRtree(list(areas)).nearest(points)
    return labels


def narrow_share(areas: Sequence[Area], travel: TravelGrid, ground: Ground) -> float:
    """Share of some zones' ground that lies in no rectangle of its own zone, 0 to 1.

    The finished outlines are drawn on the travel grid afresh. Ground outside the zones counts as
    the nearest zone's up to half a rectangle, since a pass may reach over the edge. The rectangle
    is that of whole cells at most as large as the machine's.
    """
    turned = [shapely.transform(area, lambda points: points @ travel.axes.T) for area in areas]
    # Rasters have x along columns: here columns run along travel and rows across it.
    swapped = [shapely.transform(area, lambda points: points[:, ::-1]) for area in turned]
    raster = _burned(
        swapped,
        travel.source.shape,
        Affine(travel.cell_m, 0.0, travel.along0_m, 0.0, travel.cell_m, travel.across0_m),
    ).astype(np.int16)
    inside = raster >= 0
    if not inside.any():
        return 0.0
    kernel = least_kernel_of(ground, travel.cell_m)
    fits = opened(filled(raster, domain_of(inside, kernel)), kernel)
    return 1.0 - float((fits & inside).sum() / inside.sum())


def _burned(areas: Sequence[Area], shape: tuple[int, ...], transform: Affine) -> Labels:
    """Position of the area under each cell's centre, -1 in none."""
    from rasterio.features import rasterize

    burned: Labels = rasterize(
        [(area, place) for place, area in enumerate(areas)],
        out_shape=shape,
        fill=-1,
        transform=transform,
        dtype="int32",
    )
    return burned

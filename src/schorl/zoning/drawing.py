"""Maps of clusters: labels for each number of zones, then a shape that a machine can follow."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
import shapely

from schorl.model.arrays import Counts, Flags, Floats
from schorl.zoning.clusters import assign, fit_centres, memberships
from schorl.zoning.cover import LabelOf
from schorl.zoning.outlines import arcs, label_under
from schorl.zoning.regions import Layers
from schorl.zoning.travel import Ground, TravelGrid
from schorl.zoning.workable import SMOOTHING, domain_of, filled, kernel_of, make_workable, smoothed

#: Lines between zones are simplified by this many cells, or this share of the width.
TOLERANCE_CELLS, TOLERANCE_WIDTH = 1.5, 0.1
#: Ground outside the zones (m, in cells) that lines are drawn out to, so that they cross the edge.
BEYOND_CELLS = 4


@dataclass(frozen=True, eq=False, kw_only=True)
class ClusterMap:
    """Clusters of the used cells: ``centres (k, d)``, ``labels (n_cells,)`` with -1 out of use."""

    centres: Floats
    labels: Counts

    @property
    def count(self) -> int:
        """Number of clusters."""
        return len(self.centres)


def cluster_maps(
    table: Floats, use: Flags, counts: Iterable[int], *, seed: int
) -> dict[int, ClusterMap]:
    """One map for each number of clusters that the features ``(n_cells, d)`` allow."""
    maps: dict[int, ClusterMap] = {}
    if table.shape[1] == 0:
        return maps
    rows = table[use]
    for count in counts:
        centres = fit_centres(rows, count, seed=seed)
        if len(centres) < count:
            continue
        labels = np.full(len(table), -1, dtype=np.intp)
        labels[use] = assign(rows, centres)
        maps[count] = ClusterMap(centres=centres, labels=labels)
    return maps


def shares_of(table: Floats, centres: Floats, use: Flags) -> Layers:
    """Memberships of all cells, shape ``(n_cells, k)``; cells out of use belong to nothing."""
    shares = np.zeros((len(table), len(centres)), dtype=np.float32)
    places = np.flatnonzero(use)
    for start in range(0, len(places), 100_000):
        some = places[start : start + 100_000]
        shares[some] = memberships(table[some], centres)
    return shares


@dataclass(frozen=True, eq=False, kw_only=True)
class Shaped:
    """Workable zones before they are cut to the field.

    ``labels`` ``(n_cells,)`` with -1 out of use; ``lines`` between zones in the field's metres;
    ``label_of`` tells the zone of points.
    """

    labels: Counts
    lines: list[shapely.Geometry]
    label_of: LabelOf


def shape_clusters(
    shares: Layers, use: Flags, travel: TravelGrid, ground: Ground, *, cells_m: Floats
) -> Shaped:
    """Shape clusters for a machine.

    Parameters
    ----------
    shares
        Memberships ``(n_cells, k)``.
    cells_m
        Centres of the field's cells, ``(n_cells, 2)``.
    """
    inside = travel.flags(use)
    layers = smoothed(shares, travel, inside, sigma_m=ground.width_m / SMOOTHING)
    workable = make_workable(layers, travel, inside, ground)
    kernel = kernel_of(ground, travel.cell_m)
    wide = domain_of(inside, kernel.at_least(2 * BEYOND_CELLS + 1))
    labels = filled(workable.labels.astype(np.int16), wide)

    def label_of(points: Floats) -> Counts:
        return label_under(labels, travel, points)

    per_cell = np.where(use, label_of(cells_m), -1)
    return Shaped(labels=per_cell, lines=list(arcs(labels, travel)), label_of=label_of)


def tolerance_of(cell_m: float, ground: Ground) -> float:
    """Tolerance (m) for simplifying the lines between zones."""
    return max(TOLERANCE_CELLS * cell_m, TOLERANCE_WIDTH * ground.width_m)

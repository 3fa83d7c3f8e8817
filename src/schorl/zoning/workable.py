"""Zones that a machine can follow: smoothed, opened to its rectangle, small regions merged.

All on a grid along the direction of travel (`travel.TravelGrid`). Opening a zone with the
rectangle of working width by run length keeps just the ground on which the machine can give one
rate (the idea of Tisseyre & McBratney 2008, Precision Agriculture 9:101-113); the rest goes to the
nearest ground of that kind. Opening and merging disturb each other, so both repeat until nothing
changes, six times at most.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy import ndimage
from scipy.spatial import cKDTree

from schorl.model.arrays import Counts, Flags
from schorl.zoning.regions import Labels, Layers, merge_small
from schorl.zoning.travel import Ground, TravelGrid

PASSES = 6
SMOOTHING = 6.0  # the Gaussian's SD is the width over this
EIGHT = np.ones((3, 3), dtype=bool)


@dataclass(frozen=True, eq=False, kw_only=True)
class Workable:
    """Labels ``(rows, cols)`` on a travel grid, -1 off the used cells; where the machine fits."""

    labels: Counts
    fits: Flags


@dataclass(frozen=True, slots=True)
class Kernel:
    """The machine's rectangle in cells: across (rows) and along (columns), at least one."""

    across: int
    along: int

    def at_least(self, cells: int) -> Kernel:
        """A rectangle of at least so many cells a side."""
        return Kernel(max(self.across, cells), max(self.along, cells))


def kernel_of(ground: Ground, cell_m: float) -> Kernel:
    """Rectangle of whole cells that is not smaller than the ground by more than rounding."""
    across, along = (
        max(int(np.ceil(side / cell_m - 1e-6)), 1) for side in (ground.width_m, ground.run_m)
    )
    return Kernel(across, along)


def spared_kernel_of(ground: Ground, cell_m: float) -> Kernel:
    """The rectangle with up to a cell to spare, since lines are simplified after they are drawn.

    Cells larger than a quarter of a side spare a quarter of it, lest zones lose more than the
    simplified corners are worth.
    """
    wider = replace(
        ground,
        width_m=ground.width_m + min(cell_m, ground.width_m / 4.0),
        run_m=ground.run_m + min(cell_m, ground.run_m / 4.0),
    )
    return kernel_of(wider, cell_m)


def least_kernel_of(ground: Ground, cell_m: float) -> Kernel:
    """Rectangle of whole cells that is not larger than the ground: to judge, not to draw."""
    return Kernel(
        max(int(ground.width_m / cell_m + 1e-6), 1), max(int(ground.run_m / cell_m + 1e-6), 1)
    )


def smoothed(shares: Layers, travel: TravelGrid, use: Flags, *, sigma_m: float) -> Layers:
    """Memberships ``(n_cells, k)`` smoothed on the travel grid, shape ``(k, rows, cols)``.

    Cells out of use weigh nothing; a used cell far from others keeps its own membership.
    """
    sigma = sigma_m / travel.cell_m
    inside = np.maximum(travel.source, 0)
    weight = ndimage.gaussian_filter(use.astype(np.float32), sigma, mode="constant")
    weight = np.maximum(weight, 1e-6)
    layers = np.empty((shares.shape[1], *use.shape), dtype=np.float32)
    for place in range(shares.shape[1]):
        raster = np.where(use, shares[:, place].astype(np.float32)[inside], np.float32(0))
        layers[place] = ndimage.gaussian_filter(raster, sigma, mode="constant") / weight
    return layers


def make_workable(layers: Layers, travel: TravelGrid, use: Flags, ground: Ground) -> Workable:
    """Labels a machine can follow, from smoothed memberships ``(k, rows, cols)``.

    Parts of the field in which no rectangle fits are cut into strips across the direction of
    travel; parts under the least area become one piece.
    """
    kernel = spared_kernel_of(ground, travel.cell_m)
    least_cells = int(np.ceil(ground.least_m2 / travel.cell_m**2))
    domain = domain_of(use, kernel)
    labels: Labels = np.where(use, layers.argmax(axis=0), -1).astype(np.int16)
    labels, settled = _narrow_parts(labels, layers, use, domain, kernel, least_cells)
    for _ in range(PASSES):
        fits = opened(filled(labels, domain), kernel) | settled
        fresh = np.where(use, nearest_label(labels, use & ~fits, fits & use), np.int16(-1))
        fresh = merge_small(fresh, layers, least_cells)
        if (fresh == labels).all():
            break
        labels = fresh
    fits = (opened(filled(labels, domain), kernel) | settled) & use
    return Workable(labels=labels.astype(np.intp), fits=fits)


def domain_of(use: Flags, kernel: Kernel) -> Flags:
    """Used cells and half a rectangle around them: a pass's middle must run inside the field."""
    half = (2 * (kernel.across // 2) + 1, 2 * (kernel.along // 2) + 1)
    grown = ndimage.maximum_filter1d(use.view(np.uint8), half[0], axis=0, mode="constant")
    return np.asarray(
        ndimage.maximum_filter1d(grown, half[1], axis=1, mode="constant").astype(bool)
    )


def opened(labels: Labels, kernel: Kernel) -> Flags:
    """Cells inside some rectangle of one label only; label -1 fits nowhere.

    One opening for all labels at once: a rectangle lies in one label exactly where the least and
    the largest label in it are the same.
    """
    least = most = labels
    for axis, size in enumerate((kernel.across, kernel.along)):
        least = ndimage.minimum_filter1d(least, size, axis=axis, mode="constant", cval=-1)
        most = ndimage.maximum_filter1d(most, size, axis=axis, mode="constant", cval=-1)
    grown = ((least == most) & (least >= 0)).view(np.uint8)
    for axis, size in enumerate((kernel.across, kernel.along)):
        # The window of an even size is not centred: turn it round on the way back.
        back = -1 if size % 2 == 0 else 0
        grown = ndimage.maximum_filter1d(grown, size, axis=axis, mode="constant", origin=back)
    return np.asarray(grown.astype(bool))


def filled(labels: Labels, domain: Flags) -> Labels:
    """Labels carried out to ``domain`` from the nearest labelled cell."""
    return nearest_label(labels, domain & (labels < 0), labels >= 0)


def nearest_label(labels: Labels, wanted: Flags, given: Flags) -> Labels:
    """Labels with the cells ``wanted`` taken from the nearest of ``given``; no one given: as is."""
    if not wanted.any() or not given.any():
        return labels
    # The nearest given cell always lies on the rim of the given ground.
    rim = given & ~ndimage.binary_erosion(given, border_value=1)
    rim = rim if rim.any() else given
    places = np.argwhere(rim)
    _, nearest = cKDTree(places).query(np.argwhere(wanted))
    fresh = labels.copy()
    fresh[wanted] = labels[tuple(places[nearest].T)]
    return fresh


def _narrow_parts(
    labels: Labels, layers: Layers, use: Flags, domain: Flags, kernel: Kernel, least_cells: int
) -> tuple[Labels, Flags]:
    """Settle the parts of the field that hold no rectangle of one label.

    Returns labels and the cells settled: a part under the least area gets its commonest label, a
    narrow part one label for each position along travel, in runs that are long enough.
    """
    parts, count = ndimage.label(use, structure=EIGHT)
    fits = opened(filled(labels, domain), kernel) & use
    # A part narrower than the machine holds a rectangle only by the ground lent beyond its edge.
    wide = opened(np.where(use, 0, -1).astype(np.int16), kernel)
    held = np.bincount(parts[fits], minlength=count + 1) > 0
    held &= np.bincount(parts[wide], minlength=count + 1) > 0
    area = np.bincount(parts.ravel(), minlength=count + 1)
    settled = np.zeros_like(use)
    for part in range(1, count + 1):
        small, none = area[part] < least_cells, not held[part]
        if not (small or none):
            continue
        rows, cols = np.nonzero(parts == part)
        totals = np.array([np.bincount(cols, layer[rows, cols]) for layer in layers])
        width = np.bincount(cols)
        strip = (
            np.full(totals.shape[1], int(totals.sum(axis=1).argmax()))
            if small
            else strips(totals, width, least_run=kernel.along, least_cells=least_cells)
        )
        labels[rows, cols] = strip[cols]
        settled[rows, cols] = True
    return labels, settled


def strips(totals: Layers, width: Counts, *, least_run: int, least_cells: int) -> Counts:
    """Label of each column of a narrow part, in runs of enough columns and cells.

    Parameters
    ----------
    totals
        Summed memberships of each column's cells, shape ``(k, cols)``.
    width
        Cells of each column, shape ``(cols,)``; columns without cells belong to no run.
    """
    columns = np.flatnonzero(width > 0)
    best = totals[:, columns].argmax(axis=0)
    cuts = np.flatnonzero(np.diff(best)) + 1
    runs = [list(run) for run in np.split(np.arange(len(columns)), cuts)]

    def short(run: list[int]) -> bool:
        return len(run) < least_run or width[columns[run]].sum() < least_cells

    while len(runs) > 1 and any(short(run) for run in runs):
        place = min((i for i, run in enumerate(runs) if short(run)), key=lambda i: len(runs[i]))
        beside = [i for i in (place - 1, place + 1) if 0 <= i < len(runs)]
        into = max(beside, key=lambda i: len(runs[i]))
        runs[min(place, into)] = runs[min(place, into)] + runs[max(place, into)]
        del runs[max(place, into)]
    labels = np.zeros(totals.shape[1], dtype=np.intp)
    for run in runs:
        labels[columns[run]] = int(totals[:, columns[run]].sum(axis=1).argmax())
    return labels

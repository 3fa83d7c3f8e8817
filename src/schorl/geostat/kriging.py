"""Ordinary kriging of points and blocks with the mean unknown.

Targets are taken in chunks of fixed memory, so that a million cells need no more than a thousand.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from schorl.geostat.covariance import distances
from schorl.geostat.neighbourhoods import krige_nearest, krige_tiled
from schorl.geostat.support import Layout, layout_of
from schorl.geostat.system import SAME_PLACE_M, System, Targets, replace_turn, sample_to_target
from schorl.geostat.threads import Room, for_each, one_blas_thread
from schorl.model.arrays import Floats
from schorl.model.variogram import Support, Variogram

#: Doubles of one work array: 2 MB, so that a chunk's arrays stay in a core's cache.
CHUNK_DOUBLES = 262_144
#: More samples than this are kriged from neighbourhoods shared by tiles.
GLOBAL_UP_TO = 800


def krige(
    east_north_m: Floats,
    values: Floats,
    targets_m: Floats,
    variogram: Variogram,
    *,
    block_m: float | None = None,
    points_per_side: int = 4,
    filtered: bool = True,
    support: Sequence[Support] | None = None,
    neighbours: int | None = None,
) -> tuple[Floats, Floats]:
    """Ordinary kriging of points or square blocks.

    Parameters
    ----------
    east_north_m, values
        Samples, ``(n, 2)`` in metres and ``(n,)``; values may be ``(n, d)`` to krige d columns
        with one set of weights.
    targets_m
        Points or block centres, ``(m, 2)``.
    variogram
        Fitted variogram.
    block_m
        Side of the square block; None for points.
    points_per_side
        A block's mean is taken over this many centre points a side, its own diagonal included.
    filtered
        True: predict the structured part, without nugget (its variance has no nugget either).
        False: the exact interpolator with the nugget at distance zero, as gstat and PyKrige.
    support
        One ``Support`` a sample; None means points.
    neighbours
        Use only this many nearest samples of each target. None: all samples up to 800, above that
        overlapping tiles with shared neighbourhoods, blended so that no seam shows.

    Returns
    -------
    estimate, variance
        ``(m,)`` each (estimate ``(m, d)`` for d columns), in the unit of the values and its
        square; the variance is floored at 0.

    Raises
    ------
    ValueError
        Shapes do not fit, values are not finite, or the system is singular (two samples in one
        place without nugget).
    """
    table = np.asarray(values, dtype=np.float64)
    columns = table.reshape(len(table), -1)
    if not np.isfinite(columns).all():
        raise ValueError("values must be finite")
    layout = layout_of(east_north_m, support).turned(variogram)
    if len(columns) != len(layout.starts):
        raise ValueError(f"{len(columns)} values for {len(layout.starts)} samples")
    targets = Targets.of(
        np.asarray(targets_m, float), layout, variogram, block_m=block_m, side=points_per_side
    )
    with one_blas_thread():
        if neighbours is not None and neighbours < len(columns):
            estimate, variance = krige_nearest(
                layout, columns, targets, variogram, filtered=filtered, neighbours=neighbours
            )
        elif len(columns) > GLOBAL_UP_TO and neighbours is None and layout.all_points:
            estimate, variance = krige_tiled(layout, columns, targets, variogram, filtered=filtered)
        else:
            estimate, variance = krige_global(
                layout, columns, targets, variogram, filtered=filtered
            )
    return (estimate if table.ndim > 1 else estimate[:, 0]), variance


def krige_global(
    layout: Layout, columns: Floats, targets: Targets, variogram: Variogram, *, filtered: bool
) -> tuple[Floats, Floats]:
    """All samples for every target; threads over chunks of fixed size."""
    system = System.of(layout, columns, variogram)
    own = targets.own_variance(replace_turn(variogram), filtered=filtered)
    count = len(targets.centres_m)
    estimate, variance = np.empty((count, columns.shape[1])), np.empty(count)
    step = max(CHUNK_DOUBLES // max(len(layout.points_m), 1), 64)
    room = Room()

    def work(start: int) -> None:
        part = slice(start, min(start + step, count))
        chosen = targets.part(part)
        shared = sample_to_target(layout, chosen, variogram, filtered=filtered, room=room)
        estimate[part], variance[part] = system.predict(shared, own, room)
        if not filtered:
            _exact_at_samples(layout, columns, chosen, estimate[part], variance[part], own=own)

    for_each(range(0, count, step), work)
    return estimate, variance


def _exact_at_samples(
    layout: Layout,
    columns: Floats,
    targets: Targets,
    estimate: Floats,
    variance: Floats,
    *,
    own: float,
) -> None:
    """A target at a sample gives the sample back exactly, without rounding."""
    if targets.block or not layout.all_points:
        return
    near = np.flatnonzero(variance <= 1e-8 * own)  # spares the distances of all others
    gap = distances(targets.centres_m[near], layout.points_m)
    rows, cols = np.nonzero(gap <= SAME_PLACE_M)
    estimate[near[cols]] = columns[rows]
    variance[near[cols]] = 0.0

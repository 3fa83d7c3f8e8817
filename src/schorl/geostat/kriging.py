"""Ordinary kriging of points and blocks with the mean unknown.

Estimate and variance follow from one factorisation of the data covariance K = L L' (generalised
least squares form, Chilès & Delfiner 2012, section 3.4): with W = L⁻¹ c for the covariances c of a
target with the data and u = L⁻¹ 1,

    estimate = m + W' L⁻¹ (z - m),   variance = c00 - W'W + (1 - u'W)² / u'u.

Targets are taken in chunks of fixed memory, so that a million cells need no more than a thousand.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.linalg import solve_triangular

from schorl.geostat.covariance import correlation_in_place, correlations, distances, stretched
from schorl.geostat.support import Layout, data_covariance, layout_of
from schorl.geostat.threads import Room, for_each, one_blas_thread
from schorl.model.arrays import Floats
from schorl.model.variogram import Support, Variogram

#: Doubles of one work array: 2 MB, so that a chunk's arrays stay in a core's cache.
CHUNK_DOUBLES = 262_144
#: Bands of the triangular product: the more, the fewer products with zero, the smaller each.
BANDS = 6
#: More samples than this are kriged from neighbourhoods shared by tiles.
GLOBAL_UP_TO = 800
#: A point of the target this close to a sample (m) is at the sample.
SAME_PLACE_M = 1e-9


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
            from schorl.geostat.neighbourhoods import krige_nearest

            estimate, variance = krige_nearest(
                layout, columns, targets, variogram, filtered=filtered, neighbours=neighbours
            )
        elif len(columns) > GLOBAL_UP_TO and neighbours is None and layout.all_points:
            from schorl.geostat.neighbourhoods import krige_tiled

            estimate, variance = krige_tiled(layout, columns, targets, variogram, filtered=filtered)
        else:
            estimate, variance = krige_global(
                layout, columns, targets, variogram, filtered=filtered
            )
    return (estimate if table.ndim > 1 else estimate[:, 0]), variance


@dataclass(frozen=True, eq=False, kw_only=True)
class Targets:
    """Targets in the isotropic plane: centres ``(m, 2)`` and the offsets of a block's points."""

    centres_m: Floats
    offsets_m: Floats  # (k, 2); one zero row for points

    @classmethod
    def of(
        cls,
        targets_m: Floats,
        layout: Layout,
        variogram: Variogram,
        *,
        block_m: float | None,
        side: int,
    ) -> Targets:
        """Bring targets and block points into the plane of the layout."""
        if targets_m.ndim != 2 or targets_m.shape[1] != 2:
            raise ValueError(f"targets_m must have shape (m, 2), not {targets_m.shape}")
        turn = {"stretch": variogram.stretch, "stretch_deg": variogram.stretch_deg}
        offsets = np.zeros((1, 2)) if block_m is None else block_offsets(block_m, side)
        return cls(
            centres_m=stretched(targets_m, about_m=layout.about_m, **turn),
            offsets_m=stretched(offsets, about_m=np.zeros(2), **turn),
        )

    @property
    def block(self) -> bool:
        """Whether targets are blocks."""
        return len(self.offsets_m) > 1

    def part(self, chosen: slice | np.ndarray) -> Targets:
        """Some of the targets."""
        return Targets(centres_m=self.centres_m[chosen], offsets_m=self.offsets_m)

    def own_variance(self, variogram: Variogram, *, filtered: bool) -> float:
        """Variance of a target: partial sill over its points; a point's nugget where not filtered.

        A block's nugget averages out, so it is left out of its own variance.
        """
        if self.block:
            within = correlations(self.offsets_m, self.offsets_m, variogram)
            return variogram.partial_sill * float(within.mean())
        return variogram.partial_sill + (0.0 if filtered else variogram.nugget)


def block_offsets(block_m: float, side: int) -> Floats:
    """Centre points of ``side`` x ``side`` sub-cells about a block's centre, ``(side², 2)``."""
    steps = (np.arange(side) + 0.5) / side * block_m - block_m / 2.0
    east, north = np.meshgrid(steps, steps)
    return np.column_stack([east.ravel(), north.ravel()])


def sample_to_target(
    layout: Layout, targets: Targets, variogram: Variogram, *, filtered: bool, room: Room
) -> Floats:
    """Covariance between samples (rows) and targets (columns), ``(n, m)``, in the thread's room."""
    shape = len(layout.points_m), len(targets.centres_m)
    spare = room.array("spare", shape)
    total: Floats | None = None
    for offset in targets.offsets_m:
        gap = room.array("gap" if total is None else "next gap", shape)
        distances(targets.centres_m + offset, layout.points_m, out=gap, spare=spare)
        touching = not filtered and gap.min(initial=np.inf) <= SAME_PLACE_M
        at_sample = gap <= SAME_PLACE_M if touching else None
        shared = correlation_in_place(
            gap, variogram.family, variogram.practical_range_m, spare=spare
        )
        shared *= variogram.partial_sill
        if at_sample is not None:
            shared[at_sample] += variogram.nugget
        total = shared if total is None else np.add(total, shared, out=total)
    assert total is not None
    if targets.block:
        total /= len(targets.offsets_m)
    return layout.averaged(total)


@dataclass(frozen=True, eq=False, kw_only=True)
class System:
    """A factorised data covariance, ready for any number of targets."""

    inverse_lower: Floats  # L⁻¹, (n, n)
    linear: Floats  # K⁻¹ (z - m) in d rows and K⁻¹ 1 in the last, (d + 1, n)
    mean: Floats  # (d,)
    weight: float  # 1' K⁻¹ 1

    @classmethod
    def of(cls, layout: Layout, columns: Floats, variogram: Variogram) -> System:
        """Factorise once."""
        covariance = data_covariance(layout, replace_turn(variogram))
        try:
            lower = np.linalg.cholesky(covariance)
        except np.linalg.LinAlgError:
            raise ValueError(
                "the kriging system is singular: two samples lie in one place and the variogram "
                "has no nugget; average or drop one of them"
            ) from None
        count = len(covariance)
        inverse = solve_triangular(lower, np.eye(count), lower=True, check_finite=False)
        ones = inverse @ np.ones(count)
        weight = float(ones @ ones)
        flat = inverse @ columns
        mean = ones @ flat / weight
        scores = np.column_stack([flat - ones[:, None] * mean, ones])
        return cls(
            inverse_lower=inverse,
            linear=np.ascontiguousarray(scores.T @ inverse),
            mean=mean,
            weight=weight,
        )

    def predict(self, shared: Floats, own_variance: float, room: Room) -> tuple[Floats, Floats]:
        """Estimate ``(m, d)`` and variance ``(m,)`` from covariances ``(n, m)`` with the data."""
        direct = self.linear @ shared
        slack = 1.0 - direct[-1]
        variance = own_variance - self.explained(shared, room) + slack * slack / self.weight
        return direct[:-1].T + self.mean, np.maximum(variance, 0.0)

    def explained(self, shared: Floats, room: Room) -> Floats:
        """Sum of squares of L⁻¹ c for each target, ``(m,)``.

        By bands of rows: the upper right of L⁻¹ is zero, and a band needs no column beyond it.
        """
        count = len(shared)
        edges = np.linspace(0, count, min(BANDS, count) + 1).astype(np.intp)
        total = np.zeros(shared.shape[1])
        for top, end in pairwise(edges):
            band = room.array("band", (int(end - top), shared.shape[1]))
            np.matmul(self.inverse_lower[top:end, :end], shared[:end], out=band)
            total += np.einsum("ij,ij->j", band, band)
        return total


def replace_turn(variogram: Variogram) -> Variogram:
    """The variogram as seen in the plane where distances are already stretched."""
    if variogram.stretch == 1.0:
        return variogram
    from dataclasses import replace

    return replace(variogram, stretch=1.0, stretch_deg=0.0)


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

"""The kriging system: targets in the plane of the samples, covariances, one factorisation.

Estimate and variance follow from the factorisation K = L L' of the data covariance (generalised
least squares form, Chilès & Delfiner 2012, section 3.4): with W = L⁻¹ c for the covariances c of a
target with the data and u = L⁻¹ 1,

    estimate = m + W' L⁻¹ (z - m),   variance = c00 - W'W + (1 - u'W)² / u'u.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from scipy.linalg import solve_triangular

from schorl.geostat.covariance import correlation_in_place, correlations, distances, stretched
from schorl.geostat.support import Layout, data_covariance
from schorl.geostat.threads import Room
from schorl.model.arrays import Floats
from schorl.model.variogram import Variogram

#: Bands of the triangular product: the more, the fewer products with zero, the smaller each.
BANDS = 6
#: A point of the target this close to a sample (m) is at the sample.
SAME_PLACE_M = 1e-9


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
    return replace(variogram, stretch=1.0, stretch_deg=0.0)

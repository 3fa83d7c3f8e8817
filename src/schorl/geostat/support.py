"""Samples as averages over soil: point, listed cores, sample zone; mixed as they come.

Model (regularisation, Journel & Huijbregts 1978, ch. II): the composite of sample i is the mean of
the structured part over its support plus noise. Between samples the covariance is the mean
correlation of all pairs of points. A zone composite of k cores at random places has the extra
variance (1 - mean correlation within the zone) / k; cores at known places are just averaged.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from schorl.geostat.covariance import correlation_in_place, distances, stretched
from schorl.model.arrays import Counts, Floats
from schorl.model.variogram import Support, Variogram


@dataclass(frozen=True, eq=False, kw_only=True)
class Layout:
    """All support points of a sample set, flattened.

    ``points_m`` ``(p, 2)`` relative to ``about_m``; ``starts`` ``(n,)`` where each sample's points
    begin; ``counts`` ``(n,)`` how many it has; ``is_zone`` ``(n,)``; ``cores`` ``(n,)``.
    """

    points_m: Floats
    about_m: Floats
    starts: Counts
    counts: Counts
    is_zone: np.ndarray
    cores: Floats

    @property
    def all_points(self) -> bool:
        """Whether every sample is a point."""
        return len(self.points_m) == len(self.starts)

    @property
    def equal_cores(self) -> bool:
        """Whether all composites have the same number of cores, so that noises are equal."""
        return bool((self.cores == self.cores[0]).all())

    def averaged(self, rows: Floats) -> Floats:
        """Mean over each sample's points along the first axis: ``(p, ...)`` to ``(n, ...)``."""
        if self.all_points:
            return rows
        sums = np.add.reduceat(rows, self.starts, axis=0)
        return sums / self.counts.reshape(-1, *([1] * (rows.ndim - 1)))

    def turned(self, variogram: Variogram) -> Layout:
        """The layout in the plane where this variogram is isotropic."""
        if variogram.stretch == 1.0:
            return self
        points = stretched(
            self.points_m,
            stretch=variogram.stretch,
            stretch_deg=variogram.stretch_deg,
            about_m=np.zeros(2),
        )
        return Layout(
            points_m=points,
            about_m=self.about_m,
            starts=self.starts,
            counts=self.counts,
            is_zone=self.is_zone,
            cores=self.cores,
        )


def layout_of(east_north_m: Floats, support: Sequence[Support] | None) -> Layout:
    """Flatten samples and their supports.

    Parameters
    ----------
    east_north_m
        Sample places, shape ``(n, 2)``, metres; used where ``support`` is None.
    support
        One ``Support`` a sample, or None for points of equal cores.

    Raises
    ------
    ValueError
        Where shapes do not fit.
    """
    places = np.asarray(east_north_m, dtype=np.float64)
    if places.ndim != 2 or places.shape[1] != 2:
        raise ValueError(f"east_north_m must have shape (n, 2), not {places.shape}")
    about = places.mean(axis=0) if len(places) else np.zeros(2)
    if support is None:
        count = len(places)
        return Layout(
            points_m=places - about,
            about_m=about,
            starts=np.arange(count),
            counts=np.ones(count, dtype=np.intp),
            is_zone=np.zeros(count, dtype=bool),
            cores=np.ones(count),
        )
    if len(support) != len(places):
        raise ValueError(f"{len(support)} supports for {len(places)} samples")
    counts = np.array([len(one.points_m) for one in support], dtype=np.intp)
    return Layout(
        points_m=np.concatenate([one.points_m for one in support]) - about,
        about_m=about,
        starts=np.concatenate([[0], np.cumsum(counts)[:-1]]).astype(np.intp),
        counts=counts,
        is_zone=np.array([one.kind == "zone" for one in support]),
        cores=np.array([float(one.cores) for one in support]),
    )


def structured_matrix(
    layout: Layout, family: str, practical_range_m: float, *, gaps_m: Floats | None = None
) -> Floats:
    """Correlation between samples ``(n, n)``, core scatter of zones on the diagonal.

    Multiplied by the partial sill it is the structured part of the data covariance. A zone's mean
    correlation with itself leaves pairs of a point with itself out. ``gaps_m`` are the distances
    between all support points where they are at hand.
    """
    gap = distances(layout.points_m, layout.points_m) if gaps_m is None else gaps_m.copy()
    between = correlation_in_place(gap, family, practical_range_m)
    if layout.all_points:
        return between
    matrix = layout.averaged(layout.averaged(between).T)
    matrix = 0.5 * (matrix + matrix.T)
    within = _within(layout, matrix)
    zone = layout.is_zone
    diagonal = np.diag(matrix).copy()
    diagonal[zone] = (within + (1.0 - within) / layout.cores)[zone]
    np.fill_diagonal(matrix, diagonal)
    return matrix


def _within(layout: Layout, matrix: Floats) -> Floats:
    """Mean correlation within each support without a point's pair with itself; 1 for points."""
    count = layout.counts.astype(np.float64)
    diagonal = np.diag(matrix)
    other_pairs = np.where(count > 1, count * (count - 1.0), 1.0)
    within = (diagonal * count**2 - count) / other_pairs
    return np.where(count > 1, within, 1.0)


def noise_of(layout: Layout, *, nugget: float, lab_variance: float) -> Floats:
    """Noise variance of each sample ``(n,)``: laboratory plus short-range variation over cores."""
    median_cores = float(np.median(layout.cores))
    lab = min(lab_variance, nugget)
    return np.asarray(lab + (nugget - lab) * median_cores / layout.cores)


def data_covariance(layout: Layout, variogram: Variogram) -> Floats:
    """Covariance of the data ``(n, n)``: structured part plus noise on the diagonal."""
    turned = layout.turned(variogram)
    matrix = variogram.partial_sill * structured_matrix(
        turned, variogram.family, variogram.practical_range_m
    )
    noise = noise_of(layout, nugget=variogram.nugget, lab_variance=variogram.lab_variance)
    matrix[np.diag_indices_from(matrix)] += noise
    return matrix


def log_mean_shift(layout: Layout, variogram: Variogram) -> Floats:
    """Half the variance lost by averaging, ``(n,)``: log of a mean over the mean of logs.

    For a lognormal property the logarithm of a composite lies above the composite of logarithms by
    about half the dispersion variance within the support (permanence of lognormality).
    """
    if layout.all_points:
        return np.zeros(len(layout.starts))
    turned = layout.turned(variogram)
    between = correlation_in_place(
        distances(turned.points_m, turned.points_m), variogram.family, variogram.practical_range_m
    )
    matrix = layout.averaged(layout.averaged(between).T)
    within = np.where(layout.is_zone, _within(layout, matrix), np.diag(matrix))
    return 0.5 * variogram.partial_sill * np.clip(1.0 - within, 0.0, 1.0)

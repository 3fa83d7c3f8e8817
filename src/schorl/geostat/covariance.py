"""Correlation functions, worked in place on arrays of distances."""

from __future__ import annotations

import numpy as np

from schorl.model.arrays import Floats
from schorl.model.variogram import RANGE_OVER_SCALE, Variogram

#: sqrt(3) h / scale = MATERN_FACTOR * h / practical range.
MATERN_FACTOR = np.sqrt(3.0) * RANGE_OVER_SCALE["matern32"]


def correlation_in_place(
    distance: Floats, family: str, practical_range_m: float, *, spare: Floats | None = None
) -> Floats:
    """Overwrite distances (metres, any shape) by the family's correlation, 1 at distance 0.

    In place, because kriging spends its time here; the spherical and the Matérn need one more
    array of the same shape, ``spare`` where there is one to use.
    """
    if family == "spherical":
        distance *= 1.0 / practical_range_m
        np.minimum(distance, 1.0, out=distance)
        cube = np.multiply(distance, distance, out=spare)
        cube -= 3.0
        cube *= distance
        np.multiply(cube, 0.5, out=distance)
        distance += 1.0
        return distance
    if family == "exponential":
        distance *= -3.0 / practical_range_m
        return np.exp(distance, out=distance)
    distance *= MATERN_FACTOR / practical_range_m
    decay = np.negative(distance, out=spare)
    np.exp(decay, out=decay)
    distance += 1.0
    distance *= decay
    return distance


def distances(
    targets_m: Floats, points_m: Floats, *, out: Floats | None = None, spare: Floats | None = None
) -> Floats:
    """Distances between ``(p, 2)`` points (rows) and ``(m, 2)`` targets (columns), ``(p, m)``.

    Differences first, squares after: exact to rounding also for points close together. ``out`` and
    ``spare`` are arrays to work in, where there are some.
    """
    east = np.subtract(targets_m[:, 0][None, :], points_m[:, 0][:, None], out=out)
    north = np.subtract(targets_m[:, 1][None, :], points_m[:, 1][:, None], out=spare)
    east *= east
    north *= north
    east += north
    return np.sqrt(east, out=east)


def correlations(targets_m: Floats, points_m: Floats, variogram: Variogram) -> Floats:
    """Correlation of the structured part between points (rows) and targets (columns)."""
    return correlation_in_place(
        distances(targets_m, points_m), variogram.family, variogram.practical_range_m
    )


def stretched(points_m: Floats, *, stretch: float, stretch_deg: float, about_m: Floats) -> Floats:
    """Points in the plane where the covariance is isotropic, shape ``(n, 2)``.

    Coordinates are taken about ``about_m`` (also for isotropic variograms: small numbers keep
    distances exact), turned so that ``stretch_deg`` (from north, clockwise) points north, and the
    cross direction is multiplied by ``stretch``.
    """
    moved = points_m - about_m
    if stretch == 1.0:
        return np.ascontiguousarray(moved)
    angle = np.deg2rad(stretch_deg)
    along = moved[:, 0] * np.sin(angle) + moved[:, 1] * np.cos(angle)
    across = moved[:, 0] * np.cos(angle) - moved[:, 1] * np.sin(angle)
    return np.column_stack([across * stretch, along])


def empirical_variogram(
    east_north_m: Floats, values: Floats, *, bins: int = 12
) -> tuple[Floats, Floats, Floats]:
    """Method-of-moments variogram up to half the largest distance, for plots only.

    Returns mean lag (m), semivariance and number of pairs of each bin that has pairs.
    """
    first, second = np.triu_indices(len(values), k=1)
    lag = np.hypot(*(east_north_m[first] - east_north_m[second]).T)
    half_square = 0.5 * (values[first] - values[second]) ** 2
    longest = lag.max(initial=0.0) / 2.0
    if longest <= 0:
        empty = np.empty(0)
        return empty, empty, empty
    place = np.minimum((lag / longest * bins).astype(np.intp), bins)
    pairs = np.bincount(place, minlength=bins + 1)[:bins].astype(np.float64)
    full = pairs > 0
    lags = np.bincount(place, weights=lag, minlength=bins + 1)[:bins][full] / pairs[full]
    gamma = np.bincount(place, weights=half_square, minlength=bins + 1)[:bins][full] / pairs[full]
    return lags, gamma, pairs[full]

"""Test whether the boron need is spatially structured at all.

A Moran-type statistic of the samples against random reshuffling of their values, so that no
distribution is assumed. Moran (1950, Biometrika 37:17-23) for the statistic; the permutation test
counts the observed value among the reshuffled ones (p is never 0).
"""

from __future__ import annotations

import numpy as np

from schorl.model.arrays import Counts, Floats

NEIGHBOURS = 6
PERMUTATIONS = 499
#: At or below this the need counts as structured.
GATE_P = 0.10
#: Differences this small between two statistics are rounding, not order.
ROUNDING = 1e-12
LEAST_SAMPLES = 5


def nearest_neighbours(east_north_m: Floats, count: int = NEIGHBOURS) -> Counts:
    """Index of each sample's nearest other samples, shape ``(n, m)``.

    ``m`` is ``count``, or half of the other samples where there are few: were all others
    neighbours, the statistic could not vary.
    """
    from scipy.spatial import cKDTree

    total = len(east_north_m)
    wanted = max(min(count, (total - 1) // 2), 1)
    found = np.asarray(cKDTree(east_north_m).query(east_north_m, k=wanted + 1)[1])
    own = found == np.arange(total)[:, None]
    # Two samples in one place may hide each other: drop the farthest where the own is not listed.
    own[~own.any(axis=1), -1] = True
    return np.asarray(found[~own].reshape(total, wanted), dtype=np.intp)


def moran(values: Floats, neighbours: Counts) -> float:
    """Moran's I with equal weights of the listed neighbours; 0 where all values are the same.

    Parameters
    ----------
    values
        Shape ``(n,)``.
    neighbours
        Shape ``(n, m)``, from `nearest_neighbours`.
    """
    centred = values - values.mean()
    square = float(centred @ centred)
    if square <= 0:
        return 0.0
    return float((centred * centred[neighbours].mean(axis=1)).sum() / square)


def structure_p(
    east_north_m: Floats, values: Floats, *, seed: int, permutations: int = PERMUTATIONS
) -> float:
    """Chance that values without spatial order look at least as structured as these.

    Parameters
    ----------
    east_north_m, values
        Samples, ``(n, 2)`` in metres and ``(n,)``; rows with a missing value are left out.
    seed
        Of the reshuffling; same seed, same answer.

    Returns
    -------
    float
        (1 + reshuffled statistics that reach the observed one) / (1 + permutations); 1 where fewer
        than 5 samples, or values without any difference, leave nothing to test.
    """
    known = np.isfinite(values)
    values, places = values[known], east_north_m[known]
    if len(values) < LEAST_SAMPLES or np.ptp(values) == 0:
        return 1.0
    neighbours = nearest_neighbours(places)
    observed = moran(values, neighbours)
    centred = values - values.mean()
    random = np.random.default_rng(seed)
    shuffled = random.permuted(np.tile(centred, (permutations, 1)), axis=1)
    reached = (shuffled * shuffled[:, neighbours].mean(axis=2)).sum(axis=1) / (centred @ centred)
    return float((1 + (reached >= observed - ROUNDING).sum()) / (1 + permutations))

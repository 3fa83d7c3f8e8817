"""Test whether the boron need, and the soil it is made from, is spatially structured at all.

A Moran-type statistic of the samples against random reshuffling of their values, so that no
distribution is assumed. Moran (1950, Biometrika 37:17-23) for the statistic; the permutation test
counts the observed value among the reshuffled ones (p is never 0).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from schorl.model.arrays import Counts, Floats

NEIGHBOURS = 6
PERMUTATIONS = 999
#: At or below this the field counts as structured (`scripts/quality.py zones` shows what it does).
GATE_P = 0.02
#: Differences this small between two statistics, as a share, are rounding, not order.
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
    east_north_m: Floats,
    need: Floats,
    properties: Sequence[Floats] = (),
    *,
    seed: int,
    permutations: int = PERMUTATIONS,
) -> float:
    """Chance that samples without spatial order look at least as structured as these.

    The statistic is Moran's I of the need, times the root of the number of properties, plus that
    of every property the need is made from: zones show in all of them, chance rarely does. The
    need so weighs as much as all properties together. Whole samples are reshuffled, so that what
    the properties have in common counts as no order.

    Parameters
    ----------
    east_north_m, need
        Samples, ``(n, 2)`` in metres and ``(n,)``; rows without a need are left out.
    properties
        Measured values ``(n,)`` each; a missing one says nothing either way.
    seed
        Of the reshuffling; same seed, same answer.

    Returns
    -------
    float
        (1 + reshuffled statistics that reach the observed one) / (1 + permutations); 1 where fewer
        than 5 samples, or needs without any difference, leave nothing to test.
    """
    known = np.isfinite(need)
    places = east_north_m[known]
    if len(places) < LEAST_SAMPLES or np.ptp(need[known]) == 0:
        return 1.0
    own = [_standard(values[known]) for values in properties if _differs(values[known])]
    weights = np.array([np.sqrt(max(len(own), 1)), *np.ones(len(own))])
    table = np.column_stack([_standard(need[known]), *own]) * np.sqrt(weights)
    neighbours = nearest_neighbours(places)

    def statistic(order: Counts) -> float:
        rows = table[order]
        return float((rows * rows[neighbours].mean(axis=1)).sum())

    random = np.random.default_rng(seed)
    observed = statistic(np.arange(len(table)))
    shuffled = np.array([statistic(random.permutation(len(table))) for _ in range(permutations)])
    reached = int((shuffled >= observed - ROUNDING * abs(observed)).sum())
    return (1 + reached) / (1 + permutations)


def _differs(values: Floats) -> bool:
    known = values[np.isfinite(values)]
    return len(known) >= LEAST_SAMPLES and bool(np.ptp(known) > 0)


def _standard(values: Floats) -> Floats:
    """Values in standard deviations from their mean, 0 where missing."""
    known = np.isfinite(values)
    centred = np.where(known, values - values[known].mean(), 0.0)
    return np.asarray(centred / values[known].std())

"""Expected loss of a rate in closed form: kilograms short plus kilograms in excess.

With the need D normal, mean m and SD s, and a rate r (all kg B/ha):

    E short(r)  = (m - r) Phi((m - r)/s) + s phi((m - r)/s)
    E excess(r) = E short(r) - (m - r)

The loss is ``cost_ratio`` E short + E excess, the loss of a news vendor; its least lies where
the mean over a zone's cells of Phi((r - m)/s) is cost_ratio / (1 + cost_ratio).
"""

from __future__ import annotations

import numpy as np
from scipy.special import ndtr

from schorl.model.arrays import Counts, Floats

ROOT_TWO_PI = float(np.sqrt(2.0 * np.pi))
#: An SD this small (kg B/ha) is taken as certain.
CERTAIN = 1e-9
BISECTIONS = 40
#: Root-mean-square error of the predicted saving by number of samples, see `saving_range`.
SAVING_ERROR = ((10.0, 0.15), (30.0, 0.11), (60.0, 0.09), (120.0, 0.07))


def expected_short(rate: Floats | float, mean: Floats, sd: Floats) -> Floats:
    """Expected kg B/ha short of the need, elementwise."""
    spread = np.maximum(sd, CERTAIN)
    gap = mean - rate
    unit = gap / spread
    return np.asarray(gap * ndtr(unit) + spread * np.exp(-0.5 * unit**2) / ROOT_TWO_PI)


def expected_loss(
    rate: Floats | float, mean: Floats, sd: Floats, *, cost_ratio: float = 1.0
) -> Floats:
    """Expected loss in kg B/ha, elementwise; ``cost_ratio`` is the cost of a kg short."""
    short = expected_short(rate, mean, sd)
    return np.asarray(cost_ratio * short + short - (mean - rate))


def best_rate(mean: Floats, sd: Floats, *, cost_ratio: float = 1.0, most: float) -> float:
    """The one rate of least expected loss for some cells, held to 0 and ``most`` (kg B/ha).

    ``mean`` and ``sd`` are the need of the cells, shape ``(m,)``. Found by bisection of the mean
    distribution function, which rises with the rate.
    """
    share = cost_ratio / (1.0 + cost_ratio)
    spread = np.maximum(sd, CERTAIN)
    low, high = 0.0, most
    if ndtr((high - mean) / spread).mean() <= share:
        return high
    if ndtr((low - mean) / spread).mean() >= share:
        return low
    for _ in range(BISECTIONS):
        middle = 0.5 * (low + high)
        if ndtr((middle - mean) / spread).mean() < share:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


def plan_loss(
    labels: Counts, mean: Floats, sd: Floats, *, cost_ratio: float = 1.0, most: float
) -> tuple[Floats, float]:
    """Best rate of each label and the loss of the whole plan.

    ``labels`` ``(n,)`` from 0; -1 is untreated (rate 0).

    Returns
    -------
    rates, loss
        ``(k,)`` kg B/ha, and the sum over all cells of the expected loss in kg B/ha.
    """
    count = int(labels.max()) + 1 if len(labels) else 0
    rates = np.zeros(count + 1)  # the last stands for -1
    for label in range(count):
        own = labels == label
        if own.any():
            rates[label] = best_rate(mean[own], sd[own], cost_ratio=cost_ratio, most=most)
    loss = float(expected_loss(rates[labels], mean, sd, cost_ratio=cost_ratio).sum())
    return rates[:count], loss


def saving_range(saving: float, samples: int) -> tuple[float, float]:
    """A predicted saving as a range of two root-mean-square errors, held to -1 and 1.

    The error is that of predicted against real savings on simulated fields (``scripts/quality.py
    zones`` prints it); between sample numbers it is read off in the logarithm of the number.
    """
    counts, errors = np.array(SAVING_ERROR).T
    error = float(np.interp(np.log(max(samples, 1)), np.log(counts), errors))
    return max(saving - 2.0 * error, -1.0), min(saving + 2.0 * error, 1.0)

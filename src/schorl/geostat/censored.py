"""Values below a reporting limit, drawn instead of guessed.

A censored value is known to lie below its limit. Given all others it is a truncated normal under
the fitted model (kriging mean and variance), so Gibbs sweeps draw it in turn; the model is
refitted to drawn sets a few times, and the final draws are pooled by Rubin's rule (Rubin 1987):
mean of the draws' answers, mean variance plus (1 + 1/M) times the variance between draws.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr, ndtri_exp

from schorl.geostat.reml import fit_reml
from schorl.geostat.support import data_covariance, layout_of
from schorl.model.arrays import Floats
from schorl.model.variogram import Family, Support, VariogramFit

DRAWS = 24
REFITS = 4
SWEEPS = 12


@dataclass(frozen=True, eq=False, kw_only=True)
class Completed:
    """Draws of the whole data set, ``(n, DRAWS)``, and the fit they were drawn under."""

    draws: Floats
    fit: VariogramFit


def complete(
    east_north_m: Floats,
    values: Floats,
    below_limit: np.ndarray,
    *,
    random: np.random.Generator,
    family: Family | None = None,
    lab_sd: float | None = None,
    support: Sequence[Support] | None = None,
) -> Completed:
    """Fit a variogram with censored values and draw them.

    Parameters
    ----------
    east_north_m, values, below_limit
        Samples ``(n, 2)``, values ``(n,)`` (the limit itself where ``below_limit``), flags.
    random
        Source of chance.
    family, lab_sd, support
        As in ``fit_reml``.
    """
    limits = values[below_limit]
    current = values.astype(np.float64).copy()
    spread = float(values.std()) or 1.0
    current[below_limit] = limits - 0.7 * spread * random.random(len(limits))
    fits = []
    for _ in range(REFITS):
        fit = fit_reml(east_north_m, current, family=family, lab_sd=lab_sd, support=support)
        fits.append(fit)
        current = _sweeps(
            east_north_m, current, below_limit, limits, fit=fit, random=random, support=support
        )
        family = fit.family
    fit = fits[-1]
    draws = np.empty((len(values), DRAWS))
    for place in range(DRAWS):
        current = _sweeps(
            east_north_m, current, below_limit, limits, fit=fit, random=random, support=support
        )
        draws[:, place] = current
    return Completed(draws=draws, fit=fit)


def _sweeps(
    east_north_m: Floats,
    current: Floats,
    below: np.ndarray,
    limits: Floats,
    *,
    fit: VariogramFit,
    random: np.random.Generator,
    support: Sequence[Support] | None,
) -> Floats:
    """Gibbs sweeps over the censored values under one fit; the mean is integrated out."""
    layout = layout_of(east_north_m, support)
    inverse = np.linalg.inv(data_covariance(layout, fit.variogram))
    row = inverse.sum(axis=1)
    precision = inverse - np.outer(row, row) / row.sum()
    drawn = current.copy()
    for _ in range(SWEEPS):
        for place, limit in zip(np.flatnonzero(below), limits, strict=True):
            own = precision[place, place]
            mean = drawn[place] - float(precision[place] @ drawn) / own
            drawn[place] = _truncated(mean, 1.0 / np.sqrt(own), float(limit), random)
    return drawn


def _truncated(mean: float, sd: float, upper: float, random: np.random.Generator) -> float:
    """A normal draw below ``upper``, by inversion on the log scale (safe far in the tail)."""
    log_share = float(log_ndtr((upper - mean) / sd)) + float(np.log(1.0 - random.random()))
    return mean + sd * float(ndtri_exp(log_share))


def pooled(estimates: Floats, variances: Floats) -> tuple[Floats, Floats]:
    """Rubin's rule over the last axis of ``(m, draws)`` estimates, variances ``(m,)`` common."""
    draws = estimates.shape[-1]
    between = estimates.var(axis=-1, ddof=1) if draws > 1 else np.zeros(estimates.shape[:-1])
    return estimates.mean(axis=-1), variances + (1.0 + 1.0 / draws) * between

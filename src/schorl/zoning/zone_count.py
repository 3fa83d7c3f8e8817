"""How many zones: discrete classes at the samples, else the least number that saves enough.

The number is never read off the kriged maps: kriging turns steps into ramps, and every index of a
map proposes two zones or more on pure noise. Classes are looked for in the sample values
themselves with a Gaussian mixture of one shared covariance and Schwarz's criterion (BIC).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from schorl.model.arrays import Floats
from schorl.zoning.structure import GATE_P

MOST_ZONES = 5
#: The least share of the flat rate's expected loss that zones must save.
GATE_SAVING = 0.06
#: Share of the best saving that the chosen number must reach.
ENOUGH = 0.85
LEAST_SAMPLES = 15
#: Above this number of samples the mixture begins to cut gradients up: count its entropy too.
ENTROPY_ABOVE = 150
SKEWED = 1.0
OUTLIER_MADS = 3.5
MAD_TO_SD = 1.4826
MIXTURE_STARTS = 3


def sample_table(columns: Sequence[Floats], *, seed: int) -> Floats:
    """Clean sample vectors ``(n, d)`` from ``d`` columns ``(n,)``: complete rows only.

    Skewed positive columns become logarithms, values beyond 3.5 robust SDs are drawn in to that
    limit, and rounded values are spread over their rounding step: a shared covariance would
    otherwise see every step of a rounded column as a class of its own.
    """
    if not columns:
        return np.empty((0, 0))
    table = np.column_stack(columns)
    table = table[np.isfinite(table).all(axis=1)]
    random = np.random.default_rng(seed)
    cleaned = [_cleaned(column, random) for column in table.T if np.ptp(column) > 0]
    return np.column_stack(cleaned) if cleaned else np.empty((len(table), 0))


def _cleaned(column: Floats, random: np.random.Generator) -> Floats:
    column = column + _step(column) * random.uniform(-0.5, 0.5, len(column))
    if column.min() > 0 and _skewness(column) > SKEWED:
        column = np.log(column)
    middle = np.median(column)
    spread = MAD_TO_SD * float(np.median(np.abs(column - middle))) or float(column.std())
    limit = OUTLIER_MADS * spread
    return np.clip(column, middle - limit, middle + limit) / spread


def _step(column: Floats) -> float:
    gaps = np.diff(np.unique(column))
    return float(gaps.min()) if len(gaps) else 0.0


def _skewness(column: Floats) -> float:
    centred = column - column.mean()
    return float((centred**3).mean() / max(float((centred**2).mean()), 1e-300) ** 1.5)


def discrete_classes(table: Floats, *, seed: int, most: int = MOST_ZONES) -> int | None:
    """Number of discrete classes in clean sample vectors ``(n, d)``; 1 is a gradient.

    None where fewer than 15 samples (or no column) cannot say. BIC = -2 ln L + p ln n with
    p = kd + d(d+1)/2 + k - 1; above 150 samples the entropy of the classification is added
    (integrated completed likelihood).
    """
    from sklearn.mixture import GaussianMixture
    from threadpoolctl import threadpool_limits

    if len(table) < LEAST_SAMPLES or table.shape[1] == 0:
        return None
    figures = []
    with threadpool_limits(limits=1):
        for count in range(1, most + 1):
            mixture = GaussianMixture(
                count,
                covariance_type="tied",
                n_init=MIXTURE_STARTS if count > 1 else 1,
                random_state=seed,
                reg_covar=1e-4,
            ).fit(table)
            figure = float(mixture.bic(table))
            if len(table) > ENTROPY_ABOVE:
                shares = np.clip(mixture.predict_proba(table), 1e-300, 1.0)
                figure -= 2.0 * float((shares * np.log(shares)).sum())
            figures.append(figure)
    return 1 + int(np.argmin(figures))


def enough_zones(savings: Mapping[int, float]) -> int:
    """The smallest number of zones with at least 85 % of the best saving; 1 where none saves."""
    best = max(savings.values(), default=0.0)
    if best <= 0:
        return 1
    return min(count for count, saving in savings.items() if saving >= ENOUGH * best)


def gate_open(savings: Mapping[int, float], p: float) -> bool:
    """Whether zones are worth drawing.

    Need and soil are structured (p at most 0.02), and the best map saves at least 6 % of the flat
    rate's expected loss.
    """
    return p <= GATE_P and max(savings.values(), default=0.0) >= GATE_SAVING


def choose_count(savings: Mapping[int, float], classes: int | None) -> int:
    """Number of zones once the gate is open.

    As many as there are discrete classes where that number saves enough too, else the smallest
    number with 85 % of the best saving.
    """
    if classes is not None and classes > 1 and savings.get(classes, 0.0) >= GATE_SAVING:
        return classes
    return enough_zones({count: saving for count, saving in savings.items() if count > 1})

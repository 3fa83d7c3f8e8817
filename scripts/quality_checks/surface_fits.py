"""Three ways from samples to predictions: Schorl, PyKrige's own fit, a least-squares variogram.

Each way is a function (places, values, supports) -> Model; a Model predicts single soil samples,
noise included, as a normal or lognormal distribution.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.optimize import least_squares
from scipy.special import ndtr
from scipy.stats import norm

from schorl.geostat import Support, Variogram, krige, leave_one_out
from schorl.geostat.reml import fit_best_transform
from schorl.steps.mapping import prediction_factor, weak_below

Z90 = float(norm.ppf(0.95))


@dataclass(frozen=True, eq=False, kw_only=True)
class Model:
    """A variogram on a scale; ``verdict`` only where the way gives one."""

    variogram: Variogram
    log: bool
    verdict: str = ""
    factor: float = 1.0  # of the variance at new places

    def scale(self, values):
        return np.log(values) if self.log else values

    def left_out(self, places, values, supports):
        """Distribution of each sample given the others: location and SD on the fitted scale."""
        scaled = self.scale(values)
        residual, variance = leave_one_out(places, scaled, self.variogram, support=supports)
        return scaled - residual, np.sqrt(variance)

    def predict(self, places, values, supports, targets):
        """Distribution of new point samples."""
        location, variance = krige(
            places, self.scale(values), targets, self.variogram, support=supports
        )
        return location, np.sqrt(self.factor * (variance + self.variogram.nugget))


def schorl(places, values, supports: Sequence[Support] | None = None) -> Model:
    """REML with weak priors, scale by likelihood, verdict from leave-one-out on the same data."""
    transform, fit = fit_best_transform(values, places, support=supports)
    model = Model(variogram=fit.variogram, log=transform == "log")
    location, _ = model.left_out(places, values, supports)
    skill = 1 - np.mean((model.scale(values) - location) ** 2) / np.var(model.scale(values), ddof=1)
    if fit.verdict == "no pattern" or len(values) < 10 or skill < 0:
        verdict = "no pattern"
    else:
        verdict = "weak pattern" if skill < weak_below(len(values)) else "pattern found"
    return Model(
        variogram=fit.variogram, log=model.log, verdict=verdict,
        factor=prediction_factor(len(values)),
    )  # fmt: skip


def pykrige(places, values, supports=None) -> Model:
    """PyKrige's spherical with its own automatic fit (six lags, soft L1 loss)."""
    from pykrige.ok import OrdinaryKriging

    about = places.mean(axis=0)
    peer = OrdinaryKriging(*(places - about).T, values, variogram_model="spherical")
    sill, reach, nugget = (float(one) for one in peer.variogram_model_parameters)
    return _model(nugget, sill, reach, values)


def least_squares_fit(places, values, supports=None) -> Model:
    """Binned variogram to a third of the diagonal, 15 bins, weights pairs / lag², spherical.

    Starts as gstat's documentation has it (range a third of the largest lag, nugget from the first
    three bins, sill from the last five); nugget and sill are held at 0 or more, which is kinder
    than the original.
    """
    first, second = np.triu_indices(len(values), 1)
    lag = np.linalg.norm(places[first] - places[second], axis=1)
    half = 0.5 * (values[first] - values[second]) ** 2
    cutoff = float(np.linalg.norm(np.ptp(places, axis=0))) / 3
    place = np.floor(lag / cutoff * 15).astype(int)
    bins = [place == one for one in range(15) if (place == one).any()]
    lags = np.array([lag[one].mean() for one in bins])
    gamma = np.array([half[one].mean() for one in bins])
    weight = np.sqrt([one.sum() for one in bins]) / np.maximum(lags, 1e-9)

    def misfit(three):
        u = np.minimum(lags / np.exp(three[2]), 1)
        return weight * (three[0] + three[1] * (1.5 * u - 0.5 * u**3) - gamma)

    start = [gamma[:3].mean(), max(gamma[-5:].mean() - gamma[:3].mean(), 1e-6 * values.var()),
             np.log(lags.max() / 3)]  # fmt: skip
    bounds = ([0, 0, -10], [np.inf, np.inf, 25])
    nugget, sill, log_range = least_squares(misfit, start, bounds=bounds).x
    return _model(float(nugget), float(sill), float(np.exp(log_range)), values)


def _model(nugget, sill, reach, values) -> Model:
    tiny = 1e-9 * float(values.var())  # a singular system would stop the comparison
    variogram = Variogram(
        family="spherical", nugget=max(nugget, tiny), partial_sill=max(sill, 0.0),
        practical_range_m=max(reach, 1e-6),
    )  # fmt: skip
    return Model(variogram=variogram, log=False)


WAYS = {"schorl": schorl, "pykrige": pykrige, "least sq": least_squares_fit}


@dataclass(frozen=True, slots=True, kw_only=True)
class Scores:
    """How well distributions met what was measured."""

    rmse: float
    crps: float
    msdr: float
    coverage: float
    skill: float
    verdict: str = ""


def scores(truth, location, sd, *, log: bool, verdict: str = "") -> Scores:
    """Scores in the unit of the values; the squared deviation ratio on the fitted scale.

    A left-out zero has no logarithm: there it counts as half the least positive value.
    """
    mean = np.exp(location + 0.5 * sd**2) if log else location
    on_scale = np.log(np.maximum(truth, 0.5 * truth[truth > 0].min())) if log else truth
    z = (on_scale - location) / sd
    rmse = float(np.sqrt(np.mean((truth - mean) ** 2)))
    return Scores(
        rmse=rmse,
        crps=float(np.mean(_crps(truth, location, sd, z, log=log))),
        msdr=float(np.mean(z**2)),
        coverage=float(np.mean(np.abs(z) <= Z90)),
        skill=1 - rmse**2 / float(np.var(truth, ddof=1)),
        verdict=verdict,
    )


def _crps(truth, location, sd, z, *, log: bool):
    """Closed forms: normal (Gneiting & Raftery 2007), lognormal (Baran & Lerch 2015)."""
    if not log:
        return sd * (z * (2 * ndtr(z) - 1) + 2 * norm.pdf(z) - 1 / np.sqrt(np.pi))
    mean = np.exp(location + 0.5 * sd**2)
    return truth * (2 * ndtr(z) - 1) - 2 * mean * (ndtr(z - sd) + ndtr(sd / np.sqrt(2)) - 1)

"""Awkward samples are handled by name; priors, censored values, mean of log surfaces."""

from __future__ import annotations

import numpy as np
import pytest

from schorl.geostat import Variogram, fit_reml, krige
from schorl.geostat.censored import complete

RANDOM = np.random.default_rng(8)
PLACES = RANDOM.uniform(0, 500, (40, 2))


@pytest.mark.parametrize(
    ("places", "values", "words"),
    [
        (PLACES[:3], np.array([1.0, 2.0, 3.0]), "3 samples"),
        (PLACES, np.full(40, 0.7), "the same"),
        (np.tile(PLACES[:1], (40, 1)), RANDOM.normal(size=40), "one place"),
    ],
)
def test_no_pattern_has_its_reason(places, values, words):
    fit = fit_reml(places, values)
    assert fit.verdict == "no pattern"
    assert words in fit.reason


def test_samples_on_a_line_still_fit():
    line = np.column_stack([np.linspace(0, 800, 30), np.full(30, 5.0)])
    fit = fit_reml(line, np.sin(line[:, 0] / 120))
    assert np.isfinite(fit.log_likelihood)
    assert fit.partial_sill > 0


def test_two_samples_in_one_place_without_nugget_are_named():
    places = np.vstack([PLACES[:5], PLACES[:1]])
    model = Variogram(family="spherical", nugget=0.0, partial_sill=1.0, practical_range_m=100.0)
    with pytest.raises(ValueError, match="one place"):
        krige(places, np.arange(6.0), PLACES[:2], model)


def test_bad_variograms_are_refused():
    with pytest.raises(ValueError, match="family"):
        Variogram(family="bessel", nugget=0, partial_sill=1, practical_range_m=1)
    with pytest.raises(ValueError, match="laboratory"):
        Variogram(
            family="spherical", nugget=0.1, partial_sill=1, practical_range_m=1, lab_variance=0.2
        )


def simulated(random, count, below):
    places = random.uniform(0, 600, (count, 2))
    gap = np.linalg.norm(places[:, None] - places[None], axis=2)
    covariance = 0.25 * np.exp(-3 * gap / 300) + 0.06 * np.eye(count)
    logs = np.linalg.cholesky(covariance) @ random.normal(size=count) - 0.4
    limit = np.quantile(logs, below)
    return places, logs, np.maximum(logs, limit), logs < limit


def test_censored_values_beat_half_the_limit():
    random = np.random.default_rng(21)
    ours, half = [], []
    for _ in range(12):
        places, truth, seen, below = simulated(random, 40, 0.3)
        done = complete(places, seen, below, random=random)
        ours.append(np.exp(done.draws).mean() / np.exp(truth).mean() - 1)
        guess = np.where(below, np.exp(seen) / 2, np.exp(seen))
        half.append(guess.mean() / np.exp(truth).mean() - 1)
    assert abs(np.mean(ours)) < 0.03
    assert abs(np.mean(ours)) < abs(np.mean(half))

"""Variograms by residual maximum likelihood (REML), made for 10 to a few hundred samples.

Why not a line through a binned variogram: at field sizes the bins hold few pairs and the fit
often ends at no nugget, an endless range or a singular system. REML (Patterson & Thompson 1971,
Biometrika 58:545-554; for soil: Lark, Cullis & Welham 2006, Eur. J. Soil Sci. 57:787-799) uses all
pairs, and two weak priors keep small samples sane; they can be switched off.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import minimize, minimize_scalar

from schorl.geostat.covariance import empirical_variogram
from schorl.geostat.profile import Peak, Profile, restricted_log_likelihood
from schorl.geostat.support import Layout, layout_of, noise_of, structured_matrix
from schorl.geostat.threads import one_blas_thread
from schorl.model.arrays import Floats
from schorl.model.variogram import Family, Support, VariogramFit

FAMILIES: tuple[Family, ...] = ("spherical", "exponential", "matern32")
GRID_RANGES = 52
#: Ranges tried, as shares of the largest distance between samples.
SHORTEST, LONGEST = 0.02, 30.0
MOST_FOR_FIT = 600  # beyond this many samples the fit takes an evenly spread subset
ANISOTROPY_FROM = 100


@dataclass(frozen=True, eq=False, kw_only=True)
class _Best:
    family: Family
    range_m: float
    peak: Peak


def fit_reml(
    east_north_m: Floats,
    values: Floats,
    *,
    family: Family | None = None,
    priors: bool = True,
    lab_sd: float | None = None,
    support: Sequence[Support] | None = None,
) -> VariogramFit:
    """Fit a variogram by REML.

    Parameters
    ----------
    east_north_m
        Sample places, shape ``(n, 2)``, metres.
    values
        Shape ``(n,)``, on the scale that is to be kriged (for instance logarithms).
    family
        "spherical", "exponential", "matern32", or None for the most likely.
    priors
        Weak priors on range and structured share; off for checks against other programs.
    lab_sd
        Laboratory standard deviation on the scale of ``values``; its square takes its part of the
        nugget first.
    support
        One ``Support`` a sample; None means points with equal cores.

    Returns
    -------
    VariogramFit
        With the restricted log-likelihood (without priors) and a verdict word: "no pattern" where
        values are constant, samples are fewer than 4 or in one place, or the structured share is
        under 5 %; else "pattern found" (whether it predicts is for leave-one-out to say).

    Raises
    ------
    ValueError
        Shapes do not fit, or values are not finite.
    """
    values = np.asarray(values, dtype=np.float64)
    layout = layout_of(east_north_m, support)
    if values.shape != (len(layout.starts),):
        raise ValueError(f"values of shape {values.shape} for {len(layout.starts)} samples")
    if not np.isfinite(values).all():
        raise ValueError("values must be finite; handle missing and censored values first")
    lab_variance = 0.0 if lab_sd is None else float(lab_sd) ** 2
    excuse = _no_pattern_excuse(layout, values)
    if excuse:
        return _flat_fit(values, lab_variance, excuse)
    with one_blas_thread():
        (fit,) = _fits(layout, values[:, None], family=family, priors=priors, lab=(lab_variance,))
    return _with_bins(fit, east_north_m, values)


def _with_bins(fit: VariogramFit, east_north_m: Floats, values: Floats) -> VariogramFit:
    lag, gamma, pairs = empirical_variogram(np.asarray(east_north_m, float), values)
    return replace(fit, lag_m=lag, semivariance=gamma, pairs=pairs)


def best_transform(
    values: Floats,
    east_north_m: Floats,
    *,
    priors: bool = True,
    support: Sequence[Support] | None = None,
) -> str:
    """Choose "identity" or "log" by likelihood, whatever the unit of the values.

    Compares the restricted log-likelihood of the values with that of their logarithms less
    ((n-1)/n) sum(log value): REML has n - 1 degrees of freedom, and with this Jacobian a change of
    unit moves both sides alike. A value at or below zero leaves only "identity".
    """
    transform, _ = fit_best_transform(values, east_north_m, priors=priors, support=support)
    return transform


def fit_best_transform(
    values: Floats,
    east_north_m: Floats,
    *,
    priors: bool = True,
    lab_sd: tuple[float, float] = (0.0, 0.0),
    support: Sequence[Support] | None = None,
) -> tuple[str, VariogramFit]:
    """The transform of ``best_transform`` with the fit it was chosen by.

    Both scales share the decompositions of the sample layout. ``lab_sd`` is the laboratory
    standard deviation on the scale of the values and on that of their logarithms.
    """
    values = np.asarray(values, dtype=np.float64)
    layout = layout_of(east_north_m, support)
    excuse = _no_pattern_excuse(layout, values)
    lab = (lab_sd[0] ** 2, lab_sd[1] ** 2)
    if excuse:
        return "identity", _flat_fit(values, lab[0], excuse)
    both = values.min() > 0
    columns = np.column_stack([values, np.log(values)]) if both else values[:, None]
    with one_blas_thread():
        fits = _fits(layout, columns, family=None, priors=priors, lab=lab[: columns.shape[1]])
    chosen = 0
    if both:
        count = len(values)
        jacobian = (count - 1) / count * float(np.log(values).sum())
        chosen = int(fits[1].log_likelihood - jacobian > fits[0].log_likelihood)
    fit = _with_bins(fits[chosen], east_north_m, columns[:, chosen])
    return ("identity", "log")[chosen], fit


def _no_pattern_excuse(layout: Layout, values: Floats) -> str:
    if len(values) < 4:
        return f"{len(values)} samples say nothing about a pattern"
    if np.ptp(values) <= 1e-12 * max(abs(float(values.mean())), 1e-300):
        return "all values are the same"
    if np.ptp(layout.points_m, axis=0).max() == 0:
        return "all samples lie in one place"
    return ""


def _flat_fit(values: Floats, lab_variance: float, reason: str) -> VariogramFit:
    variance = float(values.var(ddof=1)) if len(values) > 1 else 0.0
    return VariogramFit(
        family="spherical",
        nugget=variance,
        partial_sill=0.0,
        practical_range_m=1.0,
        mean=float(values.mean()) if len(values) else float("nan"),
        log_likelihood=float("nan"),
        verdict="no pattern",
        lab_variance=min(lab_variance, variance),
        reason=reason,
    )


def _fits(
    layout: Layout,
    columns: Floats,
    *,
    family: Family | None,
    priors: bool,
    lab: tuple[float, ...],
) -> list[VariogramFit]:
    """A fit for each column of values; all share the decompositions of the layout."""
    subset, kept = _thinned(layout, columns)
    tried: list[Family] = [family] if family else list(FAMILIES)
    longest = _longest(subset)
    profiles = [
        Profile(subset, kept, family=one, priors=priors, longest_m=longest) for one in tried
    ]
    return [
        _fit(subset, kept[:, place], profiles, column=place, lab_variance=lab[place],
             refine=priors and family is None)
        for place in range(columns.shape[1])
    ]  # fmt: skip


def _fit(
    subset: Layout,
    values: Floats,
    profiles: Sequence[Profile],
    *,
    column: int,
    lab_variance: float,
    refine: bool,
) -> VariogramFit:
    found = [_search(profile, column) for profile in profiles]
    best = max(found, key=lambda one: one.peak.objective)
    nugget = (1.0 - best.peak.share) * best.peak.total_variance
    sill = best.peak.share * best.peak.total_variance
    start = (nugget, sill, best.range_m)
    likelihood = best.peak.log_likelihood
    if not subset.equal_cores:
        start, likelihood = _unequal(
            subset, values, best, priors=profiles[0].priors, longest_m=profiles[0].longest_m,
            lab_variance=lab_variance,
        )  # fmt: skip
    fit = VariogramFit(
        family=best.family,
        nugget=start[0],
        partial_sill=start[1],
        practical_range_m=start[2],
        mean=_mean(subset, values, best.family, start, lab_variance),
        log_likelihood=likelihood,
        verdict="pattern found",
        lab_variance=min(lab_variance, start[0]),
    )
    if len(values) >= ANISOTROPY_FROM and refine:
        fit = _anisotropic(subset, values, fit, lab_variance)
    return _judged(fit)


def _judged(fit: VariogramFit) -> VariogramFit:
    if fit.structured_share >= 0.05:
        return fit
    share = f"{100 * fit.structured_share:.0f} %"
    return replace(
        fit, verdict="no pattern", reason=f"only {share} of the variance depends on place"
    )


def _thinned(layout: Layout, values: Floats) -> tuple[Layout, Floats]:
    """An evenly spread subset of a large point set; the whole set where it is small."""
    if len(values) <= MOST_FOR_FIT or not layout.all_points:
        return layout, values
    order = np.lexsort((layout.points_m[:, 0], layout.points_m[:, 1]))
    chosen = np.sort(order[np.linspace(0, len(order) - 1, MOST_FOR_FIT).astype(np.intp)])
    points = layout.points_m[chosen]
    return layout_of(points, None), values[chosen]


def _longest(layout: Layout) -> float:
    from scipy.spatial.distance import pdist

    centres = layout.averaged(layout.points_m)
    return float(pdist(centres).max(initial=0.0)) or float(np.ptp(layout.points_m, axis=0).max())


def _search(profile: Profile, column: int) -> _Best:
    """Grid over ranges (profiles of the spherical have several maxima), then polish the best."""
    longest_m = profile.longest_m
    grid = np.geomspace(SHORTEST, LONGEST, GRID_RANGES) * longest_m
    heights = np.array([profile.peak(one, column).objective for one in grid])
    best_range, best_height = float(grid[heights.argmax()]), float(heights.max())
    for place in _maxima(heights):
        low, high = grid[max(place - 1, 0)], grid[min(place + 1, len(grid) - 1)]
        polished = minimize_scalar(
            lambda log_range: -profile.peak(float(np.exp(log_range)), column).objective,
            bounds=(np.log(low), np.log(high)),
            method="bounded",
            options={"xatol": 1e-6, "maxiter": 40},
        )
        if -polished.fun > best_height:
            best_range, best_height = float(np.exp(polished.x)), float(-polished.fun)
    return _Best(family=profile.family, range_m=best_range, peak=profile.peak(best_range, column))


def _maxima(heights: Floats, *, most: int = 3) -> list[int]:
    """Places of local maxima, the highest first."""
    padded = np.concatenate([[-np.inf], heights, [-np.inf]])
    tops = np.flatnonzero((padded[1:-1] >= padded[:-2]) & (padded[1:-1] >= padded[2:]))
    return [int(one) for one in tops[np.argsort(-heights[tops])][:most]]


def _unequal(
    layout: Layout,
    values: Floats,
    best: _Best,
    *,
    priors: bool,
    longest_m: float,
    lab_variance: float,
) -> tuple[tuple[float, float, float], float]:
    """Noises differ (cores): polish nugget, partial sill and range together, all free."""
    profile = Profile(
        layout, values[:, None], family=best.family, priors=priors, longest_m=longest_m
    )

    def likelihood(log_three: Floats) -> float:
        nugget, sill, range_m = np.exp(log_three)
        matrix = sill * structured_matrix(layout, best.family, range_m)
        noise = noise_of(layout, nugget=nugget, lab_variance=lab_variance)
        matrix[np.diag_indices_from(matrix)] += noise
        return restricted_log_likelihood(matrix, values)

    def loss(log_three: Floats) -> float:
        logit = float(log_three[1] - log_three[0])
        prior = profile.penalty(float(np.exp(log_three[2])), np.array([logit]))[0]
        return -(likelihood(log_three) + float(prior))

    total = best.peak.total_variance
    share = float(np.clip(best.peak.share, 0.01, 0.99))
    start = np.log([(1.0 - share) * total, share * total, best.range_m])
    limits = [
        (np.log(total) - 9, np.log(total) + 2),
        (np.log(total) - 9, np.log(total) + 2),
        (np.log(SHORTEST * longest_m), np.log(LONGEST * longest_m)),
    ]
    done = minimize(
        loss, start, method="Nelder-Mead", bounds=limits, options={"xatol": 1e-5, "fatol": 1e-7}
    )
    nugget, sill, range_m = (float(one) for one in np.exp(done.x))
    return (nugget, sill, range_m), likelihood(done.x)


def _mean(
    layout: Layout,
    values: Floats,
    family: Family,
    three: tuple[float, float, float],
    lab_variance: float,
) -> float:
    """Generalised least-squares mean under the fitted covariance."""
    nugget, sill, range_m = three
    matrix = sill * structured_matrix(layout, family, range_m)
    matrix[np.diag_indices_from(matrix)] += noise_of(
        layout, nugget=nugget, lab_variance=lab_variance
    )
    matrix[np.diag_indices_from(matrix)] += 1e-10 * float(np.trace(matrix)) / len(matrix)
    weights = np.linalg.solve(matrix, np.ones(len(values)))
    return float(weights @ values / weights.sum())


def _anisotropic(
    layout: Layout, values: Floats, fit: VariogramFit, lab_variance: float
) -> VariogramFit:
    """Try geometric anisotropy; keep it only where the likelihood gains more than its price.

    Price: two parameters under the Bayesian information criterion, log(n) in all.
    """

    def at(stretch: float, degrees: float, range_m: float) -> tuple[float, VariogramFit]:
        trial = replace(fit, stretch=stretch, stretch_deg=degrees, practical_range_m=range_m)
        turned = layout.turned(trial.variogram)
        profile = Profile(
            turned, values[:, None], family=fit.family, priors=True, longest_m=_longest(turned)
        )
        peak = profile.peak(range_m)
        total = peak.total_variance
        return peak.log_likelihood, replace(
            trial,
            nugget=(1 - peak.share) * total,
            partial_sill=peak.share * total,
            log_likelihood=peak.log_likelihood,
            lab_variance=min(lab_variance, (1 - peak.share) * total),
        )

    trials = [
        at(stretch, degrees, fit.practical_range_m * factor)
        for stretch in (1.5, 2.5)
        for degrees in (0.0, 30.0, 60.0, 90.0, 120.0, 150.0)
        for factor in (1.0, 1.6)
    ]
    likelihood, best = max(trials, key=lambda one: one[0])
    if likelihood - fit.log_likelihood < 0.5 * np.log(len(values)):
        return fit  # not even close: spare the polish
    done = minimize(
        lambda p: -at(float(np.exp(abs(p[0]))), float(p[1] % 180.0), float(np.exp(p[2])))[0],
        [np.log(best.stretch), best.stretch_deg, np.log(best.practical_range_m)],
        method="Nelder-Mead",
        options={"xatol": 1e-2, "fatol": 1e-3, "maxfev": 60},
    )
    polished = at(float(np.exp(abs(done.x[0]))), float(done.x[1] % 180.0), float(np.exp(done.x[2])))
    likelihood, best = max([(likelihood, best), polished], key=lambda one: one[0])
    gained = likelihood - fit.log_likelihood > np.log(len(values))
    return best if gained and best.stretch < 6.0 else fit

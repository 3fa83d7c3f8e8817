"""The restricted likelihood as a profile over range and structured share.

Where all noises are equal the data covariance is v (s A(a) + (1 - s) I): total variance v,
structured share s, range a. On contrasts (orthonormal, orthogonal to the constant) one eigenvalue
decomposition for each range gives the likelihood for every share at once, v profiled out:

    -2 l = (n-1) log(2 pi v) + sum log(s lambda + 1 - s) + log n + (n-1),  v = q / (n-1)

which equals log|R| + log(1'R⁻¹1) + ... of Patterson & Thompson 1971 (log|Q'RQ| + log n =
log|R| + log(1'R⁻¹1)). Several transformed copies of the values share the decomposition.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from schorl.geostat.covariance import distances
from schorl.geostat.support import Layout, structured_matrix
from schorl.model.arrays import Floats
from schorl.model.variogram import Family

#: Weak priors (a proposal of this program): log range ~ N(log(D/6), 1), logit share ~ N(0.8, 1.5).
RANGE_PRIOR_SD = 1.0
RANGE_PRIOR_FRACTION = 6.0
SHARE_PRIOR_MEAN = 0.8
SHARE_PRIOR_SD = 1.5
EDGE = 9.0  # |logit| beyond which a share counts as 0 or 1


@dataclass(frozen=True, eq=False, kw_only=True)
class Peak:
    """The best share at one range for one column of values."""

    objective: float
    log_likelihood: float
    share: float
    total_variance: float


def contrasts(count: int) -> Floats:
    """Orthonormal basis ``(n, n - 1)`` orthogonal to the constant (Helmert)."""
    basis = np.zeros((count, count - 1))
    for k in range(1, count):
        basis[:k, k - 1] = 1.0 / np.sqrt(k * (k + 1.0))
        basis[k, k - 1] = -k / np.sqrt(k * (k + 1.0))
    return basis


class Profile:
    """Likelihood of one or more columns of values over range and share."""

    def __init__(
        self, layout: Layout, columns: Floats, *, family: Family, priors: bool, longest_m: float
    ) -> None:
        self.layout = layout
        self.family = family
        self.priors = priors
        self.longest_m = longest_m
        self.count = len(layout.starts)
        self.basis = contrasts(self.count)
        self.projected = self.basis.T @ columns
        self.gaps_m = distances(layout.points_m, layout.points_m)
        self._decomposed: dict[float, tuple[Floats, Floats]] = {}

    def decompose(self, range_m: float) -> tuple[Floats, Floats]:
        """Eigenvalues ``(n-1,)`` and squared scores ``(n-1, columns)`` at a range."""
        if range_m not in self._decomposed:
            matrix = structured_matrix(self.layout, self.family, range_m, gaps_m=self.gaps_m)
            values, vectors = np.linalg.eigh(self.basis.T @ matrix @ self.basis)
            scores = vectors.T @ self.projected
            self._decomposed[range_m] = (np.maximum(values, 0.0), scores * scores)
        return self._decomposed[range_m]

    def log_likelihood(self, range_m: float, shares: Floats, column: int) -> tuple[Floats, Floats]:
        """Restricted log-likelihood and total variance for each share."""
        eigenvalues, squares = self.decompose(range_m)
        spread = shares[:, None] * eigenvalues[None, :] + (1.0 - shares[:, None])
        spread = np.maximum(spread, 1e-12)
        freedom = self.count - 1
        total = (squares[:, column][None, :] / spread).sum(axis=1) / freedom
        total = np.maximum(total, 1e-300)
        twice = (
            freedom * np.log(2.0 * np.pi * total)
            + np.log(spread).sum(axis=1)
            + np.log(self.count)
            + freedom
        )
        return -0.5 * twice, total

    def penalty(self, range_m: float, logits: Floats) -> Floats:
        """Log prior of range and share, up to a constant; 0 where priors are off."""
        if not self.priors:
            return np.zeros(len(logits))
        range_z = (np.log(range_m) - np.log(self.longest_m / RANGE_PRIOR_FRACTION)) / RANGE_PRIOR_SD
        share_z = (logits - SHARE_PRIOR_MEAN) / SHARE_PRIOR_SD
        return np.asarray(-0.5 * (range_z**2 + share_z**2))

    def peak(self, range_m: float, column: int = 0) -> Peak:
        """Best share at a range: a grid of logits, refined around its best point."""
        centre, width = 0.0, EDGE
        best: Peak | None = None
        for _ in range(6):
            logits = np.clip(centre + np.linspace(-width, width, 25), -EDGE, EDGE)
            shares = self._shares(logits)
            values, totals = self.log_likelihood(range_m, shares, column)
            objective = values + self.penalty(range_m, logits)
            top = int(np.argmax(objective))
            if best is None or objective[top] >= best.objective:
                best = Peak(
                    objective=float(objective[top]),
                    log_likelihood=float(values[top]),
                    share=float(shares[top]),
                    total_variance=float(totals[top]),
                )
            centre, width = float(logits[top]), width / 8.0
        assert best is not None
        return best

    def _shares(self, logits: Floats) -> Floats:
        shares = 1.0 / (1.0 + np.exp(-logits))
        if not self.priors:
            shares = np.where(logits <= -EDGE, 0.0, np.where(logits >= EDGE, 1.0, shares))
        return shares


def restricted_log_likelihood(covariance: Floats, values: Floats) -> float:
    """Restricted log-likelihood of values ``(n,)`` under a covariance ``(n, n)``, mean unknown.

    -1/2 [(n-1) log(2 pi) + log|V| + log(1'V⁻¹1) + (z-m)'V⁻¹(z-m)]; -inf where V is singular.
    """
    try:
        lower = np.linalg.cholesky(covariance)
    except np.linalg.LinAlgError:
        return -np.inf
    both = np.linalg.solve(lower, np.column_stack([np.ones(len(values)), values]))
    ones, scores = both[:, 0], both[:, 1]
    weight = float(ones @ ones)
    residual = scores - ones * float(ones @ scores) / weight
    count = len(values)
    return -0.5 * float(
        (count - 1) * np.log(2.0 * np.pi)
        + 2.0 * float(np.log(np.diag(lower)).sum())
        + np.log(weight)
        + float(residual @ residual)
    )

"""A kriged soil property on the cells of a field."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from schorl.model.arrays import Floats, lock
from schorl.model.field import CellGrid
from schorl.model.variogram import VariogramFit


class Verdict(StrEnum):
    """How far a fitted surface may be trusted."""

    PATTERN = "pattern found"
    WEAK = "weak pattern"
    NONE = "no pattern"
    CONSTANT = "constant, declared"


@dataclass(frozen=True, eq=False, kw_only=True)
class LeaveOneOut:
    """Leave-one-out figures of a surface, in the property's own unit.

    ``predicted`` and ``observed`` ``(n,)``; ``z`` = standardised residuals on the fitted scale.
    ``skill`` = 1 - MSE / variance; ``msdr`` = mean squared deviation ratio; ``coverage_90`` = share
    of the samples inside their own 90 % interval.
    """

    observed: Floats
    predicted: Floats
    z: Floats
    rmse: float
    skill: float
    msdr: float
    coverage_90: float

    def __post_init__(self) -> None:
        lock(self, observed=self.observed, predicted=self.predicted, z=self.z)


@dataclass(frozen=True, eq=False, kw_only=True)
class Audit:
    """The independent second opinion on one surface."""

    by: str  # "PyKrige" or "dense solve"
    cells: int
    largest_difference: float  # as a share of the data's standard deviation


@dataclass(frozen=True, eq=False, kw_only=True)
class Surface:
    """One soil property on the cells, shape ``(n_cells,)`` each.

    ``estimate`` is the expected value of a cell in the property's unit. ``location``, ``map_sd``
    and ``decision_sd`` describe its distribution on the fitted scale: normal where ``transform``
    is "identity", lognormal where it is "log" (location and SDs are then of the logarithm). The
    SDs are widened for the samples the variogram was fitted to; the estimate is not.
    ``map_sd`` is the block kriging SD without nugget (for features, audit and maps);
    ``decision_sd`` adds real short-range variation that plants meet (for every chance and rate).
    A declared constant has ``fit`` and ``quality`` None and both SDs 0.
    """

    name: str
    unit: str
    grid: CellGrid
    estimate: Floats
    location: Floats
    map_sd: Floats
    decision_sd: Floats
    transform: str
    verdict: Verdict
    fit: VariogramFit | None = None
    quality: LeaveOneOut | None = None
    audit: Audit | None = None
    reason: str = ""  # why this verdict, in plain words

    def __post_init__(self) -> None:
        lock(
            self,
            estimate=self.estimate,
            location=self.location,
            map_sd=self.map_sd,
            decision_sd=self.decision_sd,
        )

    @property
    def map_sd_in_unit(self) -> Floats:
        """``map_sd`` in the property's own unit, shape ``(n_cells,)``.

        On a logarithmic scale that of a lognormal with mean m, m sqrt(exp(s²) - 1).
        """
        if self.transform == "log":
            return self.estimate * np.sqrt(np.expm1(self.map_sd**2))
        return self.map_sd

    @property
    def constant(self) -> bool:
        """Whether the property was declared as one number for the field."""
        return self.verdict is Verdict.CONSTANT

"""Plans side by side: one flat rate against maps of two to five zones, after every limit."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from schorl.model.arrays import Counts, Flags, Floats
from schorl.model.prescription import CellNeed, PlanOutcome
from schorl.zoning.loss import expected_loss

Outcome = Callable[[Counts], PlanOutcome]


@dataclass(frozen=True, eq=False, kw_only=True)
class Judge:
    """Compares plans with the flat rate by an outcome that knows all limits.

    ``flat_kg`` is the flat plan's expected loss over treated ground; ``untreated_kg`` what every
    plan alike loses on ground that gets nothing.
    """

    outcome: Outcome
    use: Flags
    flat_kg: float
    untreated_kg: float

    def saving(self, labels: Counts) -> float:
        """Share of the flat rate's loss that a plan saves; ``labels`` as `PlanOutcome` takes."""
        if self.flat_kg <= 0:
            return 0.0
        return 1.0 - (self.outcome(labels).loss_kg - self.untreated_kg) / self.flat_kg


def judge_of(outcome: Outcome, need: CellNeed, use: Flags) -> Judge:
    """A judge over the cells in ``use``, shape ``(n_cells,)``.

    The loss on untreated ground is the same in all plans. It is told apart by its share of the
    closed-form loss under no boron at all, so that it does not depend on how costs are weighed.
    """
    flat = outcome(np.where(use, 0, -1).astype(np.intp)).loss_kg
    untreated = 0.0
    if not use.all():
        nothing = expected_loss(0.0, need.need_mean_kg_ha, need.need_sd_kg_ha)
        whole = float(nothing.sum())
        share = float(nothing[~use].sum()) / whole if whole > 0 else 0.0
        untreated = share * outcome(np.full(len(use), -1, dtype=np.intp)).loss_kg
    return Judge(
        outcome=outcome, use=use, flat_kg=max(flat - untreated, 0.0), untreated_kg=untreated
    )


def savings_of(judge: Judge, maps: Mapping[int, Counts]) -> dict[int, float]:
    """Saving of the map of each number of zones; 1 is the flat rate and saves nothing."""
    return {1: 0.0} | {count: judge.saving(labels) for count, labels in maps.items()}


def mean_by(labels: Counts, values: Floats, count: int) -> Floats:
    """Mean of per-cell values in each of ``count`` labels; NaN where a label has no cell."""
    known = labels >= 0
    total = np.bincount(labels[known], weights=values[known], minlength=count)
    cells = np.bincount(labels[known], minlength=count)
    with np.errstate(invalid="ignore"):
        return np.asarray(np.where(cells > 0, total / np.maximum(cells, 1), np.nan))


def compact(labels: Counts) -> Counts:
    """The same labels without gaps in their numbering; -1 stays."""
    kinds = np.unique(labels[labels >= 0])
    fresh = np.searchsorted(kinds, labels).astype(np.intp)
    return np.asarray(np.where(labels >= 0, fresh, -1))

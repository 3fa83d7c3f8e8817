"""Zones of two seasons: which is which, and how far the maps agree, by area.

All figures rest on the transition table: area (ha) of each zone of the earlier map in each zone of
the later one.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import shapely

from schorl.model.arrays import Floats, lock
from schorl.model.field import Area

#: Least overlap (intersection over union) for two zones to be the same one; a choice, not tested.
LEAST_OVERLAP = 0.20
M2_PER_HA = 10_000.0


@dataclass(frozen=True, eq=False, kw_only=True)
class ZoneMatch:
    """Which later zone is which earlier one.

    ``pairs`` holds positions (earlier, later) with their intersection over union in ``overlap``;
    ``gone`` and ``fresh`` the positions without a partner; ``transition_ha`` the table
    ``(earlier, later)``.
    """

    pairs: tuple[tuple[int, int], ...]
    overlap: tuple[float, ...]
    gone: tuple[int, ...]
    fresh: tuple[int, ...]
    transition_ha: Floats

    def __post_init__(self) -> None:
        lock(self, transition_ha=self.transition_ha)


def transition_ha(earlier: Sequence[Area], later: Sequence[Area]) -> Floats:
    """Area (ha) of each earlier zone in each later one, shape ``(len(earlier), len(later))``.

    Both in the same metric system.
    """
    table = np.zeros((len(earlier), len(later)))
    tree = shapely.STRtree(list(later))
    first, second = tree.query(list(earlier), predicate="intersects")
    shared = shapely.intersection(
        np.array(earlier, dtype=object)[first], np.array(later, dtype=object)[second]
    )
    table[first, second] = shapely.area(shared) / M2_PER_HA
    return table


def match_zones(
    earlier: Sequence[Area], later: Sequence[Area], *, least_overlap: float = LEAST_OVERLAP
) -> ZoneMatch:
    """Pair the zones of two maps so that the paired overlap is the largest (Hungarian method).

    Pairs whose intersection is under ``least_overlap`` of their union are no pairs: the earlier
    zone is gone and the later one new.
    """
    from scipy.optimize import linear_sum_assignment

    table = transition_ha(earlier, later)
    union = (
        np.array([area.area for area in earlier])[:, None]
        + np.array([area.area for area in later])[None, :]
    ) / M2_PER_HA - table
    share = table / np.maximum(union, 1e-12)
    first, second = linear_sum_assignment(table, maximize=True)
    kept = share[first, second] >= least_overlap
    pairs = tuple((int(a), int(b)) for a, b in zip(first[kept], second[kept], strict=True))
    return ZoneMatch(
        pairs=pairs,
        overlap=tuple(float(share[a, b]) for a, b in pairs),
        gone=tuple(sorted(set(range(len(earlier))) - {a for a, _ in pairs})),
        fresh=tuple(sorted(set(range(len(later))) - {b for _, b in pairs})),
        transition_ha=table,
    )


def matched_numbers(
    match: ZoneMatch, earlier_numbers: Sequence[int], *, retired: Sequence[int] = ()
) -> tuple[tuple[int, ...], tuple[int, ...]]:
    """Numbers of the later zones: kept where paired, else new ones never used before.

    Returns
    -------
    numbers, retired
        One number a later zone, in their order; and all numbers that may not come again.
    """
    partner = {b: earlier_numbers[a] for a, b in match.pairs}
    gone = {earlier_numbers[a] for a in match.gone} | set(retired)
    free = max([0, *earlier_numbers, *retired]) + 1
    numbers = []
    for place in range(len(match.pairs) + len(match.fresh)):
        if place in partner:
            numbers.append(partner[place])
        else:
            numbers.append(free)
            free += 1
    return tuple(numbers), tuple(sorted(gone))


def adjusted_rand(table: Floats) -> float:
    """Adjusted Rand index of a contingency table of counts (Hubert & Arabie 1985).

    1 is the same partition, 0 what chance gives. Counts, not areas: the index counts pairs.
    """
    table = np.asarray(table, dtype=np.float64)
    total = table.sum()

    def pairs(counts: Floats) -> float:
        return float((counts * (counts - 1.0) / 2.0).sum())

    both, rows, cols = pairs(table), pairs(table.sum(axis=1)), pairs(table.sum(axis=0))
    expected = rows * cols / (total * (total - 1.0) / 2.0)
    largest = 0.5 * (rows + cols)
    return 1.0 if largest == expected else (both - expected) / (largest - expected)


def adjusted_rand_by_area(table_ha: Floats) -> float:
    """Adjusted Rand index where area takes the place of counts (the limit of ever smaller cells)."""
    share = np.asarray(table_ha, dtype=np.float64) / np.sum(table_ha)
    both = float((share**2).sum())
    rows, cols = float((share.sum(axis=1) ** 2).sum()), float((share.sum(axis=0) ** 2).sum())
    expected, largest = rows * cols, 0.5 * (rows + cols)
    return 1.0 if largest == expected else (both - expected) / (largest - expected)


def kappa(table: Floats) -> float:
    """Cohen's kappa of a square table of matched classes (Cohen 1960): a footnote, no verdict."""
    share = np.asarray(table, dtype=np.float64) / np.sum(table)
    observed = float(np.trace(share))
    chance = float((share.sum(axis=1) * share.sum(axis=0)).sum())
    return 1.0 if chance == 1.0 else (observed - chance) / (1.0 - chance)


def disagreement(table: Floats) -> tuple[float, float]:
    """Quantity and allocation disagreement of a square table (Pontius & Millones 2011).

    Shares of the area: quantity from different totals of the classes, allocation from their
    places; together the whole disagreement.
    """
    share = np.asarray(table, dtype=np.float64) / np.sum(table)
    total = 1.0 - float(np.trace(share))
    quantity = 0.5 * float(np.abs(share.sum(axis=1) - share.sum(axis=0)).sum())
    return quantity, total - quantity


def squared_table(match: ZoneMatch) -> Floats:
    """Transition table with paired zones on the diagonal, zones without a partner last."""
    rows = [a for a, _ in match.pairs] + list(match.gone)
    cols = [b for _, b in match.pairs] + list(match.fresh)
    size = len(match.pairs) + len(match.gone) + len(match.fresh)
    square = np.zeros((size, size))
    paired = len(match.pairs)
    for row, earlier in enumerate(rows):
        for col, later in enumerate(cols):
            at_col = col if col < paired else col + len(match.gone)
            square[row, at_col] = match.transition_ha[earlier, later]
    return square

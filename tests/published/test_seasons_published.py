"""Season statistics against open data and reference libraries.

Cook East: total organic carbon and pH at 183 points in 1998, 2008 and 2015 (USDA-ARS, CC0 1.0);
its paired figures were made with R 4.2.2 (tests/reference). Raw data may lie beside the checkout.
LimeSoDa: fields BB.51 (2017) and BB.250 (2020) overlap (CC BY-SA 4.0, loaded from its package).
Lin's concordance: Lin 1989, Biometrics 45:255-268.
"""

from __future__ import annotations

from datetime import date

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from schorl.steps.season_sites import site_pairs
from schorl.steps.season_tests import (
    concordance,
    field_shift,
    holm,
    least_detectable,
    new_sites_change,
    paired_change,
)
from support.data import REFERENCE, lime_soda
from support.seasons import sample_set


def cook(datasets, column, first, second):
    table = pd.read_csv(datasets / "cook_east_soil_0_10cm_wide.csv")
    both = table[[f"{column}_{first}", f"{column}_{second}"]].dropna()
    return both.iloc[:, 0].to_numpy(float), both.iloc[:, 1].to_numpy(float)


@pytest.mark.parametrize(
    ("row", "column", "years", "warns"),
    [
        ("toc 1998-2008", "toc_pct", (1998, 2008), True),
        ("toc 2008-2015", "toc_pct", (2008, 2015), True),
        ("toc 1998-2015", "toc_pct", (1998, 2015), False),
        ("pH 1998-2015", "pH", (1998, 2015), False),
    ],
)
def test_cook_east_shift_and_warning(datasets, row, column, years, warns):
    known = pd.read_csv(REFERENCE / "cook_paired_change.csv", index_col="pair").loc[row]
    before, after = cook(datasets, column, *years)
    shift = field_shift(before, after, paired=True)
    assert shift.sites == known["n"]
    for ours, theirs in (
        (shift.mean, "mean_change"), (shift.low, "ci_low"), (shift.high, "ci_high"),
        (shift.correlation, "pearson"), (shift.concordance, "lin_ccc"),
    ):  # fmt: skip
        assert ours == pytest.approx(known[theirs], rel=1e-6)
    assert bool(shift.warning) is warns


def test_cook_east_shift_in_words_of_the_earlier_year(datasets):
    """The campaign of 2008 went up by 83 % and more than 4 SDs of 1998; 2015 by 9 %, half an SD."""
    jump = field_shift(*cook(datasets, "toc_pct", 1998, 2008), paired=True)
    assert (round(jump.relative, 2), jump.in_sd > 4) == (0.83, True)
    still = field_shift(*cook(datasets, "toc_pct", 1998, 2015), paired=True)
    assert (round(still.relative, 2), round(still.in_sd, 1)) == (0.09, 0.5)


def test_fields_that_overlap_share_sites():
    first, table = lime_soda("BB.51")
    second, later = lime_soda("BB.250")
    before = sample_set(first, table["Clay_target"], on=date(2017, 9, 1))
    after = sample_set(second, later["Clay_target"], on=date(2020, 9, 1))
    pairs = site_pairs(before, after, same_place_m=30.0)
    gap = np.linalg.norm(first[pairs.before] - second[pairs.after], axis=1)
    assert gap.max() <= 30.0
    assert len(set(pairs.before)) == len(set(pairs.after)) == len(pairs)
    assert 25 <= len(pairs) <= 27  # 25 are each other's nearest, 36 pairs are near enough
    assert np.corrcoef(pairs.before_mg_kg, pairs.after_mg_kg)[0, 1] > 0.5


@pytest.mark.parametrize("seed", range(5))
def test_tests_agree_with_scipy(seed):
    random = np.random.default_rng(seed)
    before, after = random.normal(0.6, 0.15, 12), random.normal(0.7, 0.2, 12)
    ours = paired_change(after - before)
    theirs = stats.ttest_rel(after, before)
    held = theirs.confidence_interval(0.95)
    assert (ours.p, ours.low, ours.high) == pytest.approx((theirs.pvalue, held.low, held.high))
    other = random.normal(0.7, 0.2, 7)
    ours = new_sites_change(before, other)
    theirs = stats.ttest_ind(other, before, equal_var=False)
    held = theirs.confidence_interval(0.95)
    assert (ours.p, ours.low, ours.high) == pytest.approx((theirs.pvalue, held.low, held.high))


def test_holm_by_hand():
    """0.005 x 4, 0.01 x 3, 0.03 x 2, 0.04 x 1, never falling: what R's p.adjust gives too."""
    assert holm([0.01, 0.04, 0.03, 0.005]) == pytest.approx([0.03, 0.06, 0.06, 0.02])


def test_concordance_by_hand():
    """Equal values 1; a constant shift lowers it, a correlation does not see it."""
    values = np.array([1.0, 2.0, 3.0, 4.0])
    assert concordance(values, values) == 1.0
    # 2 x 1.25 / (1.25 + 1.25 + 1): half a step of shift squared in the denominator
    assert concordance(values, values + 1.0) == pytest.approx(2.5 / 3.5)


def test_least_detectable_change_as_power_has_it():
    """Normal law: a change of that size is found four times in five at 5 %."""
    error = 0.05
    change = least_detectable(error)
    power = stats.norm.sf(stats.norm.ppf(0.975) - change / error)
    assert power == pytest.approx(0.80, abs=1e-9)

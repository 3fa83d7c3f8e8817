"""Worked examples from print.

Isaaks & Srivastava 1989, An Introduction to Applied Geostatistics, ch. 12: seven samples, target
(65, 137), covariance 10 exp(-0.3 h): estimate 592.7, variance 8.96.
gstat's own test of block kriging prints 268.7324 and 19568.76 (zinc of the Meuse set, 40 m blocks,
40 nearest samples).
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from schorl.geostat import Variogram, krige
from support.data import REFERENCE, meuse

SAMPLES = np.array(
    [(61, 139), (63, 140), (64, 129), (68, 128), (71, 140), (73, 141), (75, 128)], dtype=float
)
V = np.array([477, 696, 227, 646, 606, 791, 783], dtype=float)
TARGET = np.array([[65.0, 137.0]])
PRINTED = Variogram(family="exponential", nugget=0.0, partial_sill=10.0, practical_range_m=10.0)


def test_the_book_gives_592_7_and_8_96():
    estimate, variance = krige(SAMPLES, V, TARGET, PRINTED, filtered=False)
    assert round(float(estimate[0]), 1) == 592.7
    assert round(float(variance[0]), 2) == 8.96


@pytest.mark.parametrize(
    ("case", "nugget", "sill"),
    [("exp_10_a10", 0, 10), ("exp_20_a10", 0, 20), ("nug5_exp5_a10", 5, 5)],
)
def test_variants_of_the_book_case(case, nugget, sill):
    rows = pd.read_csv(REFERENCE / "isaaks_srivastava_cases.csv")
    row = rows[(rows["case"] == case) & (rows["support"] == "point")].iloc[0]
    model = Variogram(
        family="exponential", nugget=nugget, partial_sill=sill, practical_range_m=10.0
    )
    estimate, variance = krige(SAMPLES, V, TARGET, model, filtered=False)
    assert estimate[0] == pytest.approx(row["pred"], rel=1e-9)
    assert variance[0] == pytest.approx(row["var"], rel=1e-9)


def test_gstats_printed_block_case():
    east_north, zinc = meuse("zinc")
    rows = pd.read_csv(REFERENCE / "meuse_zinc_block40_nmax40_published_case.csv")
    model = Variogram(
        family="spherical", nugget=2.42e4, partial_sill=1.34e5, practical_range_m=800.0
    )
    targets = rows[["x", "y"]].to_numpy(float)
    estimate, variance = krige(
        east_north, zinc, targets, model, block_m=40.0, filtered=False, neighbours=40
    )
    assert estimate == pytest.approx(rows["reg4x4_pred"].to_numpy(), rel=1e-6)
    assert variance == pytest.approx(rows["reg4x4_var"].to_numpy(), rel=1e-6)
    assert round(float(estimate[0]), 4) == 268.7324
    assert round(float(variance[0]), 2) == 19568.76

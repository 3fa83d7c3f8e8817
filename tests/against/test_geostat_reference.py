"""Kriging, leave-one-out and REML against R (gstat, nlme) outputs; see tests/reference."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from schorl.geostat import Variogram, best_transform, fit_reml, krige, leave_one_out
from support.data import REFERENCE, lime_soda

MEUSE = Variogram(
    family="spherical", nugget=0.05066017, partial_sill=0.59060556, practical_range_m=897.0044
)
CLAY = Variogram(
    family="spherical", nugget=1.796660687, partial_sill=4.266504273, practical_range_m=340.6830712
)
SETS = {"meuse_logzn": (MEUSE, 40.0), "bb250_clay": (CLAY, 20.0)}


def data_of(name):
    table = pd.read_csv(REFERENCE / f"{name}_loocv.csv")
    return table[["x", "y"]].to_numpy(float), table["observed"].to_numpy(float), table


@pytest.mark.parametrize("name", SETS)
def test_points_blocks_and_neighbours(name):
    model, block = SETS[name]
    places, values, _ = data_of(name)
    grid = pd.read_csv(REFERENCE / f"{name}_ok_grid.csv")
    targets = grid[["x", "y"]].to_numpy(float)
    for columns, options in (
        (("ok_pred", "ok_var"), {}),
        (("block4x4_pred", "block4x4_var"), {"block_m": block}),
        (("nmax16_pred", "nmax16_var"), {"neighbours": 16}),
    ):
        if columns[0] not in grid:
            continue
        estimate, variance = krige(places, values, targets, model, filtered=False, **options)
        assert estimate == pytest.approx(grid[columns[0]].to_numpy(), rel=1e-6)
        assert variance == pytest.approx(grid[columns[1]].to_numpy(), rel=1e-6)


@pytest.mark.parametrize("name", SETS)
def test_leave_one_out(name):
    places, values, table = data_of(name)
    residual, variance = leave_one_out(places, values, SETS[name][0])
    assert values - residual == pytest.approx(table["pred"].to_numpy(), rel=1e-6)
    assert variance == pytest.approx(table["var"].to_numpy(), rel=1e-6)


@pytest.mark.parametrize("family", ["spherical", "exponential"])
@pytest.mark.parametrize("name", SETS)
def test_reml_reaches_the_best_optimum_of_13_starts(name, family):
    optima = pd.read_csv(REFERENCE / "reml_ml_best_optima.csv")
    model = {"spherical": "corSpher", "exponential": "corExp"}[family]
    known = {"meuse_logzn": "meuse_logzn", "bb250_clay": "BB250_clay"}[name]
    row = optima[(optima.set == known) & (optima.method == "REML") & (optima.model == model)]
    best = float(row["best_loglik"].iloc[0])
    places, values, _ = data_of(name)
    fit = fit_reml(places, values, family=family, priors=False)
    longest = np.hypot(*np.ptp(places, axis=0))
    interior = float(row["best_range"].iloc[0]) < 10 * longest
    # At an edge (an endless range) the best is only approached, never reached.
    assert fit.log_likelihood >= best - (1e-4 if interior else 0.05)
    assert fit.log_likelihood <= best + 1e-3


def test_real_clay_shows_a_pattern():
    places, table = lime_soda("BB.250")
    fit = fit_reml(places, table["Clay_target"].to_numpy(float))
    residual, variance = leave_one_out(places, table["Clay_target"].to_numpy(float), fit.variogram)
    skill = 1 - np.mean(residual**2) / np.var(table["Clay_target"], ddof=1)
    assert fit.verdict == "pattern found"
    assert skill > 0.6
    assert 0.8 < np.mean(residual**2 / variance) < 1.2


def test_the_transform_does_not_depend_on_the_unit():
    random = np.random.default_rng(5)
    places = random.uniform(0, 500, (60, 2))
    values = np.exp(random.normal(0, 0.7, 60))
    chosen = {best_transform(values * unit, places) for unit in (1e-3, 1.0, 10.0, 1e3)}
    assert chosen == {"log"}

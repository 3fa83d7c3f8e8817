"""Random cases against PyKrige and GSTools."""

from __future__ import annotations

import gstools
import numpy as np
import pytest
from pykrige.ok import OrdinaryKriging

from schorl.geostat import Variogram, krige
from schorl.geostat.kriging import krige_global
from schorl.geostat.support import layout_of
from schorl.geostat.system import Targets


def case(seed, count=40):
    random = np.random.default_rng(seed)
    places = random.uniform(0, 600, (count, 2))
    values = random.normal(10, 2, count)
    targets = random.uniform(0, 600, (200, 2))
    nugget, sill, reach = random.uniform(0.05, 1), random.uniform(0.5, 4), random.uniform(80, 500)
    return places, values, targets, nugget, sill, reach


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("family", ["spherical", "exponential"])
def test_pykrige_agrees(seed, family):
    places, values, targets, nugget, sill, reach = case(seed)
    model = Variogram(family=family, nugget=nugget, partial_sill=sill, practical_range_m=reach)
    estimate, variance = krige(places, values, targets, model, filtered=False)
    peer = OrdinaryKriging(
        *places.T, values, variogram_model=family,
        variogram_parameters={"psill": sill, "range": reach, "nugget": nugget},
    )  # fmt: skip
    theirs, spread = peer.execute("points", *targets.T)
    assert np.abs(estimate - theirs).max() <= 1e-8 * values.std()
    assert np.abs(variance - spread).max() <= 1e-8 * (nugget + sill)


@pytest.mark.parametrize("seed", range(3))
def test_gstools_agrees(seed):
    places, values, targets, nugget, sill, reach = case(seed)
    model = Variogram(family="spherical", nugget=nugget, partial_sill=sill, practical_range_m=reach)
    estimate, _ = krige(places, values, targets, model)
    peer = gstools.krige.Ordinary(
        gstools.Spherical(dim=2, var=sill, len_scale=reach, nugget=nugget), places.T, values,
        exact=False, cond_err="nugget",
    )  # fmt: skip
    theirs, _ = peer(targets.T)
    assert np.abs(estimate - theirs).max() <= 1e-7 * values.std()


def test_tiles_leave_no_seam_and_follow_the_global_solution():
    random = np.random.default_rng(11)
    places = random.uniform(0, 2000, (1200, 2))
    values = np.sin(places[:, 0] / 300) + np.cos(places[:, 1] / 250) + random.normal(0, 0.2, 1200)
    model = Variogram(family="spherical", nugget=0.04, partial_sill=0.8, practical_range_m=700.0)
    line = np.column_stack([np.linspace(100, 1900, 900), np.full(900, 1010.0)])
    tiled, spread = krige(places, values, line, model)
    layout = layout_of(places, None)
    targets = Targets.of(line, layout, model, block_m=None, side=4)
    whole, variance = krige_global(layout, values[:, None], targets, model, filtered=True)
    whole = whole[:, 0]
    # The tiles' answer stays well within what kriging itself leaves open.
    assert (np.abs(tiled - whole) < 0.12 * np.sqrt(variance)).all()
    assert (np.abs(spread / variance - 1) < 0.03).all()
    assert np.abs(np.diff(tiled)).max() < 1.1 * np.abs(np.diff(whole)).max()

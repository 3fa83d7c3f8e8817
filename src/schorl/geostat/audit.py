"""A second opinion on a map, by code that is not ours where that is possible.

Kriging is linear: the estimate of a block over k points equals the mean of the k point estimates,
and the filtered point variance equals the exact interpolator's less the nugget. Both are asked of
PyKrige at a few dozen cells; where it cannot follow (supports, unequal noise, stretched or tiled
systems, several columns) a dense solve of the bordered system stands in.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from schorl.geostat.covariance import correlation_in_place, distances
from schorl.geostat.kriging import GLOBAL_UP_TO
from schorl.geostat.support import data_covariance, layout_of
from schorl.geostat.system import Targets, block_offsets, replace_turn
from schorl.model.arrays import Floats
from schorl.model.surface import Audit
from schorl.model.variogram import Support, Variogram

CELLS = 64
TOLERANCE = 1e-6  # of the data's standard deviation


def audit(
    east_north_m: Floats,
    values: Floats,
    centres_m: Floats,
    estimate: Floats,
    variogram: Variogram,
    *,
    block_m: float,
    random: np.random.Generator,
    support: Sequence[Support] | None = None,
) -> Audit:
    """Compare block estimates ``(m,)`` with an independent solution at 64 random cells.

    Returns the largest difference as a share of the data's standard deviation.
    """
    count = min(CELLS, len(centres_m))
    chosen = np.sort(random.choice(len(centres_m), size=count, replace=False))
    points = (centres_m[chosen][:, None, :] + block_offsets(block_m, 4)[None]).reshape(-1, 2)
    followed = support is None and variogram.stretch == 1.0 and len(values) <= GLOBAL_UP_TO
    if followed and variogram.partial_sill > 0:
        by, other = "PyKrige", _pykrige(east_north_m, values, points, variogram)
        other = other.reshape(count, -1).mean(axis=1)
    else:
        by = "dense solve"
        other = _dense(east_north_m, values, centres_m[chosen], variogram, block_m, support)
    spread = float(np.std(values)) or 1.0
    largest = float(np.abs(other - estimate[chosen]).max() / spread)
    return Audit(by=by, cells=count, largest_difference=largest)


def _pykrige(east_north_m: Floats, values: Floats, points: Floats, variogram: Variogram) -> Floats:
    from pykrige.ok import OrdinaryKriging

    about = east_north_m.mean(axis=0)

    def semivariance(_parameters: object, lag: Floats) -> Floats:
        shared = correlation_in_place(
            np.array(lag, dtype=float), variogram.family, variogram.practical_range_m
        )
        return variogram.nugget + variogram.partial_sill * (1.0 - shared)

    known = {"spherical": "spherical", "exponential": "exponential"}.get(variogram.family)
    model = {
        "variogram_model": known or "custom",
        "variogram_parameters": {
            "psill": variogram.partial_sill,
            "range": variogram.practical_range_m,
            "nugget": variogram.nugget,
        }
        if known
        else [variogram.partial_sill, variogram.practical_range_m, variogram.nugget],
        "variogram_function": None if known else semivariance,
    }
    model = {key: value for key, value in model.items() if value is not None}
    kriged = OrdinaryKriging(
        east_north_m[:, 0] - about[0], east_north_m[:, 1] - about[1], values,
        exact_values=False, enable_plotting=False, verbose=False, **model,
    )  # fmt: skip
    estimate, _ = kriged.execute(
        "points", points[:, 0] - about[0], points[:, 1] - about[1], backend="vectorized"
    )
    return np.asarray(estimate, dtype=np.float64)


def _dense(
    east_north_m: Floats,
    values: Floats,
    centres_m: Floats,
    variogram: Variogram,
    block_m: float,
    support: Sequence[Support] | None,
) -> Floats:
    """The bordered system solved by LU with partial pivoting: another route than our own."""
    layout = layout_of(east_north_m, support).turned(variogram)
    targets = Targets.of(centres_m, layout, variogram, block_m=block_m, side=4)
    turned = replace_turn(variogram)
    count = len(values)
    bordered = np.ones((count + 1, count + 1))
    bordered[:count, :count] = data_covariance(layout, turned)
    bordered[count, count] = 0.0
    places = targets.centres_m[:, None, :] + targets.offsets_m[None]
    shared = np.ones((count + 1, len(centres_m)))
    for place in range(len(centres_m)):
        gap = distances(places[place], layout.points_m)
        pairs = correlation_in_place(gap, variogram.family, variogram.practical_range_m)
        shared[:count, place] = variogram.partial_sill * layout.averaged(pairs).mean(axis=1)
    weights = np.linalg.solve(bordered, shared)[:count]
    return np.asarray(weights.T @ values)

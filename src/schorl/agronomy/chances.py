"""Chances, quantiles and expected losses of a cell's soil test, in closed form.

A cell's available boron B is normal(location, sd) or lognormal (location, sd of the logarithm).
With the need D = need_mean + (B_mean - B) F, a rate r leaves the cell short where
B < b* = B_mean + (need_mean - r) / F.
"""

from __future__ import annotations

import numpy as np
from scipy.special import ndtr

from schorl.model.arrays import Floats
from schorl.model.prescription import CellNeed

TINY = 1e-12


def chance_below(value_mg_kg: Floats, location: Floats, sd: Floats, *, log: bool) -> Floats:
    """P(B < value) for each cell; a cell without spread is a step."""
    value = np.asarray(value_mg_kg, dtype=np.float64)
    if log:
        with np.errstate(divide="ignore"):
            value = np.log(np.maximum(value, 0.0))
    with np.errstate(divide="ignore", invalid="ignore"):
        z = (value - location) / np.maximum(sd, TINY)
    return np.asarray(ndtr(z))


def expected_gap(value_mg_kg: Floats, location: Floats, sd: Floats, *, log: bool) -> Floats:
    """E max(value - B, 0) for each cell, mg/kg."""
    value = np.asarray(value_mg_kg, dtype=np.float64)
    spread = np.maximum(sd, TINY)
    if not log:
        z = (value - location) / spread
        return np.asarray((value - location) * ndtr(z) + spread * _density(z))
    positive = np.maximum(value, TINY)
    z = (np.log(positive) - location) / spread
    mean = np.exp(location + 0.5 * spread**2)
    gap = positive * ndtr(z) - mean * ndtr(z - spread)
    return np.where(value > 0, np.maximum(gap, 0.0), 0.0)


def _density(z: Floats) -> Floats:
    return np.asarray(np.exp(-0.5 * z * z) / np.sqrt(2.0 * np.pi))


def breaking_point(need: CellNeed, rate_kg_ha: Floats | float) -> Floats:
    """Soil test b* below which a cell is still short under a rate, ``(n_cells,)``."""
    return np.asarray(need.boron_mg_kg + (need.need_mean_kg_ha - rate_kg_ha) / need.mass_need)


def chance_short_of_need(need: CellNeed, rate_kg_ha: Floats | float) -> Floats:
    """P(need > rate) for each cell."""
    return chance_below(
        breaking_point(need, rate_kg_ha), need.boron_location, need.boron_sd, log=need.boron_log
    )


def expected_loss_kg_ha(need: CellNeed, rate_kg_ha: Floats | float, *, cost_ratio: float) -> Floats:
    """Expected loss of each cell: cost x kg short plus kg in excess of the need, kg B/ha."""
    point = breaking_point(need, rate_kg_ha)
    gap = expected_gap(point, need.boron_location, need.boron_sd, log=need.boron_log)
    short = gap * need.mass_need
    if need.boron_log:
        mean = np.exp(need.boron_location + 0.5 * np.maximum(need.boron_sd, TINY) ** 2)
    else:
        mean = need.boron_location
    excess = short - (point - mean) * need.mass_need
    return np.asarray(cost_ratio * short + np.maximum(excess, 0.0))


def chance_over_ceiling(
    need: CellNeed, rate_kg_ha: Floats | float, *, unevenness: float = 1.0
) -> Floats:
    """P(B + unevenness x rate / F > ceiling) for each cell, all applied boron staying."""
    room = need.ceiling_mg_kg - unevenness * np.asarray(rate_kg_ha) / need.mass_ceiling
    below = chance_below(room, need.boron_location, need.boron_sd, log=need.boron_log)
    return np.asarray(1.0 - below)


def chance_short_of_target(need: CellNeed, rate_kg_ha: Floats | float, *, stays: float) -> Floats:
    """P(B + stays x rate / F < target) for each cell."""
    wanted = need.target_mg_kg - stays * np.asarray(rate_kg_ha) / need.mass_need
    return chance_below(wanted, need.boron_location, need.boron_sd, log=need.boron_log)

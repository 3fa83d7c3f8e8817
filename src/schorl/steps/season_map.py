"""Where the field changed: the kriged difference at revisited sites, cell by cell.

A difference of two maps has almost no power, since both miss the same short-range variation; the
difference at the same sites is mapped itself. Its nugget is at least twice the laboratory's
variance, or all the variance there is: a fitted nugget of nothing would make cells at the samples
certain.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy import stats

from schorl.geostat import fit_reml, krige
from schorl.model.arrays import Floats
from schorl.model.change import ChangeMap
from schorl.model.field import CellGrid

LEAST_PAIRS = 10
FALSE_DISCOVERIES = 0.10


def change_map(
    east_north_m: Floats, change: Floats, grid: CellGrid, *, lab_sd: float, doubted: bool
) -> ChangeMap:
    """Krige differences ``(n,)`` at sites ``(n, 2)`` and test every cell.

    Parameters
    ----------
    lab_sd
        Laboratory standard deviation of one value, mg/kg.
    doubted
        The whole campaign may have shifted: no cell is then called real.
    """
    floor = min(2 * lab_sd**2, float(change.var(ddof=1)))
    estimate, sd, pattern = _mapped(east_north_m, change, grid, floor=floor)
    # One mean for the whole field is tested as a mean is: its spread is guessed from few sites.
    law = stats.t(len(change) - 1) if pattern == "no pattern" else stats.norm
    still = (sd == 0) & (estimate == 0)
    z = np.abs(estimate) / np.where(sd > 0, sd, 1.0)
    p = np.where(still, 1.0, np.where(sd > 0, 2 * law.sf(z), 0.0))
    adjusted = stats.false_discovery_control(p, method="bh")
    real = (adjusted <= FALSE_DISCOVERIES) & (not doubted)
    cell_ha = grid.cell_m**2 / 1e4
    return ChangeMap(
        grid=grid, change_mg_kg=estimate, sd_mg_kg=sd, p_adjusted=adjusted, real=real,
        pattern=pattern, real_ha=float(real.sum()) * cell_ha,
    )  # fmt: skip


def _mapped(
    east_north_m: Floats, change: Floats, grid: CellGrid, *, floor: float
) -> tuple[Floats, Floats, str]:
    """Estimate and standard deviation per cell; flat where the differences show no pattern."""
    fit = fit_reml(east_north_m, change)
    if fit.verdict == "no pattern":
        spread = float(change.var(ddof=1))
        ones = np.ones(grid.n_cells)
        return change.mean() * ones, np.sqrt(spread / len(change)) * ones, "no pattern"
    variogram = replace(fit.variogram, nugget=max(fit.nugget, floor), lab_variance=0.0)
    estimate, variance = krige(east_north_m, change, grid.centres_m, variogram, block_m=grid.cell_m)
    return estimate, np.sqrt(variance), "pattern found"

"""What zones are drawn from: surfaces in units of their own kriging error, and the boron need.

A kriged map of noise is smooth and nearly flat. Scaled to unit spread it looks like any other map;
scaled by its own kriging error it stays as flat as it is. So every surface enters as
(value - field mean) / root mean kriging variance, nugget excluded, and a surface without pattern
does not enter at all.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from schorl.model.arrays import Flags, Floats
from schorl.model.field import CellGrid
from schorl.model.prescription import CellNeed
from schorl.model.settings import ExtraLayer
from schorl.model.surface import Surface, Verdict

#: Weight of the need beside boron, organic matter and clay: as much as all three together.
NEED_WEIGHT = float(np.sqrt(3.0))
#: An extra layer with less than this share of its variance between cells apart is noise.
LEAST_STRUCTURED = 0.10
#: Spread given to an extra layer where no soil surface sets the scale.
OWN_SPREAD = 1.0
TINY = 1e-12
SOIL = ("boron", "organic_matter", "clay")


@dataclass(frozen=True, eq=False, kw_only=True)
class Features:
    """Columns for clustering.

    ``table`` has shape ``(n_cells, d)``, centred; ``names`` one name a column; ``left_out`` says
    in words why a surface or layer is not among them.
    """

    table: Floats
    names: tuple[str, ...]
    left_out: Mapping[str, str]


def build_features(
    grid: CellGrid,
    surfaces: Mapping[str, Surface],
    need: CellNeed,
    extras: Sequence[ExtraLayer] = (),
    *,
    use: Flags | None = None,
    soil_only: bool = False,
) -> Features:
    """Features of all cells, centred on the cells in ``use``.

    Parameters
    ----------
    surfaces
        Kriged surfaces by name; constants and surfaces without pattern are left out.
    need
        Boron need of the cells, entered with weight sqrt(3) unless ``soil_only``.
    extras
        Further layers. Their error is not known, so they get the mean spread of the soil
        surfaces, less where they are noisy from cell to cell, times their weight.
    use
        Cells that will be treated, shape ``(n_cells,)``; all where None.
    """
    use = np.ones(grid.n_cells, dtype=np.bool_) if use is None else use
    columns: dict[str, Floats] = {}
    left_out: dict[str, str] = {}
    for name in (name for name in SOIL if name in surfaces):
        surface = surfaces[name]
        column = _error_scaled(surface.location, surface.map_sd**2, use)
        if surface.verdict in (Verdict.NONE, Verdict.CONSTANT) or column is None:
            left_out[name] = "one value for the field" if surface.constant else "no pattern"
        else:
            columns[name] = column
    spread = float(np.mean([c[use].std() for c in columns.values()])) if columns else OWN_SPREAD
    for layer in extras:
        column, why = _extra_column(layer, grid, use)
        if column is None:
            left_out[layer.name] = why
        else:
            columns[layer.name] = column * (spread * layer.weight)
    if not soil_only:
        column = _error_scaled(need.need_mean_kg_ha, need_map_variance(need, surfaces), use)
        if column is not None:
            columns["need"] = column * NEED_WEIGHT
    table = np.column_stack(list(columns.values())) if columns else np.empty((grid.n_cells, 0))
    return Features(table=table, names=tuple(columns), left_out=left_out)


def _error_scaled(values: Floats, variance: Floats, use: Flags) -> Floats | None:
    """(value - mean) / root mean kriging variance; None where there is nothing to tell apart."""
    if not use.any():
        return None
    centred = values - values[use].mean()
    spread = float(centred[use].std())
    error = float(np.sqrt(variance[use].mean()))
    if spread <= TINY * max(1.0, float(np.abs(values[use]).max())):
        return None
    return np.asarray(centred / max(error, TINY, 1e-3 * spread))


def need_map_variance(need: CellNeed, surfaces: Mapping[str, Surface]) -> Floats:
    """Kriging variance of the need, (kg B/ha)², without the short-range part of boron.

    The decision variance of the need holds the real short-range variation that plants meet; a map
    cannot show it, so boron's share of it is taken off again.
    """
    total = need.need_sd_kg_ha**2
    boron = surfaces.get("boron")
    if boron is None or boron.constant:
        return np.asarray(total)
    mapped, decided = boron.map_sd**2, boron.decision_sd**2
    if boron.transform == "log":
        square = boron.estimate**2
        mapped, decided = square * np.expm1(mapped), square * np.expm1(decided)
    mass = need.mass_need**2
    return np.asarray(np.maximum(total - mass * (decided - mapped), mass * mapped))


def _extra_column(layer: ExtraLayer, grid: CellGrid, use: Flags) -> tuple[Floats | None, str]:
    """Extra layer on the cells with spread 1 (less where noisy), or the reason to leave it out."""
    places = np.asarray(layer.east_north_m, dtype=np.float64).reshape(-1, 2)
    values = np.asarray(layer.values, dtype=np.float64)
    known = np.isfinite(values)
    if known.sum() < 3:
        return None, f"{int(known.sum())} values"
    column = to_cells(places[known], values[known], grid)
    spread = float(column[use].std())
    if spread <= TINY * max(1.0, float(np.abs(column[use]).max())):
        return None, "one value for the field"
    share = structured_share(grid.to_raster(np.where(use, column, np.nan)))
    if share < LEAST_STRUCTURED:
        return None, "no pattern from cell to cell"
    return (column - column[use].mean()) / spread * np.sqrt(share), ""


def to_cells(east_north_m: Floats, values: Floats, grid: CellGrid) -> Floats:
    """Bring values at points to the cells: the mean of a cell's points, else the nearest mean."""
    from scipy.spatial import cKDTree

    cells = grid.cell_of(east_north_m)
    inside = cells >= 0
    total = np.bincount(cells[inside], weights=values[inside], minlength=grid.n_cells)
    count = np.bincount(cells[inside], minlength=grid.n_cells)
    column = np.full(grid.n_cells, np.nan)
    np.divide(total, count, out=column, where=count > 0)
    empty = count == 0
    if empty.any():
        # Points that fall between cells (a coarse layer) fill by the three nearest, by distance.
        tree = cKDTree(east_north_m)
        answer = tree.query(grid.centres_m[empty], k=list(range(1, min(3, len(values)) + 1)))
        distance, nearest = np.asarray(answer[0]), np.asarray(answer[1])
        weight = 1.0 / np.maximum(distance, grid.cell_m * 1e-3) ** 2
        column[empty] = (values[nearest] * weight).sum(axis=1) / weight.sum(axis=1)
    return column


def structured_share(raster: Floats) -> float:
    """Share of a raster's variance that neighbouring cells have in common, 0 to 1.

    1 less half the mean squared difference of neighbours over the variance; NaN is off the field.
    """
    steps = np.concatenate([np.diff(raster, axis=0).ravel(), np.diff(raster, axis=1).ravel()])
    steps = steps[np.isfinite(steps)]
    variance = float(np.nanvar(raster))
    if not len(steps) or variance <= 0:
        return 0.0
    return float(np.clip(1.0 - 0.5 * np.mean(steps**2) / variance, 0.0, 1.0))

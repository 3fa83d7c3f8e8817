"""Sample zones as management zones: are real differences found, and none invented?

The simulated field is cut into 6, 12 or 20 sample zones (a block pattern), each sampled as one
composite of 15 cores. Cores differ by the field's own variation and the laboratory adds its error.
Without pattern (N1) the composites differ by chance alone; on the zoned fields the blocks differ by
what they hold. The program draws zones from the composites with its own mapping.
"""

from __future__ import annotations

import time
from dataclasses import replace

import numpy as np
import shapely

from quality_checks.zone_simulation import (
    EAST,
    HIGH_M,
    LABORATORY,
    LEVEL,
    NORTH,
    UNIT,
    WIDE_M,
    Simulated,
    cell_need,
    outcome_of,
    sample_need,
    settings,
    simulate,
    true_loss,
)
from schorl.model.samples import Measured, SampleSet
from schorl.steps.mapping import map_surfaces
from schorl.steps.zoning import draw_zones

BLOCKS = {6: (3, 2), 12: (4, 3), 20: (5, 4)}
CORES = 15
KINDS = ("N1", "N2", "Z2", "Z3", "Z4")


def composites_report(fields: int, *, seed: int, minutes: float = 1e9) -> None:
    """Print how often composites became zones, by kind and number, and what that saved."""
    print(f"\nzone composites of {CORES} cores")
    head = f"{'kind':<6}{'zones':>6}{'fields':>8}{'zoned':>8}{'p <= 0.10':>11}"
    print(f"{head}{'worth it':>10}{'saving':>9}{'worse':>8}")
    cases = [(kind, count) for kind in KINDS for count in BLOCKS]
    rows = {case: [] for case in cases}
    started = time.perf_counter()
    for place in range(fields):
        case = cases[place % len(cases)]
        rows[case].append(_judged(*case, seed=[seed, place]))
        if time.perf_counter() - started > 60.0 * minutes:
            break
    for (kind, count), figures in rows.items():
        if figures:
            zoned, p, true, real = np.array(figures, float).T
            print(
                f"{kind:<6}{count:>6}{len(figures):>8}{zoned.mean():>8.2f}{(p <= 0.1).mean():>11.2f}"
                f"{(true >= 0.05).mean():>10.2f}{real.mean():>9.3f}{(real < -0.01).mean():>8.2f}"
            )


def _judged(kind: str, count: int, *, seed: list[int]) -> tuple[float, float, float, float]:
    one = simulate(kind, 3.0, 30, seed=seed)
    samples = _composites(one, count, np.random.default_rng([*seed, 1]))
    surfaces = dict(map_surfaces(samples, one.grid, seed=0).surfaces)
    need = cell_need(surfaces)
    zoned = draw_zones(
        one.field,
        one.grid,
        samples,
        surfaces,
        need,
        sample_need_kg_ha=sample_need(samples),
        outcome=outcome_of(need, one.field.area_ha / one.grid.n_cells),
        settings=settings(),
        seed=0,
    ).zone_map
    flat = true_loss(np.zeros(one.grid.n_cells, np.intp), need, one.true_need)
    blocks = _block_of(one.grid.centres_m, *BLOCKS[count])
    true = 1.0 - true_loss(blocks, need, one.true_need) / flat
    real = 1.0 - true_loss(zoned.labels, need, one.true_need) / flat if zoned.count > 1 else 0.0
    return float(zoned.count > 1), float(zoned.structure_p or 1.0), true, real


def _block_of(places: np.ndarray, cols: int, rows: int) -> np.ndarray:
    col = np.clip((places[:, 0] - EAST) / (WIDE_M / cols), 0, cols - 1).astype(int)
    row = np.clip((places[:, 1] - NORTH) / (HIGH_M / rows), 0, rows - 1).astype(int)
    return row * cols + col


def _composites(one: Simulated, count: int, random: np.random.Generator) -> SampleSet:
    cols, rows = BLOCKS[count]
    wide, high = WIDE_M / cols, HIGH_M / rows
    areas = [
        shapely.box(
            EAST + col * wide, NORTH + row * high, EAST + (col + 1) * wide, NORTH + (row + 1) * high
        )
        for row in range(rows)
        for col in range(cols)
    ]
    blocks = _block_of(one.grid.centres_m, cols, rows)
    measured = {}
    for name in LEVEL:
        values = []
        for block in range(count):
            cores = random.choice(np.flatnonzero(blocks == block), CORES, replace=False)
            noise = UNIT[name] * random.normal(0.0, np.sqrt(LABORATORY))
            values.append(max(one.truth[name][cores].mean() + noise, 0.02))
        measured[name] = Measured(values=np.array(values), below_limit=np.zeros(count, bool))
    return replace(
        one.samples,
        ids=tuple(f"area {i + 1}" for i in range(count)),
        east_north_m=np.array([[area.centroid.x, area.centroid.y] for area in areas]),
        properties=measured,
        kind=("zone",) * count,
        cores=np.full(count, CORES),
        areas=tuple(areas),
        core_points_m=(None,) * count,
    )

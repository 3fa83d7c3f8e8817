"""Drawing zones: seconds and peak memory at 20 thousand, 200 thousand and a million cells.

A field of 25 ha (100 ha at a million cells) with a smooth surface and 30 % of short-range noise;
three soil surfaces, four clusters asked of the gate. Rates come from the closed-form loss, whose
share is printed apart, since in a job the rates are another part's work. Drawing runs on one
thread; on a busy machine its CPU seconds say more than the clock.

python scripts/bench.py zones            all three
python scripts/bench.py zones 20k        one of 20k, 200k, 1M
"""

from __future__ import annotations

import resource
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import shapely

SCRIPTS = Path(__file__).resolve().parents[1]
SIZES = {"20k": (500.0, 3.54), "200k": (500.0, 1.118), "1M": (1000.0, 1.0)}
RUNS = {"20k": 5, "200k": 3, "1M": 2}
TARGET_S = {"20k": 0.3, "1M": 5.0}


def main(arguments: list[str]) -> int:
    """Print one line a size, each measured in a process of its own."""
    if arguments[:1] == ["--here"]:
        return _measure(arguments[1])
    print(
        f"{'cells':>9}{'least s':>9}{'median s':>10}{'cpu s':>8}{'rates s':>9}{'peak MB':>9}{'zones':>7}  target"
    )
    for size in arguments or list(SIZES):
        command = [sys.executable, str(SCRIPTS / "bench.py"), "zones", "--here", size]
        done = subprocess.run(command, check=False)
        if done.returncode:
            return done.returncode
    return 0


def _measure(size: str) -> int:
    sys.path.insert(0, str(SCRIPTS))
    from quality_checks.zone_simulation import outcome_of, settings
    from schorl.steps.zoning import draw_zones

    side, cell = SIZES[size]
    given = _inputs(side, cell)
    closed_form = outcome_of(given["need"], given["field"].area_ha / given["grid"].n_cells)
    spent = [0.0, 0.0]

    def outcome(labels: np.ndarray) -> object:
        started, worked = time.perf_counter(), time.process_time()
        answer = closed_form(labels)
        spent[0] += time.perf_counter() - started
        spent[1] += time.process_time() - worked
        return answer

    seconds, rates, cpu = [], [], []
    for _ in range(RUNS[size] + 1):  # the first also loads libraries
        spent[:] = [0.0, 0.0]
        started, worked = time.perf_counter(), time.process_time()
        drawn = draw_zones(**given, outcome=outcome, settings=settings(), seed=0)
        seconds.append(time.perf_counter() - started - spent[0])
        cpu.append(time.process_time() - worked - spent[1])
        rates.append(spent[0])
    seconds, rates, cpu = sorted(seconds[1:]), sorted(rates[1:]), sorted(cpu[1:])
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
    target = f"{TARGET_S[size]:g} s" if size in TARGET_S else ""
    print(
        f"{given['grid'].n_cells:>9}{seconds[0]:>9.2f}{seconds[len(seconds) // 2]:>10.2f}"
        f"{cpu[0]:>8.2f}{rates[0]:>9.2f}{peak:>9.0f}{drawn.zone_map.count:>7}  {target}"
    )
    return 0


def _inputs(side_m: float, cell_m: float) -> dict[str, object]:
    from quality_checks.zone_simulation import CRS, EAST, LEVEL, NORTH, cell_need, sample_need
    from schorl.geodesy import area_ha
    from schorl.model.field import Field, lay_grid
    from schorl.model.samples import Campaign, Measured, SampleSet
    from schorl.model.surface import Surface, Verdict

    boundary = shapely.box(EAST, NORTH, EAST + side_m, NORTH + side_m)
    field = Field(
        name="benchmark", boundary=boundary, crs=CRS, epsg=32633, area_ha=area_ha(boundary, crs=CRS)
    )
    grid = lay_grid(boundary, cell_m=cell_m)
    random = np.random.default_rng(1)
    scale = {"boron": 0.15, "organic_matter": 0.4, "clay": 4.0}
    surfaces, measured = {}, {}
    at = random.integers(0, grid.n_cells, 80)
    for name, level in LEVEL.items():
        share = (grid.centres_m - [EAST, NORTH]) / side_m
        phase = random.uniform(0.0, 6.0, 2)
        smooth = np.sin(7.0 * share[:, 0] + phase[0]) * np.cos(5.0 * share[:, 1] + phase[1])
        noisy = smooth + 0.3 * random.standard_normal(grid.n_cells)
        values = level + scale[name] * noisy
        surfaces[name] = Surface(
            name=name,
            unit="",
            grid=grid,
            estimate=values,
            location=values,
            map_sd=np.full(grid.n_cells, 0.4 * scale[name]),
            decision_sd=np.full(grid.n_cells, 0.5 * scale[name]),
            transform="identity",
            verdict=Verdict.PATTERN,
        )
        measured[name] = Measured(values=values[at], below_limit=np.zeros(80, bool))
    samples = SampleSet(
        ids=tuple(f"S{i + 1}" for i in range(80)),
        east_north_m=grid.centres_m[at],
        properties=measured,
        kind=("point",) * 80,
        cores=np.full(80, 8),
        campaign=Campaign(method="hot water", depth_cm=20.0),
    )
    return {
        "field": field,
        "grid": grid,
        "samples": samples,
        "surfaces": surfaces,
        "need": cell_need(surfaces),
        "sample_need_kg_ha": sample_need(samples),
    }


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

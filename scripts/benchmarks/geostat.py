"""Kriging estimate and variance beside PyKrige and GSTools: same data, one run, two threads.

Seconds and the largest difference to PyKrige; the bound is one pass of distances and exponentials
plus one n x n by n x cells product, measured here too.

    python scripts/bench.py geostat [cells ...]        default 20000 100000
"""

from __future__ import annotations

import os
import time

import numpy as np

os.environ.setdefault("SCHORL_THREADS", "2")

SAMPLES = (60, 100, 500)
RUNS = 3


def main(arguments: list[str]) -> int:
    """Print one row for each number of samples and cells."""
    print(f"{'n':>5}{'cells':>9}{'schorl':>9}{'pykrige':>9}{'gstools':>9}{'bound':>8}"
          f"{'x pykrige':>11}{'x gstools':>11}{'difference':>12}")  # fmt: skip
    for cells in [int(one) for one in arguments] or [20_000, 100_000]:
        for count in SAMPLES:
            row(count, cells)
    return 0


def row(count: int, cells: int) -> None:
    """Time one case."""
    import gstools
    from pykrige.ok import OrdinaryKriging

    from schorl.geostat import Variogram, krige

    random = np.random.default_rng(count)
    places, values = random.uniform(0, 700, (count, 2)), random.normal(1, 0.3, count)
    targets = random.uniform(0, 700, (cells, 2))
    model = Variogram(family="exponential", nugget=0.02, partial_sill=0.07, practical_range_m=250.0)
    ours, (estimate, variance) = timed(
        lambda: krige(places, values, targets, model, filtered=False)
    )
    peer = OrdinaryKriging(
        *places.T, values, variogram_model="exponential",
        variogram_parameters={"psill": 0.07, "range": 250.0, "nugget": 0.02},
    )  # fmt: skip
    theirs, (other, spread) = timed(lambda: peer.execute("points", *targets.T), runs=1)
    tools = gstools.krige.Ordinary(
        gstools.Exponential(dim=2, var=0.07, len_scale=250.0 / 3, nugget=0.02), places.T, values
    )
    third, _ = timed(lambda: tools(targets.T), runs=1)
    bound, _ = timed(lambda: least_work(count, cells))
    difference = max(
        np.abs(estimate - other).max() / values.std(), np.abs(variance - spread).max() / 0.09
    )
    print(f"{count:>5}{cells:>9}{ours:>9.2f}{theirs:>9.2f}{third:>9.2f}{bound:>8.2f}"
          f"{theirs / ours:>11.1f}{third / ours:>11.1f}{difference:>12.1e}", flush=True)  # fmt: skip


def timed(work, *, runs: int = RUNS):
    """Least seconds of a few runs, and the answer."""
    seconds, answer = [], None
    for _ in range(runs):
        started = time.perf_counter()
        answer = work()
        seconds.append(time.perf_counter() - started)
    return min(seconds), answer


def least_work(count: int, cells: int) -> None:
    """What any such kriging must do at least, in chunks that fit the cache."""
    square = np.random.default_rng(0).normal(size=(count, count))
    step = max(262_144 // count, 64)
    for start in range(0, cells, step):
        block = np.random.default_rng(0).random((count, min(step, cells - start)))
        np.sqrt(block, out=block)
        np.exp(-block, out=block)
        square @ block

"""Kriging estimate and variance beside PyKrige and GSTools: same data, one run, two threads.

Each figure is measured in a process of its own: seconds (least of a few runs for what is quick),
and the peak memory over what that process held before it kriged. The bound is one pass of
distances and exponentials plus one n x n by n x cells product, in chunks, on the same two threads.
Beside them the largest difference to PyKrige: estimate over the data's SD, variance over the sill.

    python scripts/bench.py geostat                     20k and 100k cells, all three
    python scripts/bench.py geostat 20000 100000 1000000
    python scripts/bench.py geostat --large             5,000 samples x 1M cells, Schorl alone

A peer is left out, saying so, where it would need more than 6 GB (PyKrige vectorised holds the
whole n x cells system, about 44 bytes an entry) or more than some minutes (GSTools at 1M cells).
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import time
from pathlib import Path

os.environ.setdefault("SCHORL_THREADS", "2")
os.environ.setdefault("OMP_NUM_THREADS", "2")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "2")

import numpy as np

SAMPLES = (60, 100, 500)
NUGGET, SILL, REACH_M = 0.02, 0.07, 250.0
PEER_BYTES, MOST_BYTES = 44, 6e9
GSTOOLS_MOST = 6e7  # samples times cells


def main(arguments: list[str]) -> int:
    """Print one row for each number of samples and cells."""
    if arguments[:1] == ["--one"]:
        print(json.dumps(measured(arguments[1], int(arguments[2]), int(arguments[3]))))
        return 0
    if arguments == ["--large"]:
        seconds, memory, _ = apart("schorl", 5000, 1_000_000)
        print(f"5,000 samples x 1,000,000 cells: {seconds:.1f} s, {memory:.0f} MB")
        return 0
    print("seconds (MB at the peak)")
    print(f"{'n':>4}{'cells':>9}{'schorl':>14}{'pykrige':>15}{'gstools':>15}{'bound':>8}"
          f"{'x pykrige':>10}{'x gstools':>10}{'x bound':>8}{'difference':>11}")  # fmt: skip
    for cells in [int(one) for one in arguments] or [20_000, 100_000]:
        for count in SAMPLES:
            row(count, cells)
    return 0


def row(count: int, cells: int) -> None:
    """Time one case, every program apart."""
    ours, theirs = apart("schorl", count, cells), (np.nan, np.nan, None)
    tools = theirs
    if count * cells * PEER_BYTES < MOST_BYTES:
        theirs = apart("pykrige", count, cells)
    if count * cells <= GSTOOLS_MOST:
        tools = apart("gstools", count, cells)
    bound = apart("bound", count, cells)[0]
    gap = np.nan
    if theirs[2]:
        one, two = np.load(ours[2]), np.load(theirs[2])
        spread = data(count, cells)[1].std()
        gap = max(np.abs(one[0] - two[0]).max() / spread,
                  np.abs(one[1] - two[1]).max() / (NUGGET + SILL))  # fmt: skip
    print(f"{count:>4}{cells:>9}{ours[0]:>7.2f} ({ours[1]:>4.0f}){theirs[0]:>8.2f} ({theirs[1]:>4.0f})"
          f"{tools[0]:>8.2f} ({tools[1]:>4.0f}){bound:>8.2f}{theirs[0] / ours[0]:>10.1f}"
          f"{tools[0] / ours[0]:>10.1f}{ours[0] / bound:>8.2f}{gap:>11.1e}", flush=True)  # fmt: skip


def apart(program: str, count: int, cells: int):
    """Seconds, MB and the file of the answer, from a process of its own."""
    script = [sys.executable, str(Path(__file__)), "--one", program, str(count), str(cells)]
    answer = subprocess.run(script, check=True, capture_output=True, text=True)
    return json.loads(answer.stdout.splitlines()[-1])


def data(count: int, cells: int):
    """Samples, values and targets of a square field."""
    random = np.random.default_rng(count)
    side = 700.0 if count <= 1000 else 3000.0
    places, values = random.uniform(0, side, (count, 2)), random.normal(1, 0.3, count)
    across = int(np.ceil(np.sqrt(cells)))
    east, north = np.meshgrid(*[(np.arange(across) + 0.5) * side / across] * 2)
    return places, values, np.column_stack([east.ravel(), north.ravel()])[:cells]


def measured(program: str, count: int, cells: int):
    """Run one program here."""
    places, values, targets = data(count, cells)
    work = PROGRAMS[program](places, values, targets)
    quick = program in ("schorl", "bound") and count * cells <= 1e8
    before, seconds, answer = peak_mb(), [], None
    for _ in range(3 if quick else 1):
        started = time.perf_counter()
        answer = work()
        seconds.append(time.perf_counter() - started)
    peak = peak_mb()
    file = ""
    if answer is not None and program in ("schorl", "pykrige"):
        file = str(Path(os.environ.get("TMPDIR", "/tmp")) / f"krige_{program}.npy")
        np.save(file, np.array(answer))
    return min(seconds), peak - before, file


def peak_mb() -> float:
    """The most memory this process ever held (Linux counts in KiB, macOS in bytes)."""
    import resource

    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return most / (1e6 if sys.platform == "darwin" else 1e3)


def schorl_work(places, values, targets):
    from schorl.geostat import Variogram, krige

    model = Variogram(
        family="exponential", nugget=NUGGET, partial_sill=SILL, practical_range_m=REACH_M
    )
    return lambda: krige(places, values, targets, model, filtered=False)


def pykrige_work(places, values, targets):
    from pykrige.ok import OrdinaryKriging

    peer = OrdinaryKriging(
        *places.T, values, variogram_model="exponential",
        variogram_parameters={"psill": SILL, "range": REACH_M, "nugget": NUGGET},
    )  # fmt: skip
    return lambda: peer.execute("points", *targets.T, backend="vectorized")


def gstools_work(places, values, targets):
    import gstools

    model = gstools.Exponential(dim=2, var=SILL, len_scale=REACH_M / 3, nugget=NUGGET)
    peer = gstools.krige.Ordinary(model, places.T, values)
    return lambda: peer(targets.T)


def bound_work(places, values, targets):
    """What any such kriging must do at least."""
    from schorl.geostat.threads import for_each, one_blas_thread

    count = len(places)
    square = np.random.default_rng(0).normal(size=(count, count))
    step = max(262_144 // count, 64)

    def part(start: int) -> None:
        some = targets[start : start + step]
        east = some[:, 0][None, :] - places[:, 0][:, None]
        north = some[:, 1][None, :] - places[:, 1][:, None]
        east *= east
        north *= north
        east += north
        np.sqrt(east, out=east)
        np.negative(east, out=east)
        np.exp(east, out=east)
        np.matmul(square, east, out=north)

    def whole() -> None:
        with one_blas_thread():
            for_each(range(0, len(targets), step), part)

    return whole


PROGRAMS = {
    "schorl": schorl_work,
    "pykrige": pykrige_work,
    "gstools": gstools_work,
    "bound": bound_work,
}

if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

"""The whole job on the 50 ha sample field: wall time and peak memory of a fresh process.

Printed beside the start of an interpreter that only imports the libraries, so that the figures
can be read on any machine.
"""

from __future__ import annotations

import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
JOB = ROOT / "sample_fields" / "long_acre" / "2026"
RUNS = 5
WATCHED = """
import resource, runpy, sys
sys.argv = sys.argv[1:]
try:
    runpy.run_module(sys.argv[0], run_name="__main__", alter_sys=True)
finally:
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    sys.stderr.write(f"peak {peak}\\n")
"""


def main(_arguments: list[str]) -> int:
    """Time the job, the bare imports and ``schorl --help``."""
    libraries = "import numpy, scipy, shapely, pyproj, geopandas, fiona, rasterio, sklearn, pykrige"
    rows = [
        ("imports alone", lambda folder: [sys.executable, "-c", libraries]),
        ("schorl --help", lambda folder: [sys.executable, "-m", "schorl", "--help"]),
        ("prescribe, 5 m", _job),
    ]
    print(f"{'what':<18}{'median s':>10}{'least s':>10}{'peak MB':>10}")
    for name, command in rows:
        seconds, peak = _measured(command)
        shown = f"{peak:>10.0f}" if peak else f"{'':>10}"
        print(f"{name:<18}{sorted(seconds)[len(seconds) // 2]:>10.2f}{min(seconds):>10.2f}{shown}")
    return 0


def _job(folder: Path) -> list[str]:
    job = ["schorl", "prescribe", str(JOB), "--out", str(folder), "--cell-m", "5", "--quiet"]
    return [sys.executable, "-c", WATCHED, *job]


def _measured(command: Callable[[Path], list[str]]) -> tuple[list[float], float]:
    seconds, peak = [], 0.0
    for _ in range(RUNS):
        folder = Path(tempfile.mkdtemp())
        started = time.perf_counter()
        done = subprocess.run(command(folder), capture_output=True, text=True, check=False)
        seconds.append(time.perf_counter() - started)
        shutil.rmtree(folder)
        if done.returncode:
            sys.exit(done.stderr)
        if "peak " in done.stderr:
            peak = max(peak, float(done.stderr.rsplit("peak ", 1)[1].split()[0]) / 1024)
    return seconds, peak


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

"""Make an environment with what the tests need, and run all checks and tests.

python scripts/test.py [arguments for pytest]
"""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

from environment import ROOT, made

#: Lowest share of lines and branches that the whole suite must reach, in per cent.
LEAST_COVERAGE = 85


def main(arguments: list[str]) -> int:
    """Run formatting, lint, types, floors and tests; the first failure decides the exit code."""
    python = made(".venv-test", extra="test")
    # One BLAS thread a process: two workers share two cores, and bytes do not depend on cores.
    settings = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}
    scripts = python.parent
    tests: list[str | Path] = [python, "-m", "pytest", *(arguments or _all_tests())]
    checks: list[list[str | Path]] = [] if arguments else _checks(python, scripts)
    for command in [*checks, tests]:
        print("$", *[Path(part).name for part in command[:1]], *command[1:4], flush=True)
        code = subprocess.run(command, cwd=ROOT, env=settings, check=False).returncode
        if code:
            return code
    return 0


def _checks(python: Path, scripts: Path) -> list[list[str | Path]]:
    return [
        [python, "-m", "ruff", "check", "src", "tests", "scripts"],
        [python, "-m", "ruff", "format", "--check", "src", "tests", "scripts"],
        [python, "-m", "mypy"],
        [scripts / ("lint-imports.exe" if os.name == "nt" else "lint-imports")],
    ]


def _all_tests() -> list[str]:
    return [
        "-n",
        "2",
        "--dist",
        "worksteal",
        "--cov",
        "schorl",
        "--cov-branch",
        f"--cov-fail-under={LEAST_COVERAGE}",
    ]


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

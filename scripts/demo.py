"""Make an environment, install Schorl, run the main job on a sample field, say where it is.

python scripts/demo.py
"""

from __future__ import annotations

import subprocess
import sys

from environment import ROOT, made

JOB = ROOT / "sample_fields" / "long_acre" / "2026"
OUT = ROOT / "out"


def main() -> int:
    """Run the demo; its exit code is the prescription's."""
    python = made(".venv")
    command = [python, "-m", "schorl", "prescribe", JOB, "--out", OUT, "--replace"]
    code = subprocess.run(command, check=False).returncode
    if code == 0:
        print(f"\nOpen the report in a browser: {next(OUT.glob('*-2026')) / 'report.html'}")
    return code


if __name__ == "__main__":
    sys.exit(main())

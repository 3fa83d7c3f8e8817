"""Speed and memory, side by side in one run, as ratios.

python scripts/bench.py              the whole job on the 50 ha sample field
python scripts/bench.py geostat      kriging beside PyKrige and GSTools
python scripts/bench.py zones        drawing zones
python scripts/bench.py formats      writing all formats, verifying large files
"""

from __future__ import annotations

import sys
from importlib import import_module
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

PARTS = ("job", "geostat", "zones", "formats")


def main(arguments: list[str]) -> int:
    """Run the benchmark that is named, the whole job by default."""
    part, rest = (arguments[0], arguments[1:]) if arguments else ("job", [])
    if part not in PARTS:
        print(__doc__, file=sys.stderr)
        return 2
    return int(import_module(f"benchmarks.{part}").main(rest) or 0)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

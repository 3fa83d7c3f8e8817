"""How good the maps and decisions are, on real and simulated fields.

python scripts/quality.py zones      flat or zones: decisions on fresh simulated fields
python scripts/quality.py surfaces   map quality beside PyKrige and a least-squares variogram
python scripts/quality.py censored   values below the limit: draws against half the limit
python scripts/quality.py seasons    changes found and invented, on simulated pairs of seasons
"""

from __future__ import annotations

import sys
from importlib import import_module
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

PARTS = ("zones", "surfaces", "censored", "seasons")


def main(arguments: list[str]) -> int:
    """Run the quality check that is named, zones by default."""
    part, rest = (arguments[0], arguments[1:]) if arguments else ("zones", [])
    if part not in PARTS:
        print(__doc__, file=sys.stderr)
        return 2
    return int(import_module(f"quality_checks.{part}").main(rest) or 0)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

"""Flat or zones: decisions on fresh simulated fields, zone composites, and awkward shapes.

python scripts/quality.py zones                     everything, 630 fields a sample number (an hour)
python scripts/quality.py zones --fields 70         fewer fields
python scripts/quality.py zones --samples 60        one sample number
python scripts/quality.py zones --part decisions|composites|awkward
python scripts/quality.py zones --seed 7            other fields (default 2026)
python scripts/quality.py zones --minutes 20        stop each sample number after so long

The generator stands in zone_simulation.py. Every field goes through the program's own mapping and
zoning; the other rules choose among the same cluster maps of the same fields.
"""

from __future__ import annotations

import argparse
import sys

from quality_checks.zone_awkward import awkward_report
from quality_checks.zone_composites import composites_report
from quality_checks.zone_decisions import decisions_report

SAMPLE_NUMBERS = (30, 60, 120)


def main(argv: list[str]) -> int:
    """Print the figures asked for."""
    parser = argparse.ArgumentParser(prog="quality.py zones", description=__doc__)
    parser.add_argument("--fields", type=int, default=630)
    parser.add_argument("--samples", type=int, choices=SAMPLE_NUMBERS)
    parser.add_argument("--part", choices=("decisions", "composites", "awkward"))
    parser.add_argument("--minutes", type=float, default=1e9)
    parser.add_argument("--seed", type=int, default=2026)
    asked = parser.parse_args(argv)
    numbers = (asked.samples,) if asked.samples else SAMPLE_NUMBERS
    if asked.part in (None, "decisions"):
        for number in numbers:
            decisions_report(number, asked.fields, seed=asked.seed, minutes=asked.minutes)
    if asked.part in (None, "composites"):
        composites_report(min(asked.fields, 300), seed=asked.seed, minutes=asked.minutes)
    if asked.part in (None, "awkward"):
        awkward_report(min(asked.fields, 300), seed=asked.seed)
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

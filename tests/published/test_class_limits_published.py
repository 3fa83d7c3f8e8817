"""Class limits by country against the figures their sources print, typed anew from the sources.

Where the project's reading notes lie beside the checkout, every row is also held against them.
"""

from __future__ import annotations

import csv
from pathlib import Path

import pytest

from schorl.agronomy.targets import class_rows, regions

NOTES = Path(__file__).resolve().parents[3] / "shared" / "agronomy" / "01_soil_test_classes.csv"

#: Region: the lower end of "adequate" by clay content, and the source that prints it.
PRINTED = {
    # British Beet Research Organisation, Advisory Bulletin 15: unlikely from 1.0 mg/L.
    "united kingdom": [(20, 1.0)],
    # J. Sci. Food Agric. 6 (1955):157-162: brown heart possible up to 1.0.
    "united kingdom swede": [(20, 1.0)],
    # Irish index 3 from 1.1 mg/L; Swiss sufficient from 1.6 (open soil-index package).
    "ireland": [(20, 1.1)],
    "switzerland": [(20, 1.6)],
    # French institute for arable crops: 0.8, on clay over limestone 1.2.
    "france": [(20, 0.8)],
    "france limestone": [(45, 1.2)],
    # German class C from 0.15 in sand to 0.35 in loam and clay.
    "germany": [(3, 0.15), (10, 0.2), (20, 0.25), (30, 0.35), (60, 0.35)],
    "netherlands": [(20, 0.35)],
    # SEGES 2021: medium boron number 3.1 to 5.0, that is 0.31 mg/kg.
    "denmark": [(20, 0.31)],
    # Alberta Nutrient Management Planning Guide, table 3.4.2: adequate 0.5 to 3.5.
    "alberta": [(20, 0.5)],
    # Karamanos et al. 2002: critical level 0.35 for canola.
    "western canada": [(20, 0.35)],
    # Penn State Extension; Montana State Fertilizer Facts 75: alfalfa 1.0 ppm.
    "pennsylvania": [(20, 1.0)],
    "montana": [(20, 1.0)],
    # International Plant Nutrition Institute 2015: deficiency to 0.5.
    "australia": [(20, 0.5)],
    # Soil Quality Australia: sufficient from 1.
    "western australia": [(20, 1.0)],
    # Rutgers: critical level 0.5, Mehlich-3.
    "new jersey": [(20, 0.5)],
    # Zbíral 2016: light 0.55, medium 0.70, heavy 0.85, Mehlich-3.
    "czech republic": [(5, 0.55), (25, 0.70), (45, 0.85)],
    # Sousa and Lobato 1996: critical 0.5 mg/dm3; CQFS-RS/SC 2016: high from 0.3.
    "cerrado": [(20, 0.5)],
    "brazil south": [(20, 0.3)],
}


@pytest.mark.parametrize("region", PRINTED)
def test_adequate_starts_where_the_source_says(region):
    for clay, figure in PRINTED[region]:
        row = next(
            row
            for row in class_rows(region)
            if row["organic"] == "no"
            and float(row["clay_from_pct"]) <= clay < float(row["clay_below_pct"])
        )
        assert float(row["adequate_from"]) == figure


def test_upper_classes_as_printed():
    limits = {
        ("ireland", "high_from"): 1.5,
        ("switzerland", "high_from"): 2.0,
        ("denmark", "high_from"): 0.51,
        ("denmark", "excessive_from"): 0.8,
        ("alberta", "excessive_from"): 3.5,
        ("australia", "excessive_from"): 3.0,
        ("western australia", "high_from"): 4.0,
    }
    for (region, column), figure in limits.items():
        assert float(class_rows(region)[0][column]) == figure


def test_published_triggers_run_from_a_tenth_to_one_and_a_half_milligrams():
    """What the report says of them: 0.1 (southern Brazil, low) to 1.6 (Switzerland)."""
    lowest = min(
        float(row[name])
        for region in regions()
        for row in class_rows(region)
        for name in ("low_from", "medium_from", "adequate_from")
        if row[name]
    )
    highest = max(float(row["adequate_from"]) for r in regions() for row in class_rows(r))
    assert (lowest, highest) == (0.1, 1.6)


@pytest.mark.skipif(not NOTES.exists(), reason="the reading notes do not lie beside the checkout")
def test_every_limit_stands_in_the_reading_notes():
    with NOTES.open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    noted = {float(row[end]) for row in rows for end in ("lower", "upper") if row[end]}
    # Printed gaps are closed at the next printed lower limit.
    for region in regions():
        for row in class_rows(region):
            for name in ("low_from", "medium_from", "adequate_from", "high_from", "excessive_from"):
                if row[name]:
                    assert float(row[name]) in noted, (row["id"], name)

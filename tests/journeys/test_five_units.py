"""One field as five laboratories print it: the same rates, through the command."""

from __future__ import annotations

import csv
import shutil
from fractions import Fraction

import pytest

from support.command import FIELDS, run

OWN = "B hot water (mg/kg)"
#: What 1 mg/kg is printed as. A furrow slice of 2,000,000 lb an acre: 1 ppm is 2 lb/acre (Efficient
#: Fertilizer Use Manual), and by the units alone 2 lb/acre are 2.24170231 kg/ha.
PRINTED = {
    "mg/kg": Fraction(1),
    "ug/kg": Fraction(1000),
    "mg/100g": Fraction(1, 10),
    "lb/acre": Fraction(2),
    "kg/ha": Fraction(2) * Fraction("0.45359237") / Fraction("0.40468564224"),
}


def job_in(unit: str, folder):
    """A copy of the sample field whose laboratory prints boron in a unit, without rounding."""
    shutil.copytree(FIELDS / "long_acre/2026", folder)
    table = folder / "soil.csv"
    with table.open(encoding="utf-8", newline="") as stream:
        header, *rows = list(csv.reader(stream))
    place = header.index(OWN)
    header[place] = f"B hot water ({unit})"
    for row in rows:
        mark = row[place][:1] if row[place][:1] == "<" else ""
        row[place] = mark + repr(float(Fraction(row[place].lstrip("< ")) * PRINTED[unit]))
    with table.open("w", encoding="utf-8", newline="") as stream:
        csv.writer(stream).writerows([header, *rows])
    return folder


def rates_of(unit: str, folder):
    job = job_in(unit, folder / "job")
    code, answer = run("prescribe", job, "--out", folder, "--report-depth-cm", "16.93")
    assert code == 0, answer["findings"]
    return [(row["zone"], row["ruled_by"], row["boron_kg_ha"]) for row in answer["result"]["zones"]]


def test_rates_do_not_depend_on_the_laboratorys_unit(tmp_path):
    found = {unit: rates_of(unit, tmp_path / unit.replace("/", "_")) for unit in PRINTED}
    first = found.pop("mg/kg")
    assert max(rate for _, _, rate in first) > 0
    for unit, rows in found.items():
        assert [row[:2] for row in rows] == [row[:2] for row in first], unit
        assert [row[2] for row in rows] == pytest.approx([row[2] for row in first], rel=1e-9), unit

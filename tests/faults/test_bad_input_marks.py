"""Marks, lines and places that read smoothly two ways: asked about, left out with a word, or right.

Each case is a file as a laboratory or a field program writes it; nothing may be read as a figure
that the sheet does not say.
"""

from __future__ import annotations

import json

import numpy as np
import pytest

from schorl.findings import errors_among
from schorl.intake.boundaries import read_boundary
from schorl.intake.samples import read_samples
from schorl.model.reading import SampleHints
from support.files import HEADER, SQUARE, boundary_text, degrees, sample_rows, table_text, write

ROWS = sample_rows(24)
BORON = np.array([float(row[3]) for row in ROWS])
LIMED = [*HEADER, "Ca (mg/kg)"]


@pytest.fixture
def field(tmp_path):
    return read_boundary(write(tmp_path / "b.geojson", boundary_text())).value


def read(tmp_path, field, text, *, encoding="utf-8", name="s.csv", **hints):
    given = {"method": "hot water", "depth_cm": 20.0, **hints}
    path = write(tmp_path / name, text, encoding=encoding)
    return read_samples(path, field=field, hints=SampleHints(**given))


def codes(reading):
    return [one.code for one in reading.findings]


def calcium(function, *, mark=";", comma=False):
    """The good table with calcium; with decimal commas where wanted."""
    rows = []
    for number, row in enumerate(ROWS):
        cells = [
            *row[:1],
            *(c.replace(".", ",") if comma else c for c in row[1:]),
            function(number),
        ]
        rows.append([f'"{c}"' if mark in c else c for c in cells])
    return table_text(rows, LIMED, mark=mark)


@pytest.mark.parametrize(
    "text",
    [
        # Points part decimals elsewhere: 1,234 is a thousand and more, or a slip. It is asked.
        calcium(lambda n: f"1,{234 + n}"),
        calcium(lambda n: f"1,{234 + n}", mark=","),
        calcium(lambda n: f"1,{234 + n}", mark="\t"),
        # Commas part decimals elsewhere: 1.234 is asked about just the same.
        calcium(lambda n: f"1.{234 + n}", comma=True),
        # One column writes both.
        calcium(lambda n: f"1.{234 + n}" if n % 2 else "987,5", comma=True),
        calcium(lambda n: f"1,{234 + n}" if n % 2 else "987.5"),
    ],
)
def test_thousands_are_never_read_as_decimals(tmp_path, field, text):
    reading = read(tmp_path, field, text)
    assert reading.value is None
    found = next(one for one in reading.findings if one.code == "IN-THOUSANDS")
    assert found.exit == 3
    assert "Ca (mg/kg)" in found.what
    assert "line 2" in found.where or "line 3" in found.where
    assert "may be 12" in found.what


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        (calcium(lambda n: f"{1234 + n}"), 1234),
        (calcium(lambda n: f"1,{234 + n}.0"), 1234),  # both marks: the last parts decimals
        (calcium(lambda n: f"1.{234 + n},0", comma=True), 1234),
        (calcium(lambda n: "12,5" if n else "1,234", comma=True), 1.234),  # the column tells
        (calcium(lambda n: f"1,{234 + n}", comma=True), 1.234),  # the table has commas only
        (calcium(lambda n: f"1.{234 + n}"), 1.234),  # the table has points only
        (calcium(lambda n: f"0.{234 + n}"), 0.234),  # nothing before the mark
    ],
)
def test_figures_that_can_be_read_one_way_are(tmp_path, field, text, wanted):
    reading = read(tmp_path, field, text)
    assert not errors_among(reading.findings)
    assert reading.value.properties["calcium"].values[0] == pytest.approx(wanted)
    assert reading.value.properties["boron"].values == pytest.approx(BORON)


def test_boron_in_small_units_with_thousands_is_asked_about(tmp_path, field):
    rows = [[*row[:3], f'"{1 + n % 2},{200 + n}"', *row[4:]] for n, row in enumerate(ROWS)]
    header = [*HEADER[:3], "B (ug/kg)", *HEADER[4:]]
    assert "IN-THOUSANDS" in codes(read(tmp_path, field, table_text(rows, header)))


FOOTERS = [
    "Mean,,,0.61,2.3,17\n",
    "Mean,13.7250,52.0520,0.61,2.3,17\n",  # with a mean place, inside the field
    "Total,,,14.6,,\nAverage,,,0.61,,\n",
    "\nAnalysed by the north bench on 3 March,,,,,\n",
    "All results on dry soil\n",
    "Mittelwert:,,,0.61,2.3,17\nBemerkung: Trockenmasse,,,,,\n",
    "Mean (n = 24),,,0.61,2.3,17\n",
]


@pytest.mark.parametrize("footer", FOOTERS)
def test_lines_under_a_table_are_left_out_and_named(tmp_path, field, footer):
    reading = read(tmp_path, field, table_text() + footer)
    assert not errors_among(reading.findings), codes(reading)
    assert len(reading.value) == len(ROWS)
    assert reading.value.properties["boron"].values == pytest.approx(BORON)
    assert codes(reading).count("IN-FOOTER") == len([one for one in footer.splitlines() if one])
    first = footer.strip().split(",")[0]
    assert any(first in one.what for one in reading.findings if one.code == "IN-FOOTER")


def test_samples_with_names_like_sums_stay(tmp_path, field):
    rows = [*ROWS[:-2], ["Media luna", *ROWS[-2][1:]], ["Max field", *ROWS[-1][1:]]]
    reading = read(tmp_path, field, table_text(rows))
    assert len(reading.value) == len(ROWS)
    assert "IN-FOOTER" not in codes(reading)


def test_a_sample_that_lost_its_values_is_no_footer(tmp_path, field):
    reading = read(tmp_path, field, table_text() + "S25,,,0.61,2.3,17\n")
    assert reading.value is None
    assert "IN-NO-PLACE" in codes(reading)
    assert "IN-FOOTER" not in codes(reading)


@pytest.mark.parametrize("encoding", ["utf-16-le", "utf-16-be"])
def test_wide_letters_without_a_mark_are_refused_plainly(tmp_path, field, encoding):
    reading = read(tmp_path, field, table_text(), encoding=encoding)
    assert [(one.code, one.exit) for one in reading.findings] == [("IN-ENCODING", 3)]
    assert "UTF-16 without its byte order mark" in reading.findings[0].what
    assert "UTF-8" in reading.findings[0].hint


def by_analyte(depths, *, with_depth=True):
    """One analyte a row, several depths a sample; boron falls with depth."""
    lines = [
        "sample;longitude;latitude" + (";Depth" if with_depth else "") + ";Parameter;Result;Unit"
    ]
    for row in ROWS:
        for place, depth in enumerate(depths):
            for name, cell, unit in zip(
                ("B", "OM", "Clay"), row[3:], ("mg/kg", "%", "%"), strict=True
            ):
                held = f"{float(cell) / (1 + place):.3f}"
                start = [*row[:3], depth] if with_depth else row[:3]
                lines.append(";".join([*start, name, held, unit]))
    return "\n".join(lines) + "\n"


def test_rows_by_analyte_with_several_depths_ask_for_one(tmp_path, field):
    text = by_analyte(["0-20 cm", "20-40 cm"])
    asked = read(tmp_path, field, text, depth_cm=None)
    assert "IN-DEPTHS" in codes(asked)
    assert "IN-SAME-NAME" not in [one.code for one in asked.findings if "two results" in one.what]
    given = read(tmp_path, field, text, depth_cm=None, keep_depth="0-20 cm")
    assert not errors_among(given.findings), codes(given)
    assert given.value.properties["boron"].values == pytest.approx(BORON)
    assert given.value.campaign.depth_cm == 20.0


def test_two_results_for_one_thing_are_asked_about(tmp_path, field):
    reading = read(tmp_path, field, by_analyte(["a", "b"], with_depth=False))
    assert reading.value is None
    assert "IN-SAME-NAME" in codes(reading)


@pytest.mark.parametrize(
    "latitude",
    ["52°03'12\"N", "52 03 12", "52° 3.2'", "52:03:12", "N52.0533", "52.0533N", "52d03m12s"],
)
def test_degrees_with_minutes_are_refused(tmp_path, field, latitude):
    cell = '"' + latitude.replace('"', '""') + '"'
    rows = [[*row[:2], cell, *row[3:]] for row in ROWS]
    reading = read(tmp_path, field, table_text(rows))
    assert reading.value is None
    found = [one for one in reading.findings if one.code == "IN-NO-PLACE"]
    assert len(found) == len(ROWS)
    assert all(one.exit == 3 for one in found)
    if latitude not in ("N52.0533", "52.0533N"):
        assert "decimal degrees" in found[0].hint


def multi(*rings):
    features = [
        {"type": "Feature", "properties": {"field": "Twin"},
         "geometry": {"type": "Polygon", "coordinates": [degrees(ring)]}}
        for ring in rings
    ]  # fmt: skip
    return json.dumps({"type": "FeatureCollection", "features": features})


def moved(east):
    return [(x + east, y) for x, y in SQUARE]


def test_parts_kilometres_apart_are_named(tmp_path):
    far = read_boundary(write(tmp_path / "far.geojson", multi(SQUARE, moved(4400))))
    assert codes(far) == ["IN-FAR-PARTS"]
    assert "4.0 km" in far.findings[0].what
    assert "12.01 ha" in far.findings[0].what
    near = read_boundary(write(tmp_path / "near.geojson", multi(SQUARE, moved(1000))))
    assert codes(near) == []
    # A chain of parts, each near the next, is one field however long it is.
    chain = multi(*(moved(900 * place) for place in range(6)))
    assert codes(read_boundary(write(tmp_path / "chain.geojson", chain))) == []


CRS84 = {"type": "name", "properties": {"name": "urn:ogc:def:crs:OGC:1.3:CRS84"}}


@pytest.mark.parametrize("given", ["EPSG:4326", "OGC:CRS84", "epsg:4326"])
@pytest.mark.parametrize("declared", [None, CRS84])
def test_one_system_under_two_names_is_no_clash(tmp_path, given, declared):
    more = {} if declared is None else {"crs": declared}
    reading = read_boundary(write(tmp_path / "b.geojson", boundary_text(**more)), crs=given)
    assert codes(reading) == []
    plain = read_boundary(write(tmp_path / "c.geojson", boundary_text())).value
    assert reading.value.area_ha == pytest.approx(plain.area_ha)
    assert reading.value.boundary.equals_exact(plain.boundary, 1e-6)


def test_another_system_still_clashes(tmp_path):
    reading = read_boundary(write(tmp_path / "b.geojson", boundary_text()), crs="EPSG:4258")
    assert codes(reading) == ["IN-CRS-CLASH"]


@pytest.mark.parametrize("system", ["OGC:CRS84", "EPSG:4326"])
def test_samples_in_either_name_of_the_system(tmp_path, field, system):
    reading = read(tmp_path, field, table_text(), crs=system)
    plain = read(tmp_path, field, table_text(), name="t.csv")
    assert reading.value.east_north_m == pytest.approx(plain.value.east_north_m)
    swapped = [[row[0], "95.5", row[2], *row[3:]] for row in ROWS]
    far = [[row[0], "412000", "5768000", *row[3:]] for row in swapped]
    assert "IN-DEGREES" in codes(read(tmp_path, field, table_text(far), name="u.csv", crs=system))


def test_a_mended_outline_says_its_areas(tmp_path):
    spike = [(0, 0), (400, 0), (400, 150), (401, 150), (399.5, 150.5), (400, 300), (0, 300), (0, 0)]
    twisted = [(0, 0), (400, 0), (400, 150), (400.5, 150.2), (400, 150.4), (400.5, 150), (400, 300),
               (0, 300), (0, 0)]  # fmt: skip
    for ring in (spike, twisted):
        reading = read_boundary(write(tmp_path / "b.geojson", boundary_text([ring])))
        for one in reading.findings:
            assert one.code == "IN-MENDED"
            assert "12.01" in one.what
            assert "ha before" in one.what
            assert "after" in one.what
    assert codes(reading) == ["IN-MENDED"]

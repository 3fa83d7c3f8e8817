"""More bad input: what reads smoothly and would still be wrong.

Each case spoils good files in one way and names the finding it must give, its exit code and a word
of its message. Nothing here may end in a traceback or in samples that differ from the sheet.
"""

from __future__ import annotations

import csv
import hashlib
import io
import json
import zipfile

import numpy as np
import openpyxl
import pytest

from schorl.findings import errors_among
from schorl.intake.applied import read_applied
from schorl.intake.boundaries import read_boundary
from schorl.intake.checks import check_samples
from schorl.intake.samples import read_samples
from schorl.model.reading import SampleHints
from support.files import HEADER, SQUARE, boundary_text, degrees, sample_rows, table_text, write

H, ROWS = HEADER, sample_rows(24)
HINTS = {"method": "hot water", "depth_cm": 20.0}


@pytest.fixture
def field(tmp_path):
    return read_boundary(write(tmp_path / "b.geojson", boundary_text())).value


def column(place, function):
    """The good rows with one column made from (number of the row, its cell)."""
    rows = [list(row) for row in ROWS]
    for number, row in enumerate(rows):
        row[place] = function(number, row[place])
    return rows


def with_column(header, function):
    """The good table with a further column."""
    return table_text([[*row, function(n)] for n, row in enumerate(ROWS)], [*H, header])


def renamed(place, header):
    return table_text(header=[*H[:place], header, *H[place + 1 :]])


def joined(mark, rows, header=H):
    return "\n".join(mark.join(row) for row in [header, *rows]) + "\n"


def workbook(rows, change=None):
    book = openpyxl.Workbook()
    for row in rows:
        book.active.append(row)
    if change is not None:
        change(book.active)
    buffer = io.BytesIO()
    book.save(buffer)
    return buffer.getvalue()


def figures():
    return [H, *([row[0], *map(float, row[1:])] for row in ROWS)]


def damaged(data, first, last):
    spoiled = bytearray(data)
    for place in range(first, min(last, len(spoiled))):
        spoiled[place] ^= 0x55
    return bytes(spoiled)


def far_cell(sheet):
    sheet["XFD3000"] = 1


NO_DEPTH = {"depth_cm": None}
LOST = [row if n != 4 else [*row[:2], *row[3:]] for n, row in enumerate(ROWS)]
MORE = [row if n != 4 else [*row[:3], "9", *row[3:]] for n, row in enumerate(ROWS)]
BARE_COMMAS = [[cell.replace(".", ",") for cell in row] for row in ROWS]
UNIT_ROW = "\n".join([",".join(H), ",,,ug/kg,%,%", *map(",".join, ROWS)]) + "\n"
TWICE = table_text([[*row, row[3]] for row in ROWS], [*H, H[3]])
TABLES = [
    # name, content, hints, code, exit, a word of the message
    ("a cell lost", table_text(LOST), {}, "IN-RAGGED", 3, "line 6 has 5 cells"),
    ("a cell more", table_text(MORE), {}, "IN-RAGGED", 3, "line 6 has 7 cells"),
    ("commas in figures", joined(",", BARE_COMMAS), {}, "IN-RAGGED", 3, "23 more lines"),
    ("open quotation", table_text().replace("\nS5,", '\n"S5,'), {}, "IN-BROKEN", 3, "line"),
    ("endless cell", "a," + "x" * 200_000 + "\n" + table_text(), {}, "IN-BROKEN", 3, "limit"),
    ("unit row differs", UNIT_ROW, {}, "IN-UNIT", 3, "ug/kg"),
    ("unit differs", table_text(), {"units": {"boron": "lb/acre"}}, "IN-UNIT", 3, "lb/acre"),
    ("method differs", renamed(3, "B Mehlich-3 (ppm)"), {}, "IN-METHOD-CLASH", 4, "mehlich-3"),
    ("depth differs", renamed(3, "B 0-15 cm (ppm)"), {}, "IN-DEPTH-CLASH", 3, "15 cm"),
    ("depth differs in a column", with_column("Depth (cm)", lambda _: "0-30"), {},
     "IN-DEPTH-CLASH", 3, "30 cm"),
    ("depth without a unit", with_column("Depth", lambda _: "8"), NO_DEPTH, "IN-DEPTH", 3, "depth"),
    ("range without a unit", with_column("Depth", lambda _: "0-8"), NO_DEPTH, "IN-DEPTH", 3, "depth"),
    ("subsoil", with_column("Depth (cm)", lambda _: "30-60"), NO_DEPTH, "IN-DEPTH", 3, "depth"),
    ("no such sample", table_text(), {"strike_out": ("Nope",)}, "IN-NO-SUCH-SAMPLE", 3, "nope"),
    ("boron of 0", table_text(column(3, lambda n, v: "0" if n < 3 else v)), {}, "IN-NOUGHT", 3, "boron"),
    ("matter of 0", table_text(column(4, lambda n, v: "0.0" if n < 3 else v)), {}, "IN-NOUGHT", 3, "0"),
    ("clay of 0", table_text(column(5, lambda n, v: "0" if n < 3 else v)), {}, "IN-NOUGHT", 3, "clay"),
    ("total boron", renamed(3, "Boron (Total) ppm"), {}, "IN-NO-BORON", 3, "Total"),
    ("boron by aqua regia", renamed(3, "B (aqua regia) ppm"), {}, "IN-NO-BORON", 3, "aqua"),
    ("recommended boron", renamed(3, "B rec (lb/ac)"), {}, "IN-NO-BORON", 3, "rec"),
    ("applied boron", renamed(3, "B applied (kg/ha)"), {}, "IN-NO-BORON", 3, "applied"),
    ("two latitudes", with_column("Lat", lambda _: "51.0"), {}, "IN-TWO-COLUMNS", 3, "Lat"),
    ("one header twice", TWICE, {"columns": {"boron": H[3]}}, "IN-TWO-COLUMNS", 3, H[3]),
    ("hint of a column that is none", table_text(), {"columns": {"boron": "x"}}, "IN-COLUMN", 3, "`x`"),
    ("minutes and seconds", table_text(column(2, lambda n, v: "52°03'12\"N")), {}, "IN-NO-PLACE", 3, "52°"),
    ("letters of the west", table_text(column(1, lambda n, v: v + "W")), {}, "IN-NO-PLACE", 3, "W"),
    ("five times too much", table_text(column(3, lambda n, v: f"{float(v) * 5:.2f}" if n == 5 else v)),
     {}, "IN-SLIP", 3, "boron"),
    ("five times too little", table_text(column(3, lambda n, v: f"{float(v) / 5:.3f}" if n == 5 else v)),
     {}, "IN-SLIP", 3, "boron"),
    ("tenths of boron", table_text(column(3, lambda n, v: f"{float(v) / 10:.3f}")), {},
     "IN-UNIT-LIKELY", 0, "boron"),
    ("matter in g/kg", table_text(column(4, lambda n, v: f"{float(v) * 10:.0f}")), {},
     "IN-UNIT-LIKELY", 0, "organic matter"),
    ("matter as a share", table_text(column(4, lambda n, v: f"{float(v) / 100:.3f}")), {},
     "IN-UNIT-LIKELY", 0, "organic matter"),
    ("clay in tenths", table_text(column(5, lambda n, v: f"{float(v) / 10:.1f}")), {},
     "IN-UNIT-LIKELY", 0, "clay"),
    ("declared beside a column", table_text(), {"clay_pct": 22.0}, "IN-DECLARED", 0, "22"),
    ("few clay figures", table_text(column(5, lambda n, v: "22" if n < 3 else "")), {},
     "IN-MISSING", 0, "clay"),
    ("infinite", table_text(column(3, lambda n, v: "inf" if n == 2 else v)), {}, "IN-NOT-NUMBER", 3, "inf"),
    ("above a limit", table_text(column(3, lambda n, v: ">5" if n == 2 else v)), {}, "IN-NOT-NUMBER", 3, ">5"),
    ("a range", table_text(column(3, lambda n, v: "0.5-0.6" if n == 2 else v)), {}, "IN-NOT-NUMBER", 3, "0.5-0.6"),
    ("an error bar", table_text(column(3, lambda n, v: "0.5 ± 0.1" if n == 2 else v)), {}, "IN-NOT-NUMBER", 3, "±"),
    ("a marked figure", table_text(column(3, lambda n, v: "0.5*" if n == 2 else v)), {}, "IN-NOT-NUMBER", 3, "*"),
    ("not a number", table_text(column(3, lambda n, v: "1e400" if n == 2 else v)), {}, "IN-NOT-NUMBER", 3, "1e400"),
    ("a sentinel", table_text(column(3, lambda n, v: "-9999" if n == 2 else v)), {}, "IN-IMPOSSIBLE", 3, "-9999"),
    ("another sentinel", table_text(column(5, lambda n, v: "999" if n == 2 else v)), {}, "IN-IMPOSSIBLE", 3, "999"),
    ("acid beyond acids", with_column("pH", lambda n: "62"), {}, "IN-CONSTANT", 0, "pH"),
    ("a row of means", table_text() + "Mean,,,0.5,2,20\n", {}, "IN-FOOTER", 0, "Mean"),
]  # fmt: skip


def findings_of(path, field, hints):
    before = hashlib.sha256(path.read_bytes()).hexdigest()
    reading = read_samples(path, field=field, hints=SampleHints(**{**HINTS, **hints}))
    assert hashlib.sha256(path.read_bytes()).hexdigest() == before
    assert reading.value is not None or errors_among(reading.findings)
    more = () if reading.value is None else check_samples(reading.value, field)
    return [*reading.findings, *more]


@pytest.mark.parametrize("case", TABLES, ids=lambda case: case[0])
def test_tables_that_read_smoothly(tmp_path, field, case):
    _, content, hints, code, exit_code, word = case
    found = findings_of(write(tmp_path / "s.csv", content), field, hints)
    named = [one for one in found if one.code == code]
    assert named, [(one.code, one.what) for one in found]
    assert all(one.exit == exit_code and one.where and one.hint for one in named)
    assert any(word in one.what for one in named), [one.what for one in named]
    if exit_code == 0:
        assert not errors_among(found)


SHEETS = [
    ("a cell far away", workbook(figures(), far_cell), "IN-ARCHIVE"),
    ("text under the name of a sheet", table_text().encode(), "IN-ARCHIVE"),
    ("damaged", damaged(workbook(figures()), 60, 400), "IN-ARCHIVE"),
    ("cut short", workbook(figures())[:900], "IN-ARCHIVE"),
]


@pytest.mark.parametrize("case", SHEETS, ids=lambda case: case[0])
def test_hostile_and_broken_sheets(tmp_path, field, case):
    _, data, code = case
    found = findings_of(write(tmp_path / "s.xlsx", data), field, {})
    assert [one.code for one in found] == [code]


def test_a_document_type_in_a_sheet_is_refused(tmp_path, field):
    bomb = '<?xml version="1.0"?><!DOCTYPE x [<!ENTITY a "b">]><workbook/>'
    with zipfile.ZipFile(path := tmp_path / "s.xlsx", "w") as made:
        made.writestr("xl/workbook.xml", bomb)
    assert [one.code for one in findings_of(path, field, {})] == ["IN-XML"]


def polygons(*rings, names=None, **more):
    names = names or [{}] * len(rings)
    features = [
        {"type": "Feature", "properties": properties,
         "geometry": {"type": "Polygon", "coordinates": [degrees(ring)]}}
        for ring, properties in zip(rings, names, strict=True)
    ]  # fmt: skip
    return json.dumps({"type": "FeatureCollection", "features": features, **more})


POND = [(100, 100), (200, 100), (200, 200), (100, 200), (100, 100)]
PADDED = f"<?xml version='1.0'?><!--{'x' * (1 << 21)}--><!DOCTYPE k [<!ENTITY a 'b'>]><kml/>"
WIDE = PADDED.replace("x" * (1 << 21), "").encode("utf-16")
WORLD = {
    "type": "MultiPolygon",
    "coordinates": [
        [[[x, 10], [x + 0.01, 10], [x + 0.01, 10.01], [x, 10.01], [x, 10]]] for x in (179.99, -180)
    ],
}
BOUNDARIES = [
    ("a pond drawn apart", "b.geojson", polygons(SQUARE, POND), "IN-NESTED"),
    ("a system of null", "b.geojson", polygons(SQUARE, crs=None), "IN-CRS"),
    ("both sides of 180 degrees", "b.geojson", json.dumps(WORLD), "IN-LARGE"),
    ("a late document type", "b.kml", PADDED, "IN-XML"),
    ("a wide document type", "b.kml", WIDE, "IN-XML"),
    ("another topology", "b.geojson", '{"type": "Topology", "arcs": []}', "IN-BROKEN"),
    ("not a figure", "b.geojson", polygons(SQUARE).replace("[[[", "[[[NaN, 52], [", 1), "IN-BROKEN"),
    ("deep brackets", "b.geojson", "[" * 100_000, "IN-BROKEN"),
]  # fmt: skip


@pytest.mark.parametrize("case", BOUNDARIES, ids=lambda case: case[0])
def test_boundaries_that_would_be_wrong(tmp_path, case):
    _, name, content, code = case
    reading = read_boundary(write(tmp_path / name, content))
    assert [one.code for one in reading.findings] == [code]
    assert reading.value is None


def test_a_damaged_archive_is_a_finding(tmp_path):
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as made:
        made.writestr("a.shp", b"\0\0\x27\x0a" + bytes(range(256)) * 40)
    data = damaged(buffer.getvalue(), 40, 120)
    reading = read_boundary(write(tmp_path / "b.zip", data))
    assert [one.code for one in reading.findings] == ["IN-ARCHIVE"]


def test_zone_names_in_two_columns_are_asked_about(tmp_path, field):
    halves = [[(0, 0), (200, 0), (200, 300), (0, 300), (0, 0)],
              [(200, 0), (400, 0), (400, 300), (200, 300), (200, 0)]]  # fmt: skip
    names = [{"id": "1", "zone": "2"}, {"id": "2", "zone": "1"}]
    layer = write(tmp_path / "z.geojson", polygons(*halves, names=names))
    table = write(tmp_path / "s.csv", "zone,B (ppm),OM (%),clay (%)\n1,0.5,2,20\n2,0.6,2,21\n")
    found = findings_of(table, field, {"zone_layer": layer})
    assert [one.code for one in found] == ["IN-TWO-COLUMNS"]
    reading = read_samples(
        table, field=field, hints=SampleHints(**HINTS, zone_layer=layer, zone_column="id")
    )
    west = reading.value.areas[0].bounds[0] - field.boundary.bounds[0]
    assert west == pytest.approx(0, abs=0.01)


def test_carbon_is_carbon_also_where_it_is_named_as_matter(tmp_path, field):
    path = write(tmp_path / "s.csv", renamed(4, "Corg (%)"))
    hints = SampleHints(**HINTS, columns={"organic_matter": "Corg (%)"})
    read = read_samples(path, field=field, hints=hints).value
    printed = np.array([float(row[4]) for row in ROWS])
    np.testing.assert_allclose(read.properties["organic_matter"].values, printed * 1.724)


@pytest.mark.parametrize(
    ("header", "cell", "depth"),
    [("Depth (mm)", "0-150", 15.0), ("Depth (in)", "0-8", 20.32), ("Depth", "0-20 cm", 20.0),
     ("Depth cm", "20", 20.0)],
)  # fmt: skip
def test_depths_keep_their_unit(tmp_path, field, header, cell, depth):
    path = write(tmp_path / "s.csv", with_column(header, lambda _: cell))
    read = read_samples(path, field=field, hints=SampleHints(method="hot water")).value
    assert read.campaign.depth_cm == pytest.approx(depth)


def test_molybdenum_is_not_organic_matter(tmp_path, field):
    path = write(tmp_path / "s.csv", renamed(4, "Mo (ppm)"))
    read = read_samples(path, field=field, hints=SampleHints(**HINTS)).value
    assert "organic_matter" not in read.properties


def test_applied_boron_of_another_field_is_not_none_applied(tmp_path, field):
    far = [(x + 9000, y) for x, y in SQUARE]
    path = write(tmp_path / "a.geojson", polygons(far, names=[{"boron_kg_ha": 1.0}]))
    reading = read_applied(path, field=field, on=None, column=None, unit="kg B/ha",
                           boron_pct=None, form="", this_season=False)  # fmt: skip
    assert reading.value is None
    assert [one.code for one in reading.findings] == ["IN-ELSEWHERE"]


@pytest.mark.parametrize("mark", [";", "\t", ","])
@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "latin-1"])
def test_good_but_unusual_tables_read_the_same(tmp_path, field, mark, encoding):
    buffer = io.StringIO()
    csv.writer(buffer, delimiter=mark, lineterminator="\r\n").writerows(
        [H, *([cell.replace(".", ",") for cell in row] for row in ROWS)]
    )
    path = write(tmp_path / "s.csv", buffer.getvalue().encode(encoding))
    read = read_samples(path, field=field, hints=SampleHints(**HINTS)).value
    np.testing.assert_allclose(read.properties["boron"].values, [float(row[3]) for row in ROWS])

"""Bad input: never a traceback, never a plausible wrong map; each message says what and where.

Each case spoils good files in one way and names the finding it must give, with its exit code and a
word that its message must hold.
"""

from __future__ import annotations

import io
import json
import zipfile

import pytest

from schorl.findings import errors_among
from schorl.intake.boundaries import read_boundary
from schorl.intake.checks import check_samples
from schorl.intake.samples import read_samples
from schorl.model.reading import SampleHints
from support.files import HEADER, SQUARE, boundary_text, degrees, sample_rows, table_text, write

HINTS = {"method": "hot water", "depth_cm": 20.0}
MOVED = [(x, y + 5000) for x, y in SQUARE]


def spoiled(change, *, count=24):
    rows = sample_rows(count)
    change(rows)
    return table_text(rows)


def cell(row, column, value):
    def change(rows):
        rows[row][column] = value

    return change


def every(column, function):
    def change(rows):
        for row in rows:
            row[column] = function(row)

    return change


def shifted(rows):
    for row, other in zip(rows, sample_rows(24), strict=True):
        row[1], row[2] = str(float(other[1]) + 0.2), other[2]


def swapped(rows):
    for row in rows:
        row[1], row[2] = row[2], row[1]


def same_place(rows):
    rows[3][1:3] = rows[2][1:3]


def one_line(rows):
    for place, row in enumerate(rows):
        ((row[1], row[2]),) = [
            [f"{v:.7f}" for v in one] for one in degrees([(15 * place + 10, 100)])
        ]


def corner(rows):
    for place, row in enumerate(rows):
        spot = (8 * (place % 6) + 10, 8 * (place // 6) + 10)
        ((row[1], row[2]),) = [[f"{v:.7f}" for v in one] for one in degrees([spot])]


H = HEADER
TWO_BORON = table_text([[*row, row[3]] for row in sample_rows()], [*H, "Boron mehlich-3 (ppm)"])
DEPTHS = table_text(
    [[f"{row[0]}{d}", *row[1:], d] for row in sample_rows() for d in ("0-20", "20-40")],
    [*H, "depth (cm)"],
)
TABLES = [
    # content, hints, code, exit, a word of the message
    ("", {}, "IN-EMPTY", 3, "empty"),
    ("\0\0\0\0", {}, "IN-EMPTY", 3, "empty"),
    (b"\x89PNG\r\n\x1a\n\0\0\0\0data\0" * 9, {}, "IN-ENCODING", 3, "binary"),
    (b"\xff\xfe\x00", {}, "IN-ENCODING", 3, "utf-16"),
    ("just words\nand more\n", {}, "IN-HEADER", 3, "names"),
    (table_text([], H), {}, "IN-NO-ROWS", 3, "no sample"),
    (table_text(header=[*H[:3], "B", *H[4:]]), {}, "IN-UNIT", 3, "unit"),
    (table_text(header=[*H[:3], "B (furlongs)", *H[4:]]), {}, "IN-UNIT", 3, "unit"),
    (table_text(header=[*H[:3], "B (%)", *H[4:]]), {}, "IN-UNIT", 3, "cannot be boron"),
    (table_text(header=[*H[:3], "B (mg/L)", *H[4:]]), {}, "IN-VOLUME", 3, "extract"),
    (table_text(header=[*H[:3], "B (mg/dm3)", *H[4:]]), {}, "IN-VOLUME", 3, "extract"),
    (table_text(header=[*H[:3], "Mn (ppm)", *H[4:]]), {}, "IN-NO-BORON", 3, "no column"),
    (table_text(header=[*H[:4], "OM", H[5]]), {}, "IN-UNIT", 3, "unit"),
    (table_text(header=[*H[:4], "OM (mg/kg)", H[5]]), {}, "IN-UNIT", 3, "organic matter"),
    (table_text(header=["sample", "a", "b", *H[3:]]), {}, "IN-NO-PLACE", 3, "coordinates"),
    (table_text(header=["sample", "x", "y", *H[3:]]), {}, "IN-CRS", 3, "coordinate system"),
    (table_text(), {"method": None}, "IN-METHOD", 3, "extracted"),
    (table_text(), {"depth_cm": None}, "IN-DEPTH", 3, "depth"),
    (table_text(), {"columns": {"boron": "nope"}}, "IN-COLUMN", 3, "nope"),
    (table_text(), {"units": {"boron": "furlong"}}, "IN-UNIT", 3, "furlong"),
    (table_text(), {"crs": "EPSG:nonsense"}, "IN-CRS", 3, "not a coordinate system"),
    (TWO_BORON, {}, "IN-TWO-COLUMNS", 3, "2 columns"),
    (DEPTHS, {}, "IN-DEPTHS", 3, "0-20"),
    (DEPTHS, {"keep_depth": "60-90"}, "IN-DEPTHS", 3, "60-90"),
    (spoiled(cell(4, 3, "abc")), {}, "IN-NOT-NUMBER", 3, "abc"),
    (spoiled(cell(4, 3, "0.5.1")), {}, "IN-NOT-NUMBER", 3, "0.5.1"),
    (spoiled(cell(4, 3, "#REF!")), {}, "IN-NOT-NUMBER", 3, "#REF!"),
    (spoiled(cell(4, 3, "3-Mar")), {}, "IN-NOT-NUMBER", 3, "3-Mar"),
    (spoiled(cell(4, 5, "sandy")), {}, "IN-NOT-NUMBER", 3, "sandy"),
    (spoiled(cell(4, 3, "ND")), {}, "IN-LIMIT", 3, "not detected"),
    (spoiled(cell(4, 3, "Tr")), {}, "IN-LIMIT", 3, "not detected"),
    (spoiled(cell(4, 3, "0.5 lb/acre")), {}, "IN-UNIT", 3, None),
    (spoiled(cell(4, 1, "")), {}, "IN-NO-PLACE", 3, "coordinate"),
    (spoiled(cell(4, 2, "north")), {}, "IN-NO-PLACE", 3, "north"),
    (spoiled(cell(4, 2, "512.3")), {}, "IN-DEGREES", 3, "longitude"),
    (spoiled(every(1, lambda row: "412100")), {}, "IN-DEGREES", 3, "longitude"),
    (spoiled(cell(4, 0, "S1")), {}, "IN-SAME-NAME", 3, "S1"),
    (spoiled(cell(4, 3, "-0.4")), {}, "IN-IMPOSSIBLE", 3, "-0.4"),
    (spoiled(cell(4, 3, "61")), {}, "IN-IMPOSSIBLE", 3, "61"),
    (spoiled(cell(4, 4, "140")), {}, "IN-IMPOSSIBLE", 3, "140"),
    (spoiled(cell(4, 5, "180")), {}, "IN-IMPOSSIBLE", 3, "180"),
    (spoiled(cell(4, 3, "6.1")), {}, "IN-SLIP", 3, "6.1"),
    (spoiled(cell(4, 3, "0.061")), {}, "IN-SLIP", 3, "0.061"),
    (spoiled(cell(4, 4, "22.0")), {}, "IN-SLIP", 3, "22"),
    (spoiled(every(3, lambda row: f"{float(row[3]) * 25:.2f}")), {}, "IN-UNIT-ODD", 3, "middle"),
    (spoiled(every(3, lambda row: f"{float(row[3]) / 60:.4f}")), {}, "IN-UNIT-ODD", 3, "middle"),
    (spoiled(every(5, lambda row: f"{float(row[5]) / 100:.3f}")), {}, "IN-UNIT-ODD", 3, "share"),
    (spoiled(shifted), {}, "IN-ELSEWHERE", 3, "outside"),
    (spoiled(swapped), {}, "IN-SWAPPED", 3, "swapped"),
    (spoiled(same_place), {}, "IN-DUPLICATE", 3, "S3"),
    (table_text(sample_rows()[:3]), {}, "IN-TOO-FEW", 4, "3 samples"),
    (table_text(sample_rows()[:9]), {}, "IN-FEW", 0, "9 samples"),
    (spoiled(one_line), {}, "IN-LINE", 0, "line"),
    (spoiled(corner), {}, "IN-CORNER", 0, "enclose"),
    (spoiled(cell(4, 3, "")), {}, "IN-MISSING", 0, "S5"),
    (table_text(), {"strike_out": tuple(f"S{i}" for i in range(1, 25))}, "IN-NO-ROWS", 3, "no sample"),
]  # fmt: skip


def findings_of(tmp_path, content, hints):
    field = read_boundary(write(tmp_path / "b.geojson", boundary_text())).value
    path = write(tmp_path / "s.csv", content)
    reading = read_samples(path, field=field, hints=SampleHints(**{**HINTS, **hints}))
    found = list(reading.findings)
    if reading.value is not None:
        found += check_samples(reading.value, field)
    else:
        assert errors_among(found)
    return found


@pytest.mark.parametrize("case", TABLES, ids=lambda case: f"{case[2]}-{case[4]}")
def test_bad_tables(tmp_path, case):
    content, hints, code, exit_code, word = case
    found = findings_of(tmp_path, content, hints)
    named = [one for one in found if one.code == code]
    assert named, [(one.code, one.what) for one in found]
    assert all(one.exit == exit_code and one.where and one.hint for one in named)
    assert word is None or any(word in one.what for one in named)


def test_all_findings_come_at_once(tmp_path):
    def change(rows):
        rows[2][3], rows[5][5], rows[7][1] = "abc", "?", "x"

    found = findings_of(tmp_path, spoiled(change), {})
    assert {"IN-NOT-NUMBER", "IN-NO-PLACE"} <= {one.code for one in found}
    assert sum(one.code == "IN-NOT-NUMBER" for one in found) == 2


def test_confirmed_and_struck_out_samples_pass(tmp_path):
    field = read_boundary(write(tmp_path / "b.geojson", boundary_text())).value
    path = write(tmp_path / "s.csv", spoiled(cell(4, 3, "6.1")))
    samples = read_samples(path, field=field, hints=SampleHints(**HINTS)).value
    assert not errors_among(check_samples(samples, field, confirmed=("S5",)))
    hints = SampleHints(**HINTS, strike_out=("S5",))
    fewer = read_samples(path, field=field, hints=hints).value
    assert len(fewer) == len(samples) - 1
    assert not errors_among(check_samples(fewer, field))


BOW_TIE = [(0, 0), (400, 300), (400, 0), (0, 300), (0, 0)]
NO_SYSTEM = json.dumps(
    {"type": "Polygon", "coordinates": [[[4e5, 5e6], [4e5, 5.1e6], [5e5, 5e6], [4e5, 5e6]]]}
)
POINT = json.dumps({"type": "Point", "coordinates": [13.7, 52.0]})
LINE = json.dumps({"type": "LineString", "coordinates": [[13.7, 52.0], [13.8, 52.1]]})
XML_BOMB = '<?xml version="1.0"?><!DOCTYPE k [<!ENTITY a "aaaa">]><kml>&a;</kml>'
BOUNDARIES = [
    ("b.geojson", "", "IN-EMPTY"),
    ("b.geojson", "{", "IN-BROKEN"),
    ("b.geojson", "[1, 2]", "IN-BROKEN"),
    ("b.geojson", "{}", "IN-BROKEN"),
    ("b.geojson", boundary_text()[:200], "IN-BROKEN"),
    ("b.geojson", '{"type": "FeatureCollection", "features": []}', "IN-NO-AREA"),
    ("b.geojson", boundary_text([BOW_TIE]), "IN-INVALID"),
    ("b.geojson", boundary_text([[(0, 0), (4, 0), (4, 3), (0, 3), (0, 0)]]), "IN-SMALL"),
    ("b.geojson", NO_SYSTEM, "IN-DEGREES"),
    ("b.geojson", POINT, "IN-NOT-AREA"),
    ("b.geojson", LINE, "IN-NOT-AREA"),
    ("b.shp", "not a shapefile", "IN-BROKEN"),
    ("b.gpkg", "not a database", "IN-BROKEN"),
    ("b.kml", XML_BOMB, "IN-XML"),
    ("b.kml", XML_BOMB.replace("<!DOCTYPE", "<!doctype"), "IN-XML"),
    ("b.kml", "<kml", "IN-BROKEN"),
    ("b.zip", "not a zip", "IN-ARCHIVE"),
    ("b.vrt", "<OGRVRTDataSource/>", "IN-KIND"),
    ("b.dxf", "0\nSECTION", "IN-KIND"),
    ("b", "x", "IN-KIND"),
]  # fmt: skip


@pytest.mark.parametrize("case", BOUNDARIES, ids=lambda case: f"{case[0]}-{case[2]}")
def test_bad_boundaries(tmp_path, case):
    name, content, code = case
    reading = read_boundary(write(tmp_path / name, content))
    assert [one.code for one in reading.findings] == [code]
    assert reading.value is None or code in ("IN-SMALL",)
    assert all(one.exit == 3 and one.hint for one in reading.findings)


def archive(**members):
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as made:
        for name, data in members.items():
            made.writestr(name, data)
    return buffer.getvalue()


@pytest.mark.parametrize(
    "data",
    [
        archive(**{"bomb.shp": b"\0" * (40 << 20)}),
        archive(**{f"f{i}.txt": b"x" for i in range(1200)}),
        archive(**{"a.txt": b"no shapefile"}),
        archive(**{"a.shp": b"\0\0\x27\x0a", "b.shp": b"\0\0\x27\x0a"}),
        archive(**{"../../evil.shp": b"\0\0\x27\x0a junk"}),
    ],
    ids=["ratio", "entries", "nothing", "two", "traversal"],
)
def test_hostile_archives(tmp_path, data):
    inside = tmp_path / "in"
    reading = read_boundary(write(inside / "b.zip", data))
    assert reading.value is None
    assert {one.code for one in reading.findings} <= {"IN-ARCHIVE", "IN-LAYERS", "IN-BROKEN"}
    assert [one.name for one in tmp_path.iterdir()] == ["in"]
    assert [one.name for one in inside.iterdir()] == ["b.zip"]


def test_two_coordinate_systems_clash(tmp_path):
    reading = read_boundary(write(tmp_path / "b.geojson", boundary_text()), crs="EPSG:32633")
    assert [one.code for one in reading.findings] == ["IN-CRS-CLASH"]


def test_a_small_self_touch_is_mended_and_said(tmp_path):
    ring = [
        (0, 0),
        (400, 0),
        (400, 300),
        (200, 300),
        (200.5, 300.5),
        (199.5, 300.5),
        (200, 300),
        (0, 300),
        (0, 0),
    ]
    reading = read_boundary(write(tmp_path / "b.geojson", boundary_text([ring])))
    assert reading.value is not None
    assert [one.code for one in reading.findings] == ["IN-MENDED"]


def test_a_field_across_a_zone_edge_gets_a_system_of_its_own(tmp_path):
    ring = [[11.998, 52.0], [12.004, 52.0], [12.004, 52.003], [11.998, 52.003], [11.998, 52.0]]
    text = json.dumps({"type": "Polygon", "coordinates": [ring]})
    field = read_boundary(write(tmp_path / "b.geojson", text)).value
    assert field.epsg is None
    assert field.area_ha == pytest.approx(field.boundary.area / 1e4, rel=2e-4)


def test_zone_layers_are_joined_by_name(tmp_path):
    field = read_boundary(write(tmp_path / "b.geojson", boundary_text())).value
    halves = [SQUARE, MOVED]
    features = [
        {"type": "Feature", "properties": {"zone": name},
         "geometry": {"type": "Polygon", "coordinates": [degrees(ring)]}}
        for name, ring in zip(("A", "B"), halves, strict=True)
    ]  # fmt: skip
    layer = write(
        tmp_path / "z.geojson", json.dumps({"type": "FeatureCollection", "features": features})
    )
    table = write(tmp_path / "s.csv", "zone,B (ppm),OM (%),clay (%)\nA,0.5,2,20\nC,0.6,2,21\n")
    hints = SampleHints(**HINTS, zone_layer=layer)
    reading = read_samples(table, field=field, hints=hints)
    assert [one.code for one in reading.findings] == ["IN-JOIN"]
    assert "`C`" in reading.findings[0].what

"""Headers, units and cells as laboratories write them."""

from __future__ import annotations

import csv
import io

import geopandas
import numpy as np
import openpyxl
import pytest
import shapely

from schorl.intake.boundaries import read_boundary
from schorl.intake.headers import recognise
from schorl.intake.quantities import read_cell, unit_named
from schorl.intake.samples import read_samples
from schorl.model.reading import SampleHints
from support.files import HEADER, boundary_text, sample_rows, table_text, write

HINTS = SampleHints(method="hot water", depth_cm=20.0)


@pytest.fixture
def field(tmp_path):
    return read_boundary(write(tmp_path / "b.geojson", boundary_text())).value


@pytest.mark.parametrize(
    ("header", "what", "unit"),
    [
        ("B (ppm)", "boron", "mg/kg"), ("Boron, mg/kg", "boron", "mg/kg"),
        ("Bor [mg/kg]", "boron", "mg/kg"), ("Bore (mg/kg)", "boron", "mg/kg"),
        ("Boro (mg/dm³)", "boron", "mg/L"), ("Bor mg/100g", "boron", "mg/100g"),
        ("B_ppm", "boron", "mg/kg"), ("B lb/acre", "boron", "lb/acre"),
        ("Hot Water Boron (ppm)", "boron", "mg/kg"), ("boor (µg/kg)", "boron", "ug/kg"),
        ("Organic Matter %", "organic_matter", "%"), ("Humus (%)", "organic_matter", "%"),
        ("MO (g/kg)", "organic_matter", "g/kg"), ("Matière organique (%)", "organic_matter", "%"),
        ("OM (LOI) %", "organic_matter", "%"), ("Corg (%)", "organic_carbon", "%"),
        ("Clay (%)", "clay", "%"), ("Ton %", "clay", "%"), ("Argile (g/kg)", "clay", "g/kg"),
        ("Arcilla (%)", "clay", "%"), ("Argila (%)", "clay", "%"), ("Lutum (%)", "clay", "%"),
        ("pH", "ph", None), ("Sample ID", "sample", None), ("Proben-Nr", "sample", None),
        ("Longitude", "longitude", None), ("lat", "latitude", None),
        ("Rechtswert", "east", None), ("Northing", "north", None), ("Depth (cm)", "depth", None),
    ],
)  # fmt: skip
def test_headers(header, what, unit):
    (column,) = recognise([header])
    assert column.what == what
    assert column.unit == unit


@pytest.mark.parametrize("header", ["Bulk", "Mn (ppm)", "P Bray", "K", "comment", "Base sat %", ""])
def test_what_is_not_meant_is_left_alone(header):
    assert recognise([header]) == ()


@pytest.mark.parametrize(
    ("text", "comma", "value", "below"),
    [
        ("0.61", False, 0.61, False), ("0,61", True, 0.61, False), ("<0.1", False, 0.1, True),
        ("< 0,10", True, 0.1, True), ("ND", False, None, True), ("Tr", False, None, True),
        ("", False, None, False), ("n/a", False, None, False), ("1.234,5", True, 1234.5, False),
        ("0.6 ppm", False, 0.6, False), ("1e-1", False, 0.1, False),
    ],
)  # fmt: skip
def test_cells(text, comma, value, below):
    cell = read_cell(text, decimal_comma=comma)
    assert (cell.value, cell.below, cell.bad) == (value, below, False)


@pytest.mark.parametrize("text", ["abc", "0,61", "1/2", "#REF!", "0.5.1", "2026-03-01"])
def test_cells_that_are_no_numbers(text):
    assert read_cell(text, decimal_comma=False).bad


def test_unknown_units_are_not_guessed():
    assert unit_named("mg") is None
    assert unit_named("parts") is None


def boron_of(tmp_path, field, content, *, encoding="utf-8", name="s.csv", hints=HINTS):
    reading = read_samples(
        write(tmp_path / name, content, encoding=encoding), field=field, hints=hints
    )
    assert reading.value is not None, [one.what for one in reading.findings]
    return reading.value.properties["boron"].values


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "latin-1"])
@pytest.mark.parametrize("mark", [",", ";", "\t"])
def test_encodings_and_delimiters_give_the_same_samples(tmp_path, field, encoding, mark):
    header = [*HEADER[:3], "Bor pflanzenverfügbar (mg/kg)", *HEADER[4:]]
    plain = boron_of(tmp_path, field, table_text())
    rows = sample_rows()
    if mark != ",":
        rows = [[cell.replace(".", ",") for cell in row] for row in rows]
    again = boron_of(tmp_path, field, table_text(rows, header, mark=mark), encoding=encoding)
    assert again == pytest.approx(plain)


@pytest.mark.parametrize(
    ("unit", "factor"),
    [("mg/kg", 1), ("ppm", 1), ("µg/kg", 1000), ("g/kg", 0.001), ("mg/100 g", 0.1),
     ("lb/acre", 2), ("kg/ha", 2.24)],
)  # fmt: skip
@pytest.mark.parametrize("where", ["header", "row", "cell"])
def test_units_in_header_unit_row_and_cells(tmp_path, field, unit, factor, where):
    plain = boron_of(tmp_path, field, table_text())
    rows = sample_rows()
    for row in rows:
        row[3] = f"{float(row[3]) * factor:.8f}" + (f" {unit}" if where == "cell" else "")
    header = [*HEADER]
    header[3] = f"B ({unit})" if where == "header" else "B"
    if where == "row":
        rows = [["", "", "", unit, "%", "%"], *rows]
        header[4:] = ["OM", "clay"]
    again = boron_of(tmp_path, field, table_text(rows, header))
    assert again == pytest.approx(plain, rel=1e-6)


def test_carbon_is_multiplied_only_where_the_column_says_carbon(tmp_path, field):
    text = table_text(header=[*HEADER[:4], "organic carbon (%)", HEADER[5]])
    carbon = read_samples(write(tmp_path / "c.csv", text), field=field, hints=HINTS).value
    matter = read_samples(write(tmp_path / "m.csv", table_text()), field=field, hints=HINTS).value
    ratio = carbon.properties["organic_matter"].values / matter.properties["organic_matter"].values
    assert ratio == pytest.approx(1.724)


def test_one_analyte_a_row(tmp_path, field):
    plain = boron_of(tmp_path, field, table_text())
    lines = [["sample", "longitude", "latitude", "analyte", "result", "unit"]]
    for name, lon, lat, boron, matter, clay in sample_rows():
        for analyte, value, unit in (
            ("B", boron, "mg/kg"),
            ("OM", matter, "%"),
            ("Clay", clay, "%"),
        ):
            lines.append([name, lon, lat, analyte, value, unit])
    again = boron_of(tmp_path, field, "\n".join(",".join(row) for row in lines))
    assert again == pytest.approx(plain)


def test_spreadsheet_and_vector_files_give_the_same_samples(tmp_path, field):
    plain = boron_of(tmp_path, field, table_text())
    book = openpyxl.Workbook()
    for row in csv.reader(io.StringIO(table_text())):
        book.active.append([float(c) if c.replace(".", "").isdigit() else c for c in row])
    book.save(tmp_path / "s.xlsx")
    answers = [read_samples(tmp_path / "s.xlsx", field=field, hints=HINTS).value]
    rows = sample_rows()
    frame = geopandas.GeoDataFrame(
        {"sample": [r[0] for r in rows], "B ppm": [float(r[3]) for r in rows],
         "OM pct": [float(r[4]) for r in rows], "clay pct": [float(r[5]) for r in rows]},
        geometry=shapely.points([float(r[1]) for r in rows], [float(r[2]) for r in rows]),
        crs="EPSG:4326",
    )  # fmt: skip
    for suffix in ("geojson", "gpkg", "shp"):
        frame.to_crs("EPSG:25833" if suffix != "geojson" else "EPSG:4326").to_file(
            tmp_path / f"v.{suffix}"
        )
        answers.append(read_samples(tmp_path / f"v.{suffix}", field=field, hints=HINTS).value)
    for samples in answers:
        assert samples.properties["boron"].values == pytest.approx(plain)
        assert len(samples) == len(plain)


def test_every_recognition_is_reported(tmp_path, field):
    reading = read_samples(write(tmp_path / "s.csv", table_text()), field=field, hints=HINTS)
    assert {"boron", "organic matter", "clay", "places", "table"} <= {
        r.what for r in reading.recognised
    }


@pytest.mark.parametrize("suffix", ["gpkg", "shp", "zip", "kml"])
def test_boundaries_in_every_format(tmp_path, field, suffix):
    frame = geopandas.read_file(write(tmp_path / "b.geojson", boundary_text()))
    if suffix == "zip":
        frame.to_file(tmp_path / "b.shp")
        import zipfile

        with zipfile.ZipFile(tmp_path / "b.zip", "w") as archive:
            for side in ("shp", "shx", "dbf", "prj", "cpg"):
                archive.write(tmp_path / f"b.{side}", f"inner/b.{side}")
    elif suffix == "kml":
        coordinates = " ".join(f"{x},{y},0" for x, y in frame.geometry[0].exterior.coords)
        write(
            tmp_path / "b.kml",
            '<?xml version="1.0" encoding="UTF-8"?><kml xmlns="http://www.opengis.net/kml/2.2">'
            "<Document><Placemark><name>Square</name><Polygon><outerBoundaryIs><LinearRing>"
            f"<coordinates>{coordinates}</coordinates></LinearRing></outerBoundaryIs></Polygon>"
            "</Placemark></Document></kml>",
        )
    else:
        frame.to_crs("EPSG:25833").to_file(tmp_path / f"b.{suffix}")
    reading = read_boundary(tmp_path / f"b.{suffix}")
    assert reading.value is not None, reading.findings
    assert reading.value.area_ha == pytest.approx(field.area_ha, rel=1e-6)
    assert np.isfinite(reading.value.area_ha)


def test_inputs_are_not_changed(tmp_path, field):
    import hashlib

    path = write(tmp_path / "s.csv", table_text())
    before = hashlib.sha256(path.read_bytes()).hexdigest()
    read_samples(path, field=field, hints=HINTS)
    assert hashlib.sha256(path.read_bytes()).hexdigest() == before

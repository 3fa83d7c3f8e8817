"""Every file read back by a reader that did not write it, and spoiled files that verify must name."""

from __future__ import annotations

import json
import os
import shutil
import sqlite3
import subprocess
import sys
import tempfile
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest
import shapefile as pyshp
import shapely

from schorl.formats.pack import write_pack
from schorl.formats.verify import verify
from schorl.model.summary import summary
from support.example_record import example_record


@pytest.fixture(scope="session")
def record():
    return example_record()


@pytest.fixture(scope="session")
def written(record, tmp_path_factory):
    folder = tmp_path_factory.mktemp("packs") / "pack"
    write_pack(record, folder, extras={"report.html": b"<html></html>"}, replace=False)
    return folder


@pytest.fixture
def pack(written, tmp_path):
    return Path(shutil.copytree(written, tmp_path / "pack"))


def test_a_fresh_pack_is_whole(pack, record):
    seen = verify(pack)
    assert seen.faults == ()
    assert seen.record["totals"]["boron_kg"] == pytest.approx(record.prescription.boron_kg)


@pytest.mark.parametrize(
    "name",
    ["prescription.geojson", "shapefile/BORON01.shp", "shapefile/BORON01.zip", "TASKDATA",
     "prescription.gpkg", "surfaces/rate.tif"],
)  # fmt: skip
def test_single_files_are_whole(pack, name):
    assert verify(pack / name).faults == ()


def test_totals_in_files_are_totals_in_the_plan(pack, record):
    told = json.loads((pack / "summary.json").read_text(encoding="utf-8"))
    assert told == json.loads(json.dumps(summary(record)))
    total = sum(zone["area_ha"] * zone["boron_kg_ha"] for zone in told["zones"])
    assert total == pytest.approx(record.prescription.boron_kg, rel=1e-12)


def test_geojson_by_an_independent_validator(pack):
    """RFC 7946 by geojson-validator."""
    import geojson_validator

    document = json.loads((pack / "prescription.geojson").read_text(encoding="utf-8"))
    assert "crs" not in document
    assert geojson_validator.validate_structure(document) == {}
    seen = geojson_validator.validate_geometries(document)
    assert not seen["invalid"], seen
    for feature in document["features"]:
        assert set(feature["properties"]) == {
            "zone", "product_rate", "product_unit", "boron_kg_ha", "boron_pct", "area_ha", "ruled_by",
        }  # fmt: skip


def test_shapefile_by_pyshp(pack, record):
    with pyshp.Reader(str(pack / "shapefile" / "BORON01.shp")) as reader:
        fields = {one[0]: tuple(one[1:4]) for one in reader.fields if one[0] != "DeletionFlag"}
        assert fields == {"RATE": ("N", 10, 2), "ZONE": ("N", 4, 0)}
        rates = {rate.zone: rate.product_rate for rate in record.prescription.rates}
        for shape, row in zip(reader.shapes(), reader.records(), strict=True):
            assert shape.shapeType == pyshp.POLYGON
            ring = shapely.linearrings(shape.points[: ([*shape.parts[1:], None])[0]])
            assert not shapely.is_ccw(ring)  # outer rings turn clockwise
            assert row["RATE"] == pytest.approx(rates[row["ZONE"]], abs=0.005)


@pytest.mark.skipif(shutil.which("shpdump") is None, reason="shapelib is not installed")
def test_shapefile_by_shapelib(pack, tmp_path):
    def validate(path):
        command = ["shpdump", "-validate", str(path)]
        return subprocess.run(command, capture_output=True, text=True, check=True).stdout

    assert "\n0 object has invalid ring orderings" in validate(pack / "shapefile" / "BORON01.shp")
    turned = [(0, 0), (1, 0), (1, 1), (0, 1), (0, 0)]
    with pyshp.Writer(str(tmp_path / "turned.shp"), shapeType=pyshp.POLYGON) as target:
        target.field("RATE", "N")
        target.poly([turned])
        target.record(1)
    assert "\n1 object has invalid ring orderings" in validate(tmp_path / "turned.shp")  # it looks


@pytest.mark.skipif(shutil.which("ogrinfo") is None, reason="GDAL's tools are not installed")
@pytest.mark.parametrize(
    "name", ["prescription.geojson", "shapefile/BORON01.shp", "prescription.gpkg"]
)
def test_ogrinfo_reads_the_vectors(pack, name):
    said = subprocess.run(
        ["ogrinfo", "-ro", "-al", "-so", str(pack / name)],
        capture_output=True,
        text=True,
        check=True,
    )
    assert "Feature Count: 4" in said.stdout
    assert "WGS 84" in said.stdout


def test_geopackage_pragmas_and_layers(pack):
    with sqlite3.connect(f"{(pack / 'prescription.gpkg').as_uri()}?mode=ro", uri=True) as database:
        assert database.execute("pragma application_id").fetchone()[0] == 0x47504B47
        assert database.execute("pragma integrity_check").fetchone()[0] == "ok"
        assert database.execute("pragma foreign_key_check").fetchall() == []
        names = {row[0] for row in database.execute("select table_name from gpkg_contents")}
    assert names == {"zones", "samples", "boundary"}


def test_surfaces_are_optimised_and_every_block_reads(pack, record):
    import rasterio
    from rio_cogeo.cogeo import cog_validate

    for path in sorted((pack / "surfaces").glob("*.tif")):
        assert cog_validate(str(path))[0]
        with rasterio.open(path) as source:
            values = source.read(1, masked=True)
            assert values.count() == record.grid.n_cells
            assert source.crs.to_epsg() == 32633
            west, north = source.transform.c, source.transform.f
            assert (west, north) == (record.grid.west_m, record.grid.north_m)
    with rasterio.open(pack / "surfaces" / "boron.tif") as source:
        (read,) = next(source.sample([record.grid.centres_m[100]]))
    assert read == pytest.approx(record.surfaces["boron"].estimate[100], rel=1e-6)


def test_task_data_holds_the_rates_in_its_own_units(pack, record):
    root = ElementTree.parse(pack / "TASKDATA" / "TASKDATA.XML").getroot()
    values = {zone.get("B"): int(zone.find("PDV").get("B")) for zone in root.iter("TZN")}
    for rate in record.prescription.rates:
        assert values[f"zone {rate.zone}"] == round(rate.product_rate * 100)  # 1 kg/ha = 100 mg/m²
    assert values["off"] == 0


def test_text_from_files_is_escaped(pack):
    text = (pack / "TASKDATA" / "TASKDATA.XML").read_text(encoding="utf-8")
    assert "Home &amp; &lt;Away&gt;" in text


def spoil_json(change):
    def spoil(pack):
        path = pack / "prescription.geojson"
        document = json.loads(path.read_text(encoding="utf-8"))
        change(document)
        path.write_text(json.dumps(document), encoding="utf-8")

    return spoil


def spoil_task(old, new, count=1):
    def spoil(pack):
        path = pack / "TASKDATA" / "TASKDATA.XML"
        text = path.read_text(encoding="utf-8")
        assert old in text
        path.write_text(text.replace(old, new, count), encoding="utf-8")

    return spoil


def set_property(name, value):
    return spoil_json(lambda document: document["features"][0]["properties"].update({name: value}))


def cut_in_half(name):
    def spoil(pack):
        path = pack / name
        path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])

    return spoil


def ring_of(document):
    geometry = document["features"][0]["geometry"]
    part = geometry["coordinates"]
    return part[0][0] if geometry["type"] == "MultiPolygon" else part[0]


def drop_zone(document):
    del document["features"][1]


def double_zone(document):
    document["features"].append(document["features"][0])


def move_zone(document):
    for point in ring_of(document):
        point[0] += 0.002


def reverse_ring(document):
    ring_of(document).reverse()


def open_ring(document):
    ring_of(document).pop()


def bow_tie(document):
    ring = ring_of(document)
    ring[1], ring[2] = ring[2], ring[1]


DEFECTS = {
    "rate raised": (set_property("product_rate", 15.0), "rate 15"),
    "rate negative": (set_property("product_rate", -1.0), "negative"),
    "rate null": (set_property("product_rate", None), "rate is"),
    "zone renamed": (set_property("zone", 77), "not in the record"),
    "zone dropped": (spoil_json(drop_zone), "gap"),
    "zone doubled": (spoil_json(double_zone), "overlap"),
    "zone moved": (spoil_json(move_zone), "outside"),
    "ring reversed": (spoil_json(reverse_ring), "wrong way"),
    "ring crossing": (spoil_json(bow_tie), "invalid"),
    "crs member": (spoil_json(lambda d: d.update({"crs": {}})), "crs"),
    "geojson cut": (cut_in_half("prescription.geojson"), "cannot be read"),
    "shp cut": (cut_in_half("shapefile/BORON01.shp"), "header says"),
    "dbf cut": (cut_in_half("shapefile/BORON01.dbf"), "rows"),
    "shx gone": (lambda pack: (pack / "shapefile/BORON01.shx").unlink(), "missing"),
    "prj gone": (lambda pack: (pack / "shapefile/BORON01.prj").unlink(), "missing"),
    "zip cut": (cut_in_half("shapefile/BORON01.zip"), "is not the file"),
    "tif cut": (cut_in_half("surfaces/rate.tif"), "cannot be read"),
    "gpkg cut": (cut_in_half("prescription.gpkg"), "cannot be read"),
    "report gone": (lambda pack: (pack / "report.html").unlink(), "missing"),
    "stranger": (lambda pack: (pack / "other.txt").write_text("x"), "was not written"),
    "manifest gone": (lambda pack: (pack / "summary.json").unlink(), "cannot be read"),
    "id twice": (spoil_task('<FRM A="FRM1"', '<FRM A="CTR1"'), "twice"),
    "dangling reference": (spoil_task('F="FRM1"', 'F="FRM9"'), "not there"),
    "off zone undefined": (spoil_task('J="0"', 'J="9"'), "out of field"),
    "code twice": (spoil_task('<TZN A="2"', '<TZN A="1"'), "stands twice"),
    "code 255": (spoil_task('<TZN A="2"', '<TZN A="255"'), "no code"),
    "negative counts": (spoil_task('B="1200"', 'B="-1200"'), "not a rate"),
    "counts lost": (spoil_task('B="1200"', 'B=""'), "not a rate"),
    "rate a hundredfold": (spoil_task('B="1200"', 'B="120000"'), "recorded"),
    "strange entry": (spoil_task('A="0006"', 'A="0005"'), "product rate entry"),
    "long name": (spoil_task('B="unnamed"', f'B="{"x" * 40}"'), "32"),
    "exponent": (spoil_task('<PNT A="2" C="5', '<PNT A="2" C="5e0'), "plain latitude"),
    "latitude 95": (spoil_task('<PNT A="2" C="5', '<PNT A="2" C="95'), "plain latitude"),
    "open ring": (spoil_task("</LSG>", '<PNT A="2" C="52.0" D="13.5"/></LSG>'), "closed"),
    "two tasks": (
        spoil_task("</TSK>", '</TSK><TSK A="TSK2" B="x" G="1" H="0" I="0" J="0"/>'),
        "tasks",
    ),
    "doctype": (spoil_task("<ISO", '<!DOCTYPE x [<!ENTITY a "b">]><ISO'), "document type"),
    "two grids": (spoil_task("</TSK>", '<GRD A="1"/><GRD A="1"/></TSK>'), "grid"),
}


@pytest.mark.parametrize("name", DEFECTS)
def test_verify_names_deliberate_defects(pack, name):
    spoil, word = DEFECTS[name]
    spoil(pack)
    seen = verify(pack)
    assert not seen.whole
    assert any(word in fault.what for fault in seen.faults), [f.what for f in seen.faults]
    assert all(fault.file and fault.place for fault in seen.faults)


def test_verify_holds_a_single_file_to_a_boundary(pack, tmp_path, record):
    from schorl.geodesy import transform_geometry

    degrees = transform_geometry(record.field.boundary, source=record.field.crs, target="EPSG:4326")
    smaller = shapely.buffer(degrees, -0.0005)
    path = tmp_path / "b.geojson"
    path.write_text(json.dumps(shapely.geometry.mapping(smaller)), encoding="utf-8")
    seen = verify(pack / "prescription.geojson", boundary=path)
    assert any("outside" in fault.what for fault in seen.faults)
    path.write_text(json.dumps(shapely.geometry.mapping(degrees)), encoding="utf-8")
    assert verify(pack / "prescription.geojson", boundary=path).whole


@pytest.mark.parametrize("name", ["nothing", "empty.geojson", "x.pdf"])
def test_verify_of_what_is_no_prescription(tmp_path, name):
    if "." in name:
        (tmp_path / name).write_bytes(b"")
    assert not verify(tmp_path / name).whole


def test_overviews_invent_no_rate(pack, record):
    import rasterio

    given = {round(float(rate.product_rate), 4) for rate in record.prescription.rates}
    with rasterio.open(pack / "surfaces" / "rate.tif") as source:
        small = source.read(1, out_shape=(source.height // 4, source.width // 4), masked=True)
    assert {round(float(v), 4) for v in np.unique(small.compressed())} <= given


GDAL_UTILS = Path(
    os.environ.get("SCHORL_GDAL_UTILS") or Path(tempfile.gettempdir()) / "schorl-gdal-utils"
)


def test_the_geopackage_validator_of_gdal_finds_no_fault(pack, tmp_path):
    """osgeo_utils.samples.validate_gpkg of gdal-utils, installed apart without its dependencies."""
    if not (GDAL_UTILS / "osgeo_utils").is_dir():
        pytest.skip(f"gdal-utils is not at {GDAL_UTILS}; pip install --no-deps --target there")
    validate = [sys.executable, "-m", "osgeo_utils.samples.validate_gpkg"]
    settings = {**os.environ, "PYTHONPATH": str(GDAL_UTILS)}

    def faults(path):
        done = subprocess.run(
            [*validate, path], env=settings, capture_output=True, text=True, check=False
        )
        return done.returncode, done.stdout + done.stderr

    assert faults(pack / "prescription.gpkg")[0] == 0, faults(pack / "prescription.gpkg")
    broken = tmp_path / "broken.gpkg"
    broken.write_bytes((pack / "prescription.gpkg").read_bytes())
    with sqlite3.connect(broken) as package:
        package.execute("delete from gpkg_geometry_columns where table_name = 'zones'")
    assert faults(broken)[0] != 0  # it does look

"""Task data in every version and layout, read back by an independent library (npm isoxml).

Rules beyond that reader are checked by `verify` on deliberate defects.
"""

from __future__ import annotations

import base64
import json
import os
import re
import shutil
import subprocess
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import shapely

from schorl.formats.pack import write_pack
from schorl.formats.shapes import zone_shapes
from schorl.formats.task_grid import OUTSIDE, grid_product, lay_task_grid
from schorl.formats.taskdata import task_place
from schorl.formats.verify import verify
from schorl.model.profile import LAYOUTS, VERSIONS, Profile
from schorl.model.settings import Form, Product
from schorl.model.zones import ZoneKind
from support.browser import NODE
from support.example_record import example_record

READER = Path(__file__).resolve().parents[1] / "support" / "read_task_data.js"
RECORD = example_record()
pytestmark = pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning")


def profiled(version, layout, record=RECORD):
    profile = Profile(task_data_version=version, task_data_layout=layout)
    return replace(record, settings=replace(record.settings, profile=profile))


def read_back(archive):
    if not (NODE / "node_modules" / "isoxml").is_dir() or shutil.which("node") is None:
        pytest.skip(f"npm isoxml is not at {NODE}; npm install isoxml there")
    command = ["node", READER, NODE / "node_modules", archive]
    said = subprocess.run(command, capture_output=True, text=True, check=False)
    assert said.returncode == 0, said.stderr
    return json.loads(said.stdout)


@pytest.fixture(scope="module")
def sets(tmp_path_factory):
    """A pack for every version and layout, by (version, layout)."""
    folder = tmp_path_factory.mktemp("sets")
    made = {}
    for version in VERSIONS:
        for layout in LAYOUTS:
            record = profiled(version, layout)
            pack = folder / f"{version}-{layout}".replace(" ", "")
            write_pack(record, pack, extras={}, replace=False)
            made[version, layout] = (record, pack, pack / task_place(record.settings.profile))
    return made


@pytest.mark.parametrize("layout", LAYOUTS)
@pytest.mark.parametrize("version", VERSIONS)
def test_another_library_reads_units_zones_and_cells(sets, version, layout):
    record, _, folder = sets[version, layout]
    seen = read_back(folder.with_suffix(".zip"))
    rates = record.prescription.rates
    assert (seen["warnings"], seen["tasks"]) == ([], 1)
    assert seen["version"] == int(version[0])
    assert seen["codes"] == [0, 0, 0]
    assert seen["units"] == [
        {"Offset": 0, "Scale": 0.01, "NumberOfDecimals": 2, "UnitDesignator": "kg/ha"}
    ]
    zones = {zone["code"]: zone for zone in seen["zones"]}
    assert zones[0]["values"] == [["0006", 0]]
    if layout == "grid 2":
        assert zones[1]["values"] == [["0006", 0]]
    else:
        for code, rate in enumerate(rates, start=1):
            assert zones[code]["values"] == [["0006", round(100 * rate.product_rate)]]
            assert (zones[code]["polygons"] > 0) == (layout == "zones")
    if layout == "zones":
        assert seen.get("grid") is None
        return
    check_cells(record, seen["grid"], layout)


def check_cells(record, grid, layout):
    """Every cell of the other library's grid against the zones."""
    data = base64.b64decode(grid["bytes"])
    shape = grid["rows"], grid["columns"]
    kind = np.uint8 if layout == "grid 1" else np.dtype("<i4")
    cells = np.frombuffer(data, kind).reshape(shape)
    rates = np.array([0.0, *(rate.product_rate for rate in record.prescription.rates)])
    product = rates[cells] if layout == "grid 1" else cells / 100.0
    up, right = np.mgrid[0 : shape[0], 0 : shape[1]]
    east = grid["west"] + (right + 0.5) * grid["right"]
    north = grid["south"] + (up + 0.5) * grid["up"]
    shut = [one for one in zone_shapes(record) if one.zone.kind is not ZoneKind.ZONE]
    for shape_of, rate in zip(zone_shapes(record), record.prescription.rates, strict=True):
        inside = shapely.contains_xy(shape_of.geometry.buffer(-1e-8), east, north)
        assert inside.any()
        own = product[inside]
        near = np.zeros(inside.sum(), bool)
        for other in shut:
            boxes = shapely.box(
                east[inside] - grid["right"] / 2, north[inside] - grid["up"] / 2,
                east[inside] + grid["right"] / 2, north[inside] + grid["up"] / 2,
            )  # fmt: skip
            near |= shapely.intersects(boxes, other.geometry)
        assert np.isclose(own[~near], rate.product_rate, atol=0.006).all()
        assert (own[near] <= rate.product_rate + 0.006).all()
    field = shapely.union_all([one.geometry for one in zone_shapes(record)])
    assert not product[~shapely.contains_xy(field.buffer(1e-8), east, north)].any()


def test_litres_are_counted_by_the_hundredth_of_a_cubic_millimetre(tmp_path):
    spray = Product(form=Form.SPRAY, boron_g_l=150.0)
    prescription = replace(RECORD.prescription, unit="L", boron_pct=None, boron_g_l=150.0)
    settings = replace(RECORD.settings, product=spray)
    record = replace(RECORD, prescription=prescription, settings=settings)
    write_pack(record, tmp_path / "p", extras={}, replace=False)
    seen = read_back(tmp_path / "p" / "TASKDATA.zip")
    zones = {zone["code"]: zone for zone in seen["zones"]}
    for code, rate in enumerate(record.prescription.rates, start=1):
        assert zones[code]["values"] == [["0001", round(10_000 * rate.product_rate)]]
    assert seen["units"][0]["Scale"] == 0.0001


def test_cells_add_up_to_the_record():
    for layout in ("grid 1", "grid 2"):
        record = profiled("4", layout)
        shapes = zone_shapes(record)
        grid = lay_task_grid(record, shapes)
        rates = [shape.rate.product_rate for shape in shapes]
        total = grid_product(grid, rates)
        assert total == pytest.approx(record.prescription.product_total, rel=0.02)
        covered = float(((grid.places != OUTSIDE) * grid.cell_ha).sum())
        assert covered == pytest.approx(record.field.area_ha, rel=0.02)


@pytest.mark.parametrize("layout", LAYOUTS)
@pytest.mark.parametrize("version", VERSIONS)
def test_whole_alone_zipped_and_in_the_pack(sets, version, layout):
    _, pack, folder = sets[version, layout]
    for path in (pack, folder, folder / "TASKDATA.XML", folder.with_suffix(".zip")):
        seen = verify(path)
        assert seen.whole, (path, seen.faults)
    assert len(list(pack.rglob("TASKDATA.XML"))) == 1  # never two sets on one stick


XML = "TASKDATA.XML"


def cut(path, count):
    path.write_bytes(path.read_bytes()[:-count])


def swapped(name, old, new):
    def change(folder):
        path = folder / name
        text = path.read_text("utf-8")
        assert old in text
        path.write_text(text.replace(old, new, 1), "utf-8")

    return change


def matched(pattern, replacement):
    def change(folder):
        path = folder / XML
        text, count = re.subn(pattern, replacement, path.read_text("utf-8"), count=1)
        assert count == 1
        path.write_text(text, "utf-8")

    return change


def with_bytes(start, data):
    def change(folder):
        path = folder / "GRD00001.bin"
        held = bytearray(path.read_bytes())
        held[start : start + len(data)] = data
        path.write_bytes(bytes(held))

    return change


GRID_DEFECTS = {
    "cells missing": ("grid 1", lambda folder: (folder / "GRD00001.bin").unlink(), "not there"),
    "wrong capitals": (
        "grid 1",
        lambda folder: (folder / "GRD00001.bin").rename(folder / "GRD00001.BIN"),
        "not there",
    ),
    "cells cut short": ("grid 1", lambda folder: cut(folder / "GRD00001.bin", 3), "bytes"),
    "cells of two cut short": ("grid 2", lambda folder: cut(folder / "GRD00001.bin", 4), "bytes"),
    "unknown code": ("grid 1", with_bytes(5000, b"\xc8"), "zone 200"),
    "negative rate": ("grid 2", with_bytes(5000, b"\xff\xff\xff\xff"), "negative"),
    "rate outside the field": ("grid 2", with_bytes(0, b"\xe8\x03\x00\x00"), "outside"),
    "no zone for the rates": ("grid 2", swapped(XML, ' J="1"/>', "/>"), "not there"),
    "no such type": ("grid 2", swapped(XML, 'I="2" J', 'I="3" J'), "neither"),
    "cells that are no degrees": ("grid 1", swapped(XML, '<GRD A="', '<GRD A="1'), "degrees"),
    "two grids": ("grid 1", swapped(XML, "</TSK>", '<GRD A="0"/></TSK>'), "more than one grid"),
    "off zone missing": ("grid 1", swapped(XML, 'J="0"', 'J="77"'), "77"),
    "too many cells": ("grid 1", matched(r'(<GRD[^>]* F=")', r"\g<1>99999999"), "rows"),
    "file elsewhere": ("grid 1", swapped(XML, 'G="GRD00001"', 'G="../GRD00001"'), "not there"),
}


@pytest.mark.parametrize("defect", GRID_DEFECTS)
def test_verify_names_deliberate_defects_of_grids(sets, tmp_path, defect):
    layout, change, word = GRID_DEFECTS[defect]
    folder = tmp_path / "TASKDATA"
    shutil.copytree(sets["4", layout][2], folder)
    assert verify(folder).whole
    change(folder)
    seen = verify(folder)
    assert not seen.whole
    assert any(word in fault.what for fault in seen.faults), seen.faults


ZONE_DEFECTS = {
    "identifier of the machine": (swapped(XML, 'A="PDT1"', 'A="PDT-1"'), "no name of a PDT"),
    "leading zero": (swapped(XML, 'A="TSK1"', 'A="TSK01"'), "no name of a TSK"),
    "33 characters": (swapped(XML, 'B="off"', f'B="{33 * "x"}"'), "longer than 32"),
    "code 255": (matched(r'TZN A="2"', 'TZN A="255"'), "no code"),
    "code twice": (matched(r'TZN A="2"', 'TZN A="1"'), "stands twice"),
    "exponent": (matched(r'C="[0-9.]+" D', 'C="5.2e1" D'), "no plain latitude"),
    "ten decimals": (matched(r'C="[0-9.]+" D', 'C="52.0123456789" D'), "no plain latitude"),
    "latitude over 90": (matched(r'C="[0-9.]+" D', 'C="95.0" D'), "no plain latitude"),
    "entry of one digit": (matched(r'PDV A="0006"', 'PDV A="6"'), "not a product rate"),
    "field without area": (matched(r' D="[0-9]+" E="CTR1"', ' E="CTR1"'), "D is missing"),
    "identifier twice": (swapped(XML, 'FRM A="FRM1"', 'FRM A="CTR1"'), "stands twice"),
    "customer not there": (swapped(XML, 'I="CTR1"', 'I="CTR9"'), "CTR9"),
    "product not there": (matched(r'C="PDT1"', 'C="PDT9"'), "PDT9"),
    "attribute of our own": (swapped(XML, "<TSK ", '<TSK Q="1" '), "no attribute Q"),
    "negative rate": (matched(r'PDV A="0006" B="[1-9]', 'PDV A="0006" B="-1'), "not a rate"),
    "off zone not there": (matched(r' H="0"', ' H="9"'), "default zone"),
    "ring left open": (matched(r"<PNT [^>]*/>\n</LSG>", "</LSG>"), "not closed"),
    "version of another day": (matched(r'VersionMajor="4"', 'VersionMajor="2"'), "neither 3 nor 4"),
    "no software named": (matched(r' ManagementSoftwareVersion="[^"]*"', ""), "is missing"),
    "rate where the machine is lost": (
        matched(r'(TZN A="0"[^>]*>\s*<PDV A="0006" B=)"0"', r'\1"900"'), "without product",
    ),
    "two rates": (matched(r"(<PDV [^>]*/>)\n</TZN>\n</TSK>", r"\1\1</TZN></TSK>"), "2 rates"),
    "no rate": (matched(r"<PDV [^>]*/>\n</TZN>\n</TSK>", "</TZN></TSK>"), "0 rates"),
    "mass and volume": (
        matched(r'(TZN A="1"[\s\S]*?PDV A=)"0006"', r'\1"0001"'), "by mass and by volume",
    ),
    "shown a hundredfold": (matched(r'(<VPN [^>]* C=)"0.01"', r'\1"1"'), "not shown in kg/ha"),
    "shown in another unit": (matched(r'E="kg/ha"', 'E="lb/ac"'), "not shown in kg/ha"),
    "zone drawn as boundary": (matched(r'(TZN A="1"[^>]*>\s*<PLN A=)"2"', r'\1"1"'), "of type `1`"),
    "outer ring as inner": (matched(r'(TZN A="1"[^>]*>\s*<PLN[^>]*>\s*<LSG A=)"1"', r'\1"2"'), "outer"),
    "rate of other digits": (matched(r'PDV A="0006" B="[1-9]', 'PDV A="0006" B="\u00b2'), "not a rate"),
    "name in small letters": (
        lambda folder: (folder / XML).rename(folder / "taskdata.xml"), "neither a pack",
    ),
    "not XML": (matched(r"</TSK>", "</TSX>"), "cannot be read"),
    "entities": (matched(r"<ISO", "<!DOCTYPE a [<!ENTITY b 'c'>]><ISO"), "entities"),
}  # fmt: skip


@pytest.mark.parametrize("defect", ZONE_DEFECTS)
def test_verify_names_deliberate_defects_of_zones(sets, tmp_path, defect):
    change, word = ZONE_DEFECTS[defect]
    folder = tmp_path / "TASKDATA"
    shutil.copytree(sets["4", "zones"][2], folder)
    change(folder)
    seen = verify(folder)
    assert not seen.whole
    assert any(word in fault.what for fault in seen.faults), seen.faults


def test_kilograms_turned_to_litres_are_told(sets, tmp_path):
    """The same figures by the other entry agree with every zone's rate, and with none's unit."""
    _, pack, folder = sets["4", "zones"]
    copy = tmp_path / "pack"
    shutil.copytree(pack, copy)
    path = copy / folder.relative_to(pack) / XML
    text = re.sub(r'A="0006" B="([0-9]+)"', r'A="0001" B="\g<1>00"', path.read_text("utf-8"))
    text = text.replace('C="0.01" D="2" E="kg/ha"', 'C="0.0001" D="2" E="L/ha"')
    path.write_text(text.replace('B="000"', 'B="0"'), "utf-8")
    assert verify(path).whole  # by itself it is a sound file
    seen = verify(copy)
    assert any("L/ha, recorded kg/ha" in fault.what for fault in seen.faults), seen.faults


def test_a_rate_changed_in_a_pack_is_told_cell_by_cell(sets, tmp_path):
    _, pack, folder = sets["4", "grid 2"]
    copy = tmp_path / "pack"
    shutil.copytree(pack, copy)
    cells = copy / folder.relative_to(pack) / "GRD00001.bin"
    counts = np.frombuffer(cells.read_bytes(), "<i4").copy()
    counts[np.flatnonzero(counts)[100]] += 300
    cells.write_bytes(counts.tobytes())
    seen = verify(copy)
    assert any("a cell has" in fault.what for fault in seen.faults)


@pytest.mark.skipif(
    "SCHORL_ISO_XSD" not in os.environ, reason="SCHORL_ISO_XSD names no folder with the schemas"
)
@pytest.mark.parametrize("layout", LAYOUTS)
@pytest.mark.parametrize("version", VERSIONS)
def test_the_schema_of_the_standard(sets, version, layout):
    """ISO 11783-10 schemas TaskFile_V3-3 and _V4-3, not part of the checkout."""
    xmlschema = pytest.importorskip("xmlschema")
    name = {"3.3": "V3-3", "4": "V4-3"}[version]
    schema = next(Path(os.environ["SCHORL_ISO_XSD"]).rglob(f"*TaskFile_{name}.xsd"))
    xmlschema.XMLSchema(schema).validate(sets[version, layout][2] / "TASKDATA.XML")

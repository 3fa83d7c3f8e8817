"""The contractor's way: the same boron through another product, machine and controller."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import numpy as np
import pytest
import shapefile as pyshp

from support.command import FIELDS, prescribed, run

LB_ACRE = 1.120851  # kg/ha, NIST SP 811 (1 lb = 0.45359237 kg, 1 acre = 0.40468564224 ha)


@pytest.fixture(scope="module")
def pack(tmp_path_factory):
    return prescribed("long_acre/2026", tmp_path_factory.mktemp("packs"))


def rates(result):
    return {zone["zone"]: zone["boron_kg_ha"] for zone in result["zones"]}


def adapted(pack, tmp_path, *options):
    code, answer = run("adapt", pack, "--out", tmp_path, *options)
    assert code == 0, answer["findings"]
    result = answer["result"]
    before = rates(json.loads((pack / "summary.json").read_text("utf-8")))
    for zone, rate in rates(result).items():
        assert rate <= before.get(zone, 0.0) + 1e-9
    folder = Path(result["pack"]["folder"])
    assert run("verify", folder)[1]["result"]["whole"]
    assert pack.name in result["adapted_from"]
    assert pack.name in (folder / "report.html").read_text("utf-8")
    return result, folder, answer["findings"]


def test_a_stronger_product_and_what_is_lost(pack, tmp_path):
    result, _, findings = adapted(pack, tmp_path, "--boron-pct", "15")
    assert result["totals"]["boron_pct"] == 15
    lost = [one for one in findings if one["code"] == "ADAPT-LOWER"]
    before = json.loads((pack / "summary.json").read_text("utf-8"))["totals"]["boron_kg"]
    assert bool(lost) == (result["totals"]["boron_kg"] < before - 1e-9)


def test_granule_to_spray_and_back(pack, tmp_path):
    machine = tmp_path / "sprayer.toml"
    machine.write_text(
        'working_width_m = 36\nspeed_km_h = 12\n[machine]\ntank_l = 4000\n[product]\n'
        'form = "spray"\nboron_g_l = 150\n', encoding="utf-8",
    )  # fmt: skip
    spray, folder, _ = adapted(pack, tmp_path, "--machine", machine, "--name", "spray")
    assert spray["totals"]["unit"] == "L"
    share = spray["totals"]["boron_g_l"] / 1000
    assert spray["totals"]["product"] * share == pytest.approx(spray["totals"]["boron_kg"])
    back, _, _ = adapted(folder, tmp_path, "--form", "granule", "--boron-pct", "10",
                         "--name", "back")  # fmt: skip
    assert back["totals"]["unit"] == "kg"
    assert back["totals"]["boron_kg"] <= spray["totals"]["boron_kg"] + 1e-9


def test_more_ground_kept_off(pack, tmp_path):
    result, _, findings = adapted(pack, tmp_path, "--keep-off-m", "15")
    kinds = {zone["kind"]: zone for zone in result["zones"]}
    assert kinds["keep-off"]["boron_kg_ha"] == 0
    assert kinds["keep-off"]["area_ha"] > 1
    assert "ADAPT-CUT" in {one["code"] for one in findings}


def test_rates_by_the_acre_for_a_controller(pack, tmp_path):
    result, folder, _ = adapted(pack, tmp_path, "--profile", "us-rate-shapefile")
    there = {one.relative_to(folder).parts[0] for one in folder.rglob("*") if one.is_file()}
    assert "shapefile" in there
    assert not {"TASKDATA", "TASKDATA.zip", "prescription.geojson"} & there
    with pyshp.Reader(folder / "shapefile" / "BORON01.shp") as reader:
        column = {row["ZONE"]: row["RATE"] for row in reader.records()}
        assert all(len(shape.parts) >= 1 for shape in reader.shapes())
    for zone in result["zones"]:
        wanted = zone["product_rate"] / LB_ACRE
        assert column[zone["zone"]] <= wanted + 1e-6  # rounded down: never more boron
        assert column[zone["zone"]] == pytest.approx(wanted, abs=0.011)
    note = (folder / "READ_ME.txt").read_text("utf-8")
    assert "lb/ac" in note


@pytest.mark.parametrize("name", ["task-data-3-grid", "task-data-grid-of-rates", "task-data-zones"])
def test_task_data_alone(pack, tmp_path, name):
    _, folder, _ = adapted(pack, tmp_path, "--profile", name)
    sets = list(folder.rglob("TASKDATA.XML"))
    assert len(sets) == 1
    assert not (folder / "shapefile").exists()
    for path in (sets[0].parent, sets[0].parent.with_suffix(".zip")):
        code, seen = run("verify", path, "--boundary", FIELDS / "long_acre/2026/boundary.geojson")
        assert (code, seen["result"]["whole"]) == (0, True), seen
    if "grid" in name:
        assert "cells add up to" in (folder / "READ_ME.txt").read_text("utf-8")


def test_a_profile_of_ones_own_holds_from_the_first_prescription(tmp_path):
    profile = tmp_path / "terminal.toml"
    profile.write_text(
        'title = "old terminal"\nformats = ["shapefile", "geojson"]\nmost_vertices_in_all = 188\n'
        'single_parts = true\nholes = false\nrate_decimals = 0\n', encoding="utf-8",
    )  # fmt: skip
    code, answer = run(
        "prescribe", FIELDS / "long_acre/2026", "--profile", profile, "--out", tmp_path
    )
    assert code == 0, answer["findings"]
    folder = Path(answer["result"]["pack"]["folder"])
    assert run("verify", folder)[1]["result"]["whole"]
    with pyshp.Reader(folder / "shapefile" / "BORON01.shp") as reader:
        assert sum(len(shape.points) for shape in reader.shapes()) <= 188
        assert all(len(shape.parts) == 1 for shape in reader.shapes())
        given = np.array([row["RATE"] for row in reader.records()])
    assert (given == np.floor(given)).all()
    document = json.loads((folder / "prescription.geojson").read_text("utf-8"))
    for feature in document["features"]:
        assert feature["geometry"]["type"] == "Polygon"
        assert len(feature["geometry"]["coordinates"]) == 1
    simpler = [one for one in answer["findings"] if one["code"] == "PROFILE-SIMPLER"]
    assert simpler
    assert "kg B more" in simpler[0]["what"]


def test_what_cannot_be_adapted_is_refused_by_name(pack, tmp_path):
    assert run("adapt", pack, "--out", tmp_path)[0] == 2
    code, answer = run("adapt", pack, "--profile", "task-data-zone", "--out", tmp_path)
    assert (code, answer["findings"][0]["code"]) == (2, "PROFILE-KEY")
    assert "task-data-zones" in answer["findings"][0]["hint"]
    hurt = tmp_path / "hurt"
    shutil.copytree(pack, hurt)
    (hurt / "surfaces/rate.tif").unlink()
    code, answer = run("adapt", hurt, "--boron-pct", "5", "--out", tmp_path)
    assert (code, answer["findings"][0]["code"]) == (3, "OUT-TOUCHED")
    (hurt / "record.json.gz").unlink()
    code, answer = run("adapt", hurt, "--boron-pct", "5", "--out", tmp_path)
    assert (code, answer["findings"][0]["code"]) == (3, "OUT-RECORD")
    few = tmp_path / "few.toml"
    few.write_text("most_polygons = 1\n", encoding="utf-8")
    code, answer = run("adapt", pack, "--profile", few, "--out", tmp_path)
    assert (code, answer["findings"][0]["code"]) == (4, "PROFILE-LIMIT")
    assert not (tmp_path / f"{pack.name}-adapted").exists()

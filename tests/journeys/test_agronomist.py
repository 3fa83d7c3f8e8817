"""The agronomist's way: two seasons of the sample field, compared by command and read back."""

from __future__ import annotations

import csv
import json
import shutil
import sqlite3
import subprocess
from pathlib import Path

import numpy as np
import pytest
import shapely

from schorl.geodesy import area_ha
from schorl.run.packs import identity_of, whole_record
from schorl.steps.season_pack import season_pack
from support.command import FIELDS, prescribed, run

OUTLINE = FIELDS / "long_acre/2026/boundary.geojson"


@pytest.fixture(scope="module")
def packs(tmp_path_factory):
    folder = tmp_path_factory.mktemp("packs")
    for season in ("2025", "2026"):
        prescribed(f"long_acre/{season}", folder)
    return folder


def compare(packs, *names, out, **_):
    return run("compare", *(packs / name for name in names), "--out", out)


@pytest.fixture(scope="module")
def compared(packs, tmp_path_factory):
    out = tmp_path_factory.mktemp("change")
    code, answer = compare(packs, "Long-Acre-2025", "Long-Acre-2026", out=out)
    assert code == 0, answer["findings"]
    return answer["result"]


def test_it_says_what_is_real_what_is_noise_and_what_to_do(compared):
    assert compared["same"] is False
    shift = compared["shift"]
    assert shift["low"] < shift["mean"] < shift["high"]
    assert shift["warning"] == ""
    for zone in compared["zones"]:
        if zone["real"]:
            assert zone["p_adjusted"] <= 0.05
            assert zone["low"] > 0 or zone["high"] < 0
    assert any(zone["real"] for zone in compared["zones"])
    assert not all(zone["real"] for zone in compared["zones"])
    for word in ("Real:", "noise", "To do:"):
        assert word in compared["text"]
    assert compared["least_detectable_mg_kg"] > 0
    table = np.array(compared["zones_matched"]["transition_ha"])
    assert table.sum() == pytest.approx(compared["common_ha"], rel=2e-3)


def test_balance_counts_what_was_prescribed_and_says_so(packs, compared):
    summary = json.loads((packs / "Long-Acre-2025/summary.json").read_text("utf-8"))
    rates = {zone["zone"]: zone["boron_kg_ha"] for zone in summary["zones"]}
    for row in compared["balance"]:
        assert row["applied"] == pytest.approx(rates[row["zone"]])
        if row["recovery"] is not None:
            assert row["recovery"] == pytest.approx(row["change"] / row["applied"])
    assert "SEASON-APPLIED" in {one["code"] for one in compared["findings"]}


def test_other_readers_find_the_same(compared):
    folder = Path(compared["written"]["folder"])
    sites = list(csv.DictReader((folder / "revisit_sites.csv").read_text("utf-8").splitlines()))
    assert [one["site"] for one in sites] == [one["name"] for one in compared["revisit"]]
    import rasterio

    with rasterio.open(folder / "change.tif") as raster:
        assert raster.count == 3
        change, inside = raster.read(1), raster.read_masks(1) > 0
        real = (raster.read(3)[inside] <= 0.10).sum() * abs(raster.transform.a) ** 2 / 1e4
    assert change[inside].min() == pytest.approx(compared["change_map"]["lowest_mg_kg"], rel=1e-5)
    assert real == pytest.approx(compared["change_map"]["real_ha"])
    with sqlite3.connect(folder / "zones_moved.gpkg") as package:
        assert package.execute("pragma integrity_check").fetchone() == ("ok",)
        total = package.execute("select sum(area_ha) from moved").fetchone()[0]
    assert total == pytest.approx(compared["moved_ha"])
    strips = json.loads((folder / "check_strips.geojson").read_text("utf-8"))
    assert {one["properties"]["kind"] for one in strips["features"]} == {"untreated", "doubled"}
    if shutil.which("ogrinfo"):
        command = ["ogrinfo", "-so", "-al", folder / "revisit_sites.geojson"]
        said = subprocess.run(command, capture_output=True, text=True, check=True)
        assert f"Feature Count: {len(sites)}" in said.stdout


def test_backwards_and_with_itself(packs, compared, tmp_path):
    code, answer = compare(packs, "Long-Acre-2026", "Long-Acre-2025", out=tmp_path)
    back = answer["result"]
    assert code == 0
    assert [one["change"] for one in back["zones"] if one["change"]] == [
        -one["change"] for one in compared["zones"] if one["change"]
    ]
    assert "SEASON-ORDER" in {one["code"] for one in answer["findings"]}
    code, answer = compare(packs, "Long-Acre-2025", "Long-Acre-2025", out=tmp_path)
    result = answer["result"]
    assert (code, result["same"], result["moved_ha"]) == (0, True, 0)
    assert not any(one["real"] for one in result["zones"])


def test_same_bytes_and_nothing_replaced_unasked(packs, compared, tmp_path):
    code, answer = compare(packs, "Long-Acre-2025", "Long-Acre-2026", out=tmp_path)
    assert code == 0
    first = {one["path"]: one["sha256"] for one in compared["written"]["files"]}
    assert first == {one["path"]: one["sha256"] for one in answer["result"]["written"]["files"]}
    code, answer = compare(packs, "Long-Acre-2025", "Long-Acre-2026", out=tmp_path)
    assert code == 2
    assert [one["code"] for one in answer["findings"]] == ["OUT-THERE"]


def test_a_damaged_pack_is_refused_by_name(packs, tmp_path):
    shutil.copytree(packs / "Long-Acre-2025", tmp_path / "hurt")
    with (tmp_path / "hurt/prescription.geojson").open("a", encoding="utf-8") as stream:
        stream.write(" ")
    code, answer = run("compare", tmp_path / "hurt", packs / "Long-Acre-2026", "--out", tmp_path)
    assert code == 3
    assert {one["code"] for one in answer["findings"]} == {"OUT-TOUCHED"}
    assert "prescription.geojson" in answer["findings"][0]["where"]
    assert not list(tmp_path.glob("*to*"))


def test_other_depth_other_ground_and_one_pack_alone(packs, tmp_path):
    job = FIELDS / "long_acre/2026"
    code, answer = run(
        "prescribe", job, "--season", "2026-deep", "--depth-cm", "30", "--out", tmp_path
    )
    assert code == 0, answer["findings"]
    code, answer = run(
        "compare", packs / "Long-Acre-2025", tmp_path / "Long-Acre-2026-deep", "--out", tmp_path
    )
    result = answer["result"]
    assert (code, result["shift"], result["zones"]) == (0, None, [])
    assert "30 cm" in result["refused"]
    assert result["moved_ha"] >= 0
    code, answer = run("prescribe", FIELDS / "kiln_close/2026", "--out", tmp_path)
    assert code == 0
    code, answer = run(
        "compare", packs / "Long-Acre-2025", tmp_path / "Kiln-Close-2026", "--out", tmp_path
    )
    assert (code, answer["findings"][0]["code"]) == (4, "SEASON-ELSEWHERE")
    code, answer = run("compare", packs / "Long-Acre-2025", "--out", tmp_path)
    assert code == 2


def test_what_was_really_given_counts(packs, tmp_path):
    """An as-applied file of polygons with rates takes the place of the prescription."""
    outline = json.loads(OUTLINE.read_text("utf-8"))
    for feature in outline["features"]:
        feature["properties"] = {"boron_kg_ha": 0.5}
    given = tmp_path / "given.geojson"
    given.write_text(json.dumps(outline), encoding="utf-8")
    code, answer = run(
        "compare", packs / "Long-Acre-2025", packs / "Long-Acre-2026", "--out", tmp_path,
        "--applied", f"2025={given}", "--applied-unit", "kg B/ha", "--yield-t-ha", "2025=60",
    )  # fmt: skip
    assert code == 0, answer["findings"]
    for row in answer["result"]["balance"]:
        assert row["applied"] == pytest.approx(0.5, abs=1e-4)
        assert row["removed"] > 0
    said = {one["code"]: one["what"] for one in answer["findings"]}
    assert "SEASON-APPLIED" not in said
    assert said["SEASON-REMOVAL"] == "removal: sugar beet 10 g B/t roots and tops (read)"
    code, answer = run(
        "compare", packs / "Long-Acre-2025", packs / "Long-Acre-2026", "--out", tmp_path,
        "--applied", f"2019={given}",
    )  # fmt: skip
    assert code == 2


def test_the_spreader_log_of_the_sample_field_tells_its_story(packs, tmp_path):
    """The hopper ran empty in the north-west: no gain there, and half of what fell shows again.

    The sample field is made so (scripts/make_sample_fields.py); zone 1 lies partly in that corner.
    """
    code, answer = run(
        "compare", packs / "Long-Acre-2025", packs / "Long-Acre-2026", "--out", tmp_path,
        "--applied", f"2025={FIELDS / 'long_acre/2026/spread_2025.geojson'}",
        "--applied-column", "product_kg_ha", "--applied-unit", "kg/ha", "--boron-pct", "10",
    )  # fmt: skip
    assert code == 0, answer["findings"]
    result = answer["result"]
    assert result["seasons"][0]["applied_from"] == "spread_2025.geojson"
    prescribed = json.loads((packs / "Long-Acre-2025/summary.json").read_text("utf-8"))["zones"]
    first = result["balance"][0]
    assert first["applied"] < 0.75 * prescribed[0]["boron_kg_ha"]
    for row in result["balance"]:
        if row["recovery"] is not None:
            assert row["recovery_low"] < 0.5 < row["recovery_high"]  # the share it was made with
    import rasterio

    with rasterio.open(Path(result["written"]["folder"]) / "change.tif") as raster:
        change, p = raster.read(1, masked=True), raster.read(3, masked=True)
    rows, cols = change.shape
    corner = (slice(0, rows // 3), slice(0, cols // 4))
    assert change[corner].mean() < 0.5 * change.mean()
    assert not (p[corner] <= 0.10).any()
    assert 5 < result["change_map"]["real_ha"] < 0.6 * result["common_ha"]


def test_a_smaller_field_is_compared_on_the_common_ground(packs, tmp_path):
    """A strip in the north was given up, with the sites in it."""
    job = tmp_path / "job"
    shutil.copytree(FIELDS / "long_acre/2026", job)
    outline = json.loads((job / "boundary.geojson").read_text("utf-8"))
    (feature,) = outline["features"]
    whole = shapely.geometry.shape(feature["geometry"])
    west, south, east, north = whole.bounds
    less = whole.intersection(shapely.box(west, south, east, north - 0.2 * (north - south)))
    feature["geometry"] = shapely.geometry.mapping(less)
    (job / "boundary.geojson").write_text(json.dumps(outline), encoding="utf-8")
    head, *rows = (job / "soil.csv").read_text("utf-8").splitlines()
    kept = [row for row in rows if less.covers(shapely.Point(*map(float, row.split(",")[1:3])))]
    (job / "soil.csv").write_text("\n".join([head, *kept]) + "\n", encoding="utf-8")
    code, answer = run("prescribe", job, "--season", "2026-smaller", "--out", tmp_path)
    assert code == 0, answer["findings"]
    code, answer = run("compare", packs / "Long-Acre-2025", tmp_path / "Long-Acre-2026-smaller",
                       "--out", tmp_path)  # fmt: skip
    result = answer["result"]
    assert code == 0, answer["findings"]
    assert "SEASON-AREA" in {one["code"] for one in answer["findings"]}
    assert result["common_ha"] < 50
    table = np.array(result["zones_matched"]["transition_ha"])
    assert table.sum() == pytest.approx(result["common_ha"], rel=2e-3)
    assert result["sites_in_both"] == len(kept)


def test_a_pack_in_another_metric_system_is_the_same_season(packs):
    record, identity = (read(packs / "Long-Acre-2025") for read in (whole_record, identity_of))
    own = season_pack(record, identity=identity)
    moved = season_pack(record, identity=identity, crs="EPSG:32632")
    assert moved.crs == "EPSG:32632"
    np.testing.assert_array_equal(
        moved.samples.properties["boron"].values, own.samples.properties["boron"].values
    )
    for zone, other in zip(own.zones, moved.zones, strict=True):
        assert area_ha(other.area, crs=moved.crs) == pytest.approx(zone.area_ha, rel=1e-3)
    assert moved.surfaces["boron"].mean() == pytest.approx(own.surfaces["boron"].mean(), rel=0.01)


@pytest.mark.parametrize(
    ("second", "more", "code", "says"),
    [
        ("nowhere", (), "OUT-NOT-PACK", "no such folder"),
        ("Long-Acre-2026", ("--applied-unit", "kg B/ha"), "IN-COLUMN", "product_kg_ha"),
        ("Long-Acre-2026", ("--applied-column", "product_kg_ha"), "IN-UNIT", "not clear"),
    ],
)
def test_what_cannot_be_read_is_named_with_a_way_out(packs, tmp_path, second, more, code, says):
    applied = FIELDS / "long_acre/2026/spread_2025.geojson"
    exit_code, answer = run(
        "compare", packs / "Long-Acre-2025", packs / second, "--out", tmp_path / "out",
        "--applied", f"2025={applied}", *more,
    )  # fmt: skip
    (found,) = answer["findings"]
    assert (exit_code, found["code"]) == (3, code)
    assert says in found["what"]
    if code.startswith("IN-"):
        assert "--applied-" in found["hint"]
    assert not (tmp_path / "out").exists()


def test_three_seasons_in_a_row(packs, tmp_path):
    job = FIELDS / "long_acre/2026"
    code, _ = run("prescribe", job, "--season", "2027", "--sampled-on", "2027-09-20",
                  "--out", tmp_path)  # fmt: skip
    assert code == 0
    code, answer = run(
        "compare", packs / "Long-Acre-2025", packs / "Long-Acre-2026",
        tmp_path / "Long-Acre-2027", "--out", tmp_path,
    )  # fmt: skip
    assert code == 0
    pairs = answer["result"]["pairs"]
    assert [[one["season"] for one in pair["seasons"]] for pair in pairs] == [
        ["2025", "2026"], ["2026", "2027"],
    ]  # fmt: skip
    assert not any(one["real"] for one in pairs[1]["zones"])

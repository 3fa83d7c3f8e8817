"""Leaves in season: from a pack and a table of checks to a foliar pass, or to none."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from support.command import FIELDS, prescribed, run

LEAVES = FIELDS / "marl_pit/2026/leaves.csv"
RANGE = ("--range", "alfalfa top", "--boron-g-l", "150")


@pytest.fixture(scope="module")
def pack(tmp_path_factory):
    return prescribed("marl_pit/2026", tmp_path_factory.mktemp("packs"))


def zones_of(folder):
    summary = json.loads((folder / "summary.json").read_text("utf-8"))
    return {zone["zone"]: zone for zone in summary["zones"]}


def test_a_pass_where_leaves_are_short_and_nowhere_else(pack, tmp_path):
    code, answer = run("tissue", pack, LEAVES, *RANGE, "--out", tmp_path)
    assert code == 0, answer["findings"]
    result = answer["result"]
    folder = Path(result["pack"]["folder"])
    assert run("verify", folder)[1]["result"]["whole"]
    before, after = zones_of(pack), zones_of(folder)
    assert after[1]["boron_kg_ha"] > 0
    assert after[2]["boron_kg_ha"] == 0
    for number, zone in after.items():
        assert zone["boron_kg_ha"] <= 0.56 + 1e-9
        assert zone["boron_kg_ha"] + before[number]["boron_kg_ha"] <= 3.36 + 1e-9
    assert "deficient below 20" in after[1]["why"]
    assert {one["verdict"] for one in result["leaf_checks"]} == {
        "foliar pass warranted", "no foliar pass",
    }  # fmt: skip
    page = (folder / "report.html").read_text("utf-8")
    assert "common practice without a source" in page
    assert "the soil still needs mending" in page
    note = (folder / "READ_ME.txt").read_text("utf-8")
    assert "foliar" in note
    assert "H360FD" in note


def test_a_second_pass_counts_the_first(pack, tmp_path):
    folder, given = pack, 0.0
    for place in range(8):
        code, answer = run(
            "tissue", folder, LEAVES, *RANGE, "--dose-kg-ha", "0.56", "--out", tmp_path,
            "--season", f"pass-{place}",
        )  # fmt: skip
        assert code == 0, answer["findings"]
        if answer["result"]["pack"] is None:
            break
        folder = Path(answer["result"]["pack"]["folder"])
        given += zones_of(folder)[1]["boron_kg_ha"]
        assert given + zones_of(pack)[1]["boron_kg_ha"] <= 3.36 + 1e-9
    else:
        pytest.fail("passes went on without end")
    assert "TISSUE-SPENT" in {one["code"] for one in answer["findings"]}


def test_no_pass_and_nothing_written_where_leaves_have_enough(pack, tmp_path):
    table = tmp_path / "leaves.csv"
    table.write_text("zone,leaf boron (mg/kg)\n1,40\n2,41\n", encoding="utf-8")
    code, answer = run("tissue", pack, table, *RANGE, "--out", tmp_path)
    assert (code, answer["result"]["pack"]) == (0, None)
    assert [one["code"] for one in answer["findings"]] == ["TISSUE-NONE"]
    assert [one.name for one in tmp_path.iterdir()] == ["leaves.csv"]


def test_places_in_degrees_fall_into_their_zones(pack, tmp_path):
    document = json.loads((pack / "prescription.geojson").read_text("utf-8"))
    import shapely

    shapes = {
        one["properties"]["zone"]: shapely.geometry.shape(one["geometry"]).representative_point()
        for one in document["features"]
    }
    table = tmp_path / "leaves.csv"
    rows = [f"{point.x},{point.y},{15 if zone == 1 else 40}" for zone, point in shapes.items()]
    table.write_text("lon,lat,boron (ppm)\n" + "\n".join(rows) + "\n", encoding="utf-8")
    code, answer = run("tissue", pack, table, *RANGE, "--out", tmp_path)
    assert code == 0, answer["findings"]
    verdicts = {one["zone"]: one["verdict"] for one in answer["result"]["leaf_checks"]}
    assert verdicts == {1: "foliar pass warranted", 2: "no foliar pass"}


BAD = {
    "no unit": ("zone,leaf boron\n1,15\n", 3, "TISSUE-UNIT"),
    "a sap test": ("zone,leaf boron (mg/L)\n1,15\n", 3, "TISSUE-UNIT"),
    "nothing measured": ("zone,sample\n1,a\n", 3, "TISSUE-COLUMN"),
    "no place": ("sample,leaf boron (mg/kg)\na,15\n", 3, "TISSUE-COLUMN"),
    "no number": ("zone,leaf boron (mg/kg)\n1,few\n", 3, "TISSUE-VALUE"),
    "impossible": ("zone,leaf boron (mg/kg)\n1,15000\n", 3, "TISSUE-VALUE"),
    "negative": ("zone,leaf boron (mg/kg)\n1,-4\n", 3, "TISSUE-VALUE"),
    "no zone number": ("zone,leaf boron (mg/kg)\nwest,15\n", 3, "TISSUE-VALUE"),
    "zone not there": ("zone,leaf boron (mg/kg)\n77,15\n", 3, "TISSUE-ZONE"),
    "elsewhere": ("lon,lat,leaf boron (mg/kg)\n2.0,48.0,15\n", 3, "TISSUE-PLACE"),
    "empty": ("", 3, None),
}


@pytest.mark.parametrize("name", BAD)
def test_bad_tables_are_refused_by_name(pack, tmp_path, name):
    text, exit_code, finding = BAD[name]
    table = tmp_path / "leaves.csv"
    table.write_text(text, encoding="utf-8")
    code, answer = run("tissue", pack, table, *RANGE, "--out", tmp_path)
    assert code == exit_code
    if finding:
        assert finding in {one["code"] for one in answer["findings"]}


def test_what_is_never_assumed_is_asked(pack, tmp_path):
    code, answer = run("tissue", pack, LEAVES, "--boron-g-l", "150", "--out", tmp_path)
    assert (code, answer["findings"][0]["code"]) == (2, "TISSUE-PART")
    code, answer = run("tissue", pack, LEAVES, "--range", "alfalfa top", "--out", tmp_path)
    assert (code, answer["findings"][0]["code"]) == (2, "JOB-MISSING")
    own = ("--deficient-below", "25", "--sufficient-from", "35", "--boron-g-l", "150")
    code, answer = run("tissue", pack, LEAVES, *own, "--out", tmp_path)
    assert (code, answer["findings"][0]["hint"]) == (2, "give `--by`")
    code, answer = run("tissue", pack, LEAVES, *own, "--by", "A. Adviser", "--out", tmp_path)
    assert code == 0
    assert "TISSUE-OWN" in {one["code"] for one in answer["findings"]}
    folder = Path(answer["result"]["pack"]["folder"])
    assert "A. Adviser" in (folder / "READ_ME.txt").read_text("utf-8")


@pytest.mark.parametrize(
    ("given", "what"),
    [
        (("--toxic-above", "150"), "toxic above 150 mg/kg alone is no range"),
        (("--toxic-above", "150", "--range", "alfalfa top"), "alone is no range"),
        (("--deficient-below", "25", "--range", "alfalfa top"), "both the row"),
        (("--deficient-below", "40", "--sufficient-from", "30"), "deficient below 40 lies above"),
        (("--sufficient-from", "30", "--toxic-above", "20"), "sufficient from 30 lies above"),
        (("--deficient-below", "30", "--toxic-above", "20"), "deficient below 30 lies above"),
    ],
)  # fmt: skip
def test_half_a_range_or_one_that_falls_is_refused(pack, tmp_path, given, what):
    code, answer = run(
        "tissue",
        pack,
        LEAVES,
        *given,
        "--by",
        "A. Adviser",
        "--boron-g-l",
        "150",
        "--out",
        tmp_path,
    )
    assert (code, answer["findings"][0]["code"]) == (2, "JOB-VALUE")
    assert what in answer["findings"][0]["what"]
    assert not list(tmp_path.iterdir())


def test_a_dose_above_the_foliar_cap_is_held_to_it(pack, tmp_path):
    code, answer = run("tissue", pack, LEAVES, *RANGE, "--dose-kg-ha", "2", "--out", tmp_path)
    assert code == 0, answer["findings"]
    zone = zones_of(Path(answer["result"]["pack"]["folder"]))[1]
    assert zone["boron_kg_ha"] <= 0.56 + 1e-9
    assert zone["limits_kg_ha"]["rate cap"] == 0.56

"""The three users' ways through, on the sample fields and on real soil data.

Real data: BB.250 of LimeSoDa (clay and organic carbon at 250 points; its boron is put in by the
test, since no open set holds all three); a 20 ha field with Mehlich-3 boron and no clay, and a
37.5 ha field with 184 points (open data sets that may lie beside the checkout).
"""

from __future__ import annotations

import csv
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from support.command import FIELDS, run
from support.data import lime_soda


@pytest.mark.parametrize(
    "job", ["long_acre/2025", "long_acre/2026", "kiln_close/2026", "marl_pit/2026"]
)
def test_advisor_from_laboratory_file_to_a_verified_pack(tmp_path, job):
    code, answer = run("prescribe", FIELDS / job, "--out", tmp_path)
    assert code == 0, answer["findings"]
    result = answer["result"]
    assert result["surfaces"]["boron"]["verdict"] == "pattern found"
    for zone in result["zones"]:
        held = [v for k, v in zone["limits_kg_ha"].items() if k != "need"]
        assert zone["boron_kg_ha"] <= min(held) + 1e-9
        assert zone["why"]
    assert len({round(z["boron_kg_ha"], 3) for z in result["zones"]}) > 1
    code, seen = run("verify", result["pack"]["folder"])
    assert (code, seen["result"]["whole"]) == (0, True)


def test_contractor_takes_the_files(tmp_path):
    code, answer = run("prescribe", FIELDS / "long_acre/2026", "--out", tmp_path)
    assert code == 0
    folder = Path(answer["result"]["pack"]["folder"])
    for name in ("TASKDATA", "shapefile/BORON01.zip", "prescription.geojson"):
        assert (
            run("verify", folder / name, "--boundary", FIELDS / "long_acre/2026/boundary.geojson")[
                0
            ]
            == 0
        )
    machine = answer["result"]["machine"]
    assert [one["name"] for one in machine["points"]] == ["lowest", "mean", "highest"]
    lowest, _, highest = machine["points"]
    # feed kg/min = rate x speed x width / 600
    assert lowest["figures"]["feed_kg_min"] == pytest.approx(lowest["product_rate"] * 10 * 24 / 600)
    assert lowest["product_rate"] >= 4.0
    assert highest["product_rate"] <= 40.0
    assert machine["order"] >= answer["result"]["totals"]["product"]
    note = (folder / "READ_ME.txt").read_text(encoding="utf-8")
    assert "PRODUCT" in note
    assert "H360FD" in note


def test_a_hot_spot_gets_nothing(tmp_path):
    _, answer = run("prescribe", FIELDS / "long_acre/2026", "--out", tmp_path)
    hot = [zone for zone in answer["result"]["zones"] if zone["kind"] == "hot spot"]
    assert hot
    assert all(zone["boron_kg_ha"] == 0 for zone in hot)


def test_confirmed_high_sample_is_taken_at_its_word(tmp_path):
    name = max(
        csv.DictReader((FIELDS / "long_acre/2026/soil.csv").open(encoding="utf-8")),
        key=lambda row: float(row["B hot water (mg/kg)"]),
    )["Sample"]
    _, answer = run(
        "prescribe", FIELDS / "long_acre/2026", "--confirmed-high", name, "--out", tmp_path
    )
    assert all(zone["kind"] != "hot spot" for zone in answer["result"]["zones"])


def square(path, points, margin=20.0):
    west, south = points.min(axis=0) - margin
    east, north = points.max(axis=0) + margin
    ring = [[west, south], [east, south], [east, north], [west, north], [west, south]]
    path.write_text(json.dumps({"type": "Polygon", "coordinates": [ring]}), encoding="utf-8")
    return path


def test_real_clay_and_carbon(tmp_path):
    places, table = lime_soda("BB.250")
    random = np.random.default_rng(4)
    clay, carbon = (table[f"{name}_target"].to_numpy(float) for name in ("Clay", "SOC"))
    boron = (0.2 + 0.03 * clay + 0.1 * carbon) * np.exp(random.normal(0, 0.1, len(clay)))
    frame = pd.DataFrame(
        {"sample": np.arange(len(clay)), "x": places[:, 0], "y": places[:, 1],
         "B (ppm)": boron.round(3), "SOC (%)": carbon, "Clay (%)": clay}
    )  # fmt: skip
    frame.drop_duplicates(["x", "y"]).to_csv(tmp_path / "soil.csv", index=False)
    import geopandas
    from shapely.geometry import box

    bounds = box(*(places.min(axis=0) - 20), *(places.max(axis=0) + 20))
    geopandas.GeoDataFrame(geometry=[bounds], crs="EPSG:25833").to_file(tmp_path / "b.gpkg")
    code, answer = run(
        "prescribe", "--boundary", tmp_path / "b.gpkg", "--samples", tmp_path / "soil.csv",
        "--samples-crs", "EPSG:25833", "--method", "hot water", "--depth-cm", 20,
        "--crop", "sugar beet", "--next-crop", "maize", "--form", "granule", "--boron-pct", 10,
        "--average-duplicates", "--out", tmp_path / "out",
    )  # fmt: skip
    assert code == 0, answer["findings"]
    clay_surface = answer["result"]["surfaces"]["clay"]
    assert clay_surface["verdict"] == "pattern found"
    assert 0.9 < clay_surface["loo"]["msdr"] < 1.1
    matter = answer["result"]["surfaces"]["organic_matter"]["mean"]
    assert matter == pytest.approx(1.724 * carbon.mean(), rel=0.2)


def indiana(datasets, tmp_path):
    file = datasets / "indiana_20ha_grid_2021_boron.csv"
    table = pd.read_csv(file)
    return file, square(tmp_path / "b.geojson", table[["lon", "lat"]].to_numpy(), 0.0006)


def test_mehlich_boron_without_clay_is_refused_and_told_why(datasets, tmp_path):
    file, boundary = indiana(datasets, tmp_path)
    code, answer = run(
        "prescribe", "--boundary", boundary, "--samples", file, "--depth-cm", 20,
        "--crop", "soybean", "--form", "granule", "--boron-pct", 10, "--out", tmp_path,
    )  # fmt: skip
    assert code == 4
    hints = " ".join(one["hint"] for one in answer["findings"] if one["severity"] == "error")
    for option in ("--target-mg-kg", "--ceiling-mg-kg", "--clay-pct"):
        assert option in hints


def test_mehlich_boron_with_own_limits_gives_one_flat_rate(datasets, tmp_path):
    file, boundary = indiana(datasets, tmp_path)
    code, answer = run(
        "prescribe", "--boundary", boundary, "--samples", file, "--depth-cm", 20,
        "--crop", "alfalfa", "--next-crop", "alfalfa", "--form", "granule", "--boron-pct", 10,
        "--clay-pct", 22, "--target-mg-kg", 1.0, "--ceiling-mg-kg", 2.5, "--out", tmp_path,
    )  # fmt: skip
    assert code == 0
    assert answer["result"]["surfaces"]["boron"]["verdict"] == "no pattern"
    assert answer["result"]["zoning"]["count"] == 1
    assert len([z for z in answer["result"]["zones"] if z["kind"] == "zone"]) == 1


def test_184_points_with_a_real_boundary(datasets, tmp_path):
    code, answer = run(
        "prescribe", "--boundary", datasets / "cook_east_boundary.geojson",
        "--samples", datasets / "cook_east_soil_0_10cm_wide.csv",
        "--column", "boron=tn_pct_1998", "--unit", "boron=mg/kg",
        "--column", "organic_carbon=toc_pct_1998", "--unit", "organic_matter=%",
        "--method", "hot water", "--depth-cm", 10, "--clay-pct", 20, "--crop", "sugar beet",
        "--form", "granule", "--boron-pct", 10, "--out", tmp_path,
    )  # fmt: skip
    assert code == 0
    assert answer["result"]["surfaces"]["organic_matter"]["verdict"] == "pattern found"
    assert answer["result"]["field"]["area_ha"] == pytest.approx(37.5, abs=0.1)


def test_agronomist_keeps_last_seasons_zones_and_counts_its_boron(tmp_path):
    _, first = run("prescribe", FIELDS / "long_acre/2025", "--out", tmp_path)
    pack = first["result"]["pack"]["folder"]
    code, second = run(
        "prescribe", FIELDS / "long_acre/2026", "--keep-zones-of", pack, "--out", tmp_path
    )
    assert code == 0
    before = {z["zone"] for z in first["result"]["zones"] if z["kind"] == "zone"}
    after = {z["zone"] for z in second["result"]["zones"] if z["kind"] == "zone"}
    assert after == before

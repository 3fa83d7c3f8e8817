"""A comparison's folder stands whole or not at all, and a packaged change reads back elsewhere."""

from __future__ import annotations

import contextlib
import csv
import json
import os
import sqlite3
from pathlib import Path

import numpy as np
import pytest

from schorl.errors import OutputProblem
from schorl.formats.change import write_change
from schorl.formats.verify import verify
from schorl.formats.whole_folder import complete_swaps
from schorl.steps.comparing import compare
from support.seasons import halves, lattice, season


@pytest.fixture(scope="module")
def change():
    random = np.random.default_rng(4)
    places = lattice(40)
    first = random.uniform(0.4, 0.9, len(places))
    gained = 0.25 * (places[:, 0] < np.median(places[:, 0]))
    return compare(
        season(first, places=places),
        season(first + gained, places=places, name="2026", zones=halves((0.8, 0.4), split=0.6)),
        draws=0,
    )


def write(change, folder, *, replace=False):
    return write_change(
        change, folder, extras={"compare.html": b"<html></html>"}, replace=replace, versions={}
    )


def everything(folder: Path) -> dict[str, bytes]:
    return {one.name: one.read_bytes() for one in sorted(folder.iterdir()) if one.is_file()}


@pytest.mark.parametrize("function", ["fsync", "rename", "mkdir"])
def test_every_failing_call_leaves_the_old_comparison(change, tmp_path, monkeypatch, function):
    """Fail the first, second, ... call of its kind until the whole operation goes through."""
    write(change, tmp_path / "c")
    before = everything(tmp_path / "c")
    owner = os if function == "fsync" else Path
    real = getattr(owner, function)
    left = 0

    def breaking(*given, **named):
        nonlocal left
        if left == 0:
            left = -1
            raise OSError(28, "No space left on device")
        left -= 1
        return real(*given, **named)

    for place in range(60):
        left = place
        monkeypatch.setattr(owner, function, breaking)
        with contextlib.suppress(OutputProblem):
            write(change, tmp_path / "c", replace=True)
        monkeypatch.setattr(owner, function, real)
        complete_swaps(tmp_path / "c")  # as the next command does
        assert everything(tmp_path / "c") == before
        assert [one.name for one in tmp_path.iterdir()] == ["c"]
        if left != -1:
            break
    assert place > 0
    assert left != -1, "the operation never went through"


def test_a_folder_that_cannot_be_made_is_said(change, tmp_path):
    (tmp_path / "file").write_text("in the way", encoding="utf-8")
    with pytest.raises(OutputProblem):
        write(change, tmp_path / "file" / "c")
    assert (tmp_path / "file").read_text(encoding="utf-8") == "in the way"


def test_files_read_back_by_others_as_computed(change, tmp_path):
    import rasterio
    import shapely

    write(change, tmp_path / "c")
    with rasterio.open(tmp_path / "c/change.tif") as raster:
        inside = raster.read_masks(1) > 0
        mapped = change.change_map
        for band, values in enumerate(
            (mapped.change_mg_kg, mapped.sd_mg_kg, mapped.p_adjusted), start=1
        ):
            np.testing.assert_allclose(raster.read(band)[inside], values, rtol=1e-6, atol=1e-7)
        assert raster.tags(ns="IMAGE_STRUCTURE")["LAYOUT"] == "COG"
        assert [raster.tags(band)["unit"] for band in (1, 2)] == ["mg/kg", "mg/kg"]
    with sqlite3.connect(tmp_path / "c/zones_moved.gpkg") as package:
        names = {row[0] for row in package.execute("select table_name from gpkg_contents")}
        rows = package.execute("select zone_before, zone_after, area_ha from moved").fetchall()
    assert names == {"before", "after", "moved"}
    assert rows == [
        (one.before, one.after, pytest.approx(one.area_ha)) for one in change.moved.moved
    ]
    document = json.loads((tmp_path / "c/check_strips.geojson").read_text(encoding="utf-8"))
    for feature, strip in zip(document["features"], change.strips, strict=True):
        shape = shapely.geometry.shape(feature["geometry"])
        assert shape.exterior.is_ccw  # RFC 7946
        assert feature["properties"]["boron_kg_ha"] == list(strip.rates_kg_ha)
    sites = list(csv.reader((tmp_path / "c/revisit_sites.csv").read_text("utf-8").splitlines()))
    assert [row[0] for row in sites[1:]] == [one.name for one in change.revisit]
    note = (tmp_path / "c/READ_ME.txt").read_text(encoding="utf-8")
    assert "H360FD" in note
    assert all(name in note for name in ("change.tif", "zones_moved.gpkg", "p adjusted"))


def test_a_comparison_is_verified_like_a_pack(change, tmp_path):
    write(change, tmp_path / "c")
    assert verify(tmp_path / "c").whole
    with (tmp_path / "c/revisit_sites.csv").open("ab") as stream:
        stream.write(b"X,0,0,1,\r\n")
    seen = verify(tmp_path / "c")
    assert [fault.file for fault in seen.faults] == ["revisit_sites.csv"]


def test_nothing_moved_is_an_empty_layer(tmp_path):
    still = season(np.linspace(0.4, 0.9, len(lattice())))
    write(compare(still, season(still.samples.properties["boron"].values, name="2026"), draws=0),
          tmp_path / "c")  # fmt: skip
    with sqlite3.connect(tmp_path / "c/zones_moved.gpkg") as package:
        assert package.execute("select count(*) from moved").fetchone() == (0,)
    assert verify(tmp_path / "c").whole

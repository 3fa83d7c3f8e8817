"""As-applied files: however a log is cut up, the boron it stands for is the same."""

from __future__ import annotations

import json

import geopandas
import numpy as np
import pytest
import shapely

from schorl.intake.applied import read_applied
from schorl.intake.boundaries import read_boundary
from support.files import ORIGIN, boundary_text, write

CRS = "EPSG:32633"
HOW = {"on": None, "column": "rate", "boron_pct": None, "form": "", "this_season": False}


@pytest.fixture
def field(tmp_path):
    return read_boundary(write(tmp_path / "b.geojson", boundary_text())).value


def rate_at(x):
    """Boron of the invented pass, kg/ha: 1.2 in the west, 0.4 in the east of the 400 m field."""
    return np.where(np.asarray(x) < 200, 1.2, 0.4)


def saved(path, shapes, rates):
    """A layer in metres from the corner of the square field."""
    moved = [shapely.transform(one, lambda c: c + np.array(ORIGIN)) for one in shapes]
    geopandas.GeoDataFrame({"rate": rates}, geometry=moved, crs=CRS).to_file(path)
    return path


def log(path, *, along, across=24.0):
    places = [
        (x, y)
        for y in np.arange(across / 2, 300 + across / 2, across)
        for x in np.arange(along / 2, 400, along)
    ]
    return saved(path, shapely.points(places).tolist(), rate_at([x for x, _ in places]))


@pytest.mark.parametrize("along", [3.0, 8.0, 25.0, 40.0, 50.0])
@pytest.mark.parametrize("kind", ["gpkg", "shp", "geojson"])
def test_a_dense_log_and_a_sparse_one_give_the_same_boron(tmp_path, field, along, kind):
    if kind == "geojson":
        path = log(tmp_path / "log.gpkg", along=along)
        degrees = geopandas.read_file(path).to_crs(4326)
        degrees.to_file(tmp_path / "log.geojson")
    else:
        log(tmp_path / f"log.{kind}", along=along)
    read = read_applied(tmp_path / f"log.{kind}", field=field, unit="kg B/ha", **HOW)
    assert read.findings == ()
    given = sum(area.area * rate for area, rate in read.value.areas) / 1e4
    assert given == pytest.approx(12 * 0.8, rel=0.02)  # 12 ha at 0.8 on average
    assert read.value.kg_ha == pytest.approx(0.8, rel=0.02)
    for one, (other, _) in zip(read.value.areas, read.value.areas[1:], strict=False):
        assert one[0].intersection(other).area < 1e-6


def test_lines_are_passes_of_the_working_width(tmp_path, field):
    rows = np.arange(12, 312, 24)
    lines = [shapely.LineString([(0, y), (400, y)]) for y in rows]
    path = saved(tmp_path / "passes.gpkg", lines, [1.0] * len(rows))
    read = read_applied(path, field=field, unit="kg B/ha", width_m=24.0, **HOW)
    covered = sum(area.area for area, _ in read.value.areas)
    assert covered == pytest.approx(400 * 24 * 12.5, rel=0.01)  # the last pass is half outside


def test_product_and_pounds_become_boron(tmp_path, field):
    path = saved(tmp_path / "a.gpkg", [shapely.box(0, 0, 400, 300)], [10.0])
    read = read_applied(path, field=field, unit="kg/ha", **HOW | {"boron_pct": 15.0})
    assert read.value.kg_ha == pytest.approx(1.5)
    read = read_applied(path, field=field, unit="lb/acre", **HOW | {"boron_pct": 15.0})
    assert read.value.kg_ha == pytest.approx(1.5 * 1.12085, rel=1e-4)
    read = read_applied(path, field=field, unit="kg/ha", **HOW)
    assert (read.value, read.findings[0].code) == (None, "IN-UNIT")


def test_what_a_file_leaves_out_is_told(tmp_path, field):
    half = [shapely.box(0, 0, 200, 300), shapely.box(200, 0, 400, 300)]
    path = saved(tmp_path / "half.gpkg", half, [1.0, np.nan])
    read = read_applied(path, field=field, unit="kg B/ha", **HOW)
    assert [one.code for one in read.findings] == ["IN-APPLIED-BLANK", "IN-APPLIED-PART"]
    assert "50 %" in read.findings[1].what
    read = read_applied(path, field=field, unit="kg B/ha", **HOW | {"column": "dose"})
    assert read.findings[0].code == "IN-COLUMN"
    assert "rate" in read.findings[0].what  # the columns there are


@pytest.mark.parametrize("rate", [-0.1, 25.0, 1e9])
def test_rates_that_no_field_gets_are_refused(tmp_path, field, rate):
    path = saved(tmp_path / "a.gpkg", [shapely.box(0, 0, 400, 300)], [rate])
    read = read_applied(path, field=field, unit="kg B/ha", **HOW)
    assert (read.value, read.findings[0].code) == (None, "IN-IMPOSSIBLE")


def test_a_doubled_row_is_one_place(tmp_path, field):
    path = log(tmp_path / "log.gpkg", along=24.0)
    layer = geopandas.read_file(path)
    twice = geopandas.GeoDataFrame(
        {"rate": np.concatenate([layer["rate"]] * 2)},
        geometry=np.concatenate([layer.geometry] * 2), crs=layer.crs,
    )  # fmt: skip
    twice.to_file(tmp_path / "twice.gpkg")
    one, two = (
        read_applied(tmp_path / f"{name}.gpkg", field=field, unit="kg B/ha", **HOW).value
        for name in ("log", "twice")
    )
    assert len(one.areas) == len(two.areas)
    assert two.kg_ha == pytest.approx(one.kg_ha)


def test_a_layer_of_nothing_is_no_crash(tmp_path, field):
    empty = {"type": "FeatureCollection", "features": [
        {"type": "Feature", "properties": {"rate": 1.0}, "geometry": None}]}  # fmt: skip
    path = write(tmp_path / "a.geojson", json.dumps(empty))
    read = read_applied(path, field=field, unit="kg B/ha", **HOW)
    assert read.value is None

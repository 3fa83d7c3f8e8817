"""Rings of a shapefile that turn the wrong way, written as given by pyshp."""

from __future__ import annotations

import pyproj
import pytest
import shapefile

from schorl.formats.reading_shapefile import ring_faults
from schorl.formats.verify import verify

OUTER = [(13.0, 52.0), (13.0, 52.01), (13.01, 52.01), (13.01, 52.0), (13.0, 52.0)]  # clockwise
HOLE = [(13.002, 52.002), (13.004, 52.002), (13.004, 52.004), (13.002, 52.004), (13.002, 52.002)]
APART = [(east + 0.05, north) for east, north in OUTER]


def written(folder, rings):
    path = folder / "BORON01.shp"
    with shapefile.Writer(str(path), shapeType=shapefile.POLYGON) as target:
        target.field("RATE", "N", size=10, decimal=2)
        target.field("ZONE", "N", size=4)
        target.poly(rings)
        target.record(10.0, 1)
    path.with_suffix(".prj").write_text(pyproj.CRS(4326).to_wkt("WKT1_ESRI"))
    path.with_suffix(".cpg").write_text("UTF-8")
    return path


@pytest.mark.parametrize("rings", [[OUTER], [OUTER, HOLE], [OUTER, APART], [OUTER, HOLE, APART]])
def test_rings_as_the_format_wants_them(tmp_path, rings):
    path = written(tmp_path, rings)
    assert ring_faults(path) == []
    assert verify(path).whole, verify(path).faults


@pytest.mark.parametrize(
    "rings",
    [[OUTER[::-1]], [OUTER, HOLE[::-1]], [OUTER[::-1], HOLE], [OUTER, APART[::-1]]],
    ids=["outer turned", "hole turned", "both as holes", "second part turned"],
)
def test_turned_rings_are_told(tmp_path, rings):
    """GDAL and pyshp would read the second of these as treating the hole."""
    path = written(tmp_path, rings)
    assert [what for _, _, what in ring_faults(path)] == ["a ring turns the wrong way"]
    assert not verify(path).whole


def test_a_ring_left_open_is_told(tmp_path):
    path = written(tmp_path, [OUTER])
    data = bytearray(path.read_bytes())
    data[-16:-8] = data[-32:-24]
    path.write_bytes(bytes(data))
    assert any("not closed" in what for _, _, what in ring_faults(path))

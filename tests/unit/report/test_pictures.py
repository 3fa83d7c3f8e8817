"""Pictures of cells and packed readings, read back by other means."""

from __future__ import annotations

import base64
import zlib

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from schorl.report.layers import Readings, layers_of
from schorl.report.png import cells_png, palette_png
from schorl.report.readings import MISSING, packed


def unpack(said: str, readings: tuple[Readings, ...], count: int) -> list[np.ndarray]:
    """The other way round, as the page's script does it."""
    raw = np.frombuffer(zlib.decompress(base64.b64decode(said)), dtype="<u2")
    blocks = raw.reshape(len(readings), count).astype(np.int64).cumsum(axis=1) % 65536
    return [
        np.where(block == MISSING, np.nan, block / 10.0**one.decimals)
        for one, block in zip(readings, blocks, strict=True)
    ]


@given(st.lists(st.floats(0, 600), min_size=1, max_size=50), st.integers(0, 2))
def test_packed_readings_come_back_rounded(values, decimals):
    both = (
        Readings(name="a", decimals=decimals, values=np.array(values)),
        Readings(name="b", decimals=0, values=np.array(values)),
    )
    first, second = unpack(packed(both), both, len(values))
    np.testing.assert_allclose(first, values, atol=0.5 * 10.0**-decimals + 1e-9)
    np.testing.assert_allclose(second, values, atol=0.5 + 1e-9)


def test_what_does_not_fit_is_missing_rather_than_wrong():
    odd = (Readings(name="a", decimals=2, values=np.array([1.0, np.nan, -0.5, 700.0, 2.0])),)
    (back,) = unpack(packed(odd), odd, 5)
    np.testing.assert_array_equal(np.isnan(back), [False, True, True, True, False])


@pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning")
def test_a_picture_reads_back_in_another_library():
    from rasterio.io import MemoryFile

    indices = np.array([[0, 1, 2], [2, 1, 0]])
    with MemoryFile(palette_png(indices, ("#102030", "#f0e0d0"))) as held, held.open() as picture:
        np.testing.assert_array_equal(picture.read(1), indices)
        assert picture.colormap(1)[1] == (16, 32, 48, 255)
        assert picture.colormap(1)[0][3] == 0


@pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning")
def test_pictures_of_layers_hold_each_cells_class(record):
    from rasterio.io import MemoryFile

    for layer in layers_of(record):
        held = cells_png(record.grid, layer.classes, layer.scale.colours)
        with MemoryFile(base64.b64decode(held.split(",")[1])) as file, file.open() as picture:
            inner = picture.read(1)[1:-1, 1:-1]
        np.testing.assert_array_equal(inner[record.grid.inside], layer.classes + 1)

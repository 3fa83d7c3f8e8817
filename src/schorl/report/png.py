"""Palette pictures of cells: a few kilobytes each, the same bytes every time."""

from __future__ import annotations

import base64
import struct
import zlib

import numpy as np

from schorl.model.arrays import Counts
from schorl.model.field import CellGrid


def _chunk(kind: bytes, body: bytes) -> bytes:
    check = zlib.crc32(kind + body)
    return struct.pack(">I", len(body)) + kind + body + struct.pack(">I", check)


def palette_png(indices: Counts, colours: tuple[str, ...]) -> bytes:
    """A PNG (ISO/IEC 15948) of 8-bit palette indices ``(rows, cols)``; index 0 is clear.

    Index i + 1 takes ``colours[i]``.
    """
    rows, cols = indices.shape
    entries = b"\xff\xff\xff" + b"".join(bytes.fromhex(colour[1:]) for colour in colours)
    lines = np.zeros((rows, cols + 1), dtype=np.uint8)  # a leading 0: no row filter
    lines[:, 1:] = indices
    header = struct.pack(">IIBBBBB", cols, rows, 8, 3, 0, 0, 0)
    return b"".join(
        [
            b"\x89PNG\r\n\x1a\n",
            _chunk(b"IHDR", header),
            _chunk(b"PLTE", entries),
            _chunk(b"tRNS", b"\x00"),
            _chunk(b"IDAT", zlib.compress(lines.tobytes(), 9)),
            _chunk(b"IEND", b""),
        ]
    )


def cells_png(grid: CellGrid, classes: Counts, colours: tuple[str, ...]) -> str:
    """A ``data:`` address of the classes of all cells ``(n_cells,)``.

    One further ring of pixels repeats the nearest cells, so that nothing white is left between
    the cells and the boundary that the picture is cut with.
    """
    raster = np.zeros(grid.inside.shape, dtype=np.intp)
    raster[grid.inside] = classes + 1
    picture = palette_png(_grown(raster), colours)
    return "data:image/png;base64," + base64.b64encode(picture).decode("ascii")


def _grown(raster: Counts) -> Counts:
    grown = np.pad(raster, 1)
    for axis, shift in ((0, 1), (0, -1), (1, 1), (1, -1)):
        moved = np.roll(np.pad(raster, 1), shift, axis=axis)
        grown = np.where(grown == 0, moved, grown)
    return grown

"""What a shapefile's own bytes say that its readers mend or pass over in silence.

Readers take a half-written or appended set for a whole one, and guess at rings that turn the wrong
way: an excluded hole is then ground to be treated.
"""

from __future__ import annotations

import struct
from pathlib import Path

import numpy as np
import shapely

#: File, place in it, and fault.
Said = list[tuple[str, str, str]]
HEADER, POLYGON = 100, 5


def length_faults(path: Path) -> Said:
    """Header lengths and counts of the three files against real ones."""
    said: Said = []
    count = 0
    for suffix in (".shp", ".shx"):
        one = path.with_suffix(suffix)
        data = one.read_bytes()
        length = 2 * int.from_bytes(data[24:28], "big")
        if length != len(data):
            what = f"its header says {length} bytes, it has {len(data)}"
            said.append((one.name, "header", what))
        if int.from_bytes(data[32:36], "little") != POLYGON:
            said.append((one.name, "header", "not of polygon type"))
        count = (len(data) - HEADER) // 8
    table = path.with_suffix(".dbf").read_bytes()
    rows = int.from_bytes(table[4:8], "little")
    header, width = int.from_bytes(table[8:10], "little"), int.from_bytes(table[10:12], "little")
    held = (len(table) - header) // max(width, 1)
    if not rows == held == count:
        what = f"{rows} rows said, {held} held, {count} shapes"
        said.append((path.with_suffix(".dbf").name, "header", what))
    return said


def ring_faults(path: Path) -> Said:
    """Rings left open, or turning so that a hole is read as ground to treat.

    Outer rings turn clockwise, holes the other way (ESRI Shapefile Technical Description, 1998).
    """
    features, points, sizes = _rings(path.read_bytes())
    if not len(sizes):
        return []
    ends = np.cumsum(sizes)
    open_ = (points[ends - sizes] != points[ends - 1]).any(axis=1) | (sizes < 4)
    said = [
        (path.name, f"feature {place}", "a ring is not closed")
        for place in dict.fromkeys(features[open_].tolist())
    ]
    if said:
        return said
    rings = shapely.linearrings(points, indices=np.repeat(np.arange(len(sizes)), sizes))
    holes = shapely.is_ccw(rings)
    starts = np.flatnonzero(np.diff(features, prepend=0))
    for start, end in zip(starts, [*starts[1:], len(features)], strict=True):
        if holes[start] or (end - start > 1 and _turned(rings[start:end], holes[start:end])):
            what = "a ring turns the wrong way"
            said.append((path.name, f"feature {features[start]}", what))
    return said


def _turned(rings: np.ndarray, holes: np.ndarray) -> bool:
    """Whether outer rings lie in one another, or a hole in none."""
    areas = shapely.polygons(rings)
    outer = areas[~holes]
    if sum(one.area for one in outer) > shapely.union_all(outer).area * (1 + 1e-9):
        return True
    return any(not shapely.intersects(outer, one.representative_point()).any()
               for one in areas[holes])  # fmt: skip


def _rings(data: bytes) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Feature of each ring (from 1), all points ``(n, 2)``, and points of each ring."""
    features: list[int] = []
    points: list[np.ndarray] = []
    sizes: list[int] = []
    at, feature = HEADER, 0
    while at < len(data):
        feature += 1
        length = 2 * int.from_bytes(data[at + 4 : at + 8], "big")
        if int.from_bytes(data[at + 8 : at + 12], "little") == POLYGON:
            parts, count = struct.unpack_from("<2i", data, at + 44)
            starts = struct.unpack_from(f"<{parts}i", data, at + 52)
            place = at + 52 + 4 * parts
            points.append(np.frombuffer(data, "<f8", 2 * count, place).reshape(count, 2))
            sizes += [end - start for start, end in zip(starts, (*starts[1:], count), strict=True)]
            features += [feature] * parts
        at += 8 + length
    if not points:
        return np.empty(0, int), np.empty((0, 2)), np.empty(0, int)
    return np.array(features), np.concatenate(points), np.array(sizes)

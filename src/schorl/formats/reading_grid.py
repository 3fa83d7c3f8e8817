"""The grid of a task data set, read back from its bytes by the standard's rules."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import shapely

from schorl.formats.taskdata import MASS_COUNTS, MASS_DDI, VOLUME_COUNTS, VOLUME_DDI
from schorl.model.arrays import Floats

#: Cells that a grid is allowed to have here: a file must not be able to fill the memory.
MOST_CELLS = 20_000_000
PER_UNIT = {MASS_DDI: MASS_COUNTS, VOLUME_DDI: VOLUME_COUNTS}
Said = list[tuple[str, str]]


@dataclass(frozen=True, eq=False, kw_only=True)
class TaskCells:
    """Product rate of each cell, ``(rows, cols)`` from the south-west, and its middle in degrees."""

    rates: Floats
    east: Floats
    north: Floats
    half_east: float
    half_north: float


def read_cells(path: Path, task: ElementTree.Element) -> tuple[TaskCells | None, Said]:
    """Cells of a task's grid, and what is wrong with them (place, fault)."""
    element = task.find("GRD")
    assert element is not None
    shape, said = _shape(element)
    if said:
        return None, said
    south, west, cell_north, cell_east, rows, cols = shape
    data, said = _data(path, element)
    if data is None:
        return None, said
    kind = element.get("I")
    rates, more = (_by_code if kind == "1" else _by_value)(task, element, data, rows * cols)
    if rates is None:
        return None, [*said, *more]
    east = west + (np.arange(cols) + 0.5) * cell_east
    north = south + (np.arange(rows) + 0.5) * cell_north
    cells = TaskCells(
        rates=rates.reshape(rows, cols), east=np.broadcast_to(east, (rows, cols)),
        north=np.broadcast_to(north[:, None], (rows, cols)), half_east=cell_east / 2,
        half_north=cell_north / 2,
    )  # fmt: skip
    return cells, [*said, *more]


def _shape(
    element: ElementTree.Element,
) -> tuple[tuple[float, float, float, float, int, int], Said]:
    try:
        south, west, up, right = (float(element.get(key, "nan")) for key in "ABCD")
        cols, rows = int(element.get("E", "")), int(element.get("F", ""))
    except ValueError:
        return (0, 0, 0, 0, 0, 0), [("GRD", "its place or size is not a number")]
    said = []
    if not (-90 <= south <= 90 and -180 <= west <= 180 and 0 < up < 1 and 0 < right < 1):
        said.append(("GRD", f"corner {south}, {west} and cell {up}, {right} are no degrees"))
    if not (rows > 0 and cols > 0 and rows * cols <= MOST_CELLS):
        said.append(("GRD", f"{rows} rows and {cols} columns"))
    if element.get("I") not in ("1", "2"):
        said.append(("GRD", f"type `{element.get('I')}` is neither 1 nor 2"))
    if any(not math.isfinite(one) for one in (south, west, up, right)):
        said.append(("GRD", "its place or size is not a number"))
    return (south, west, up, right, rows, cols), said


def _data(path: Path, element: ElementTree.Element) -> tuple[bytes | None, Said]:
    name = f"{element.get('G', '')}.bin"
    there = {one.name for one in path.parent.iterdir()}
    if Path(name).name != name or name not in there:
        return None, [("GRD", f"its file `{name}` is not there")]
    data = (path.parent / name).read_bytes()
    said = element.get("H")
    if said is not None and said != str(len(data)):
        return data, [("GRD", f"its file has {len(data)} bytes, {said} are said")]
    return data, []


def _by_code(
    task: ElementTree.Element, _element: ElementTree.Element, data: bytes, count: int
) -> tuple[Floats | None, Said]:
    """Type 1: a byte a cell, the code of a zone."""
    if len(data) != count:
        return None, [("GRD", f"{len(data)} bytes for {count} cells")]
    rates = np.full(256, np.nan)
    for zone in task.findall("TZN"):
        code, rate = _whole(zone.get("A")), _rate(zone.find("PDV"))
        if code is not None and 0 <= code < 256 and rate is not None:
            rates[code] = rate
    found = rates[np.frombuffer(data, dtype=np.uint8)]
    if np.isnan(found).any():
        codes = sorted({one for one in data if np.isnan(rates[one])})
        return None, [("GRD", f"cells of zone {codes[0]}, which is not there or has no rate")]
    return found, []


def _by_value(
    task: ElementTree.Element, element: ElementTree.Element, data: bytes, count: int
) -> tuple[Floats | None, Said]:
    """Type 2: a signed 32-bit rate a cell for the one value of the template zone."""
    zones = {zone.get("A"): zone for zone in task.findall("TZN")}
    template = zones.get(element.get("J"))
    if template is None:
        return None, [("GRD", f"its zone `{element.get('J')}` is not there")]
    values = template.findall("PDV")
    if len(values) != 1:
        return None, [("GRD", f"{len(values)} values a cell; one is expected")]
    per = PER_UNIT.get(values[0].get("A", ""))
    if per is None or len(data) != 4 * count:
        return None, [("GRD", f"{len(data)} bytes for {count} cells of 4")]
    counts = np.frombuffer(data, dtype="<i4")
    said = [("GRD", f"a rate of {counts.min()} is negative")] if (counts < 0).any() else []
    return counts / per, said


def _whole(text: str | None) -> int | None:
    return int(text) if text is not None and text.isdigit() else None


def _rate(value: ElementTree.Element | None) -> float | None:
    if value is None:
        return None
    counts, per = _whole(value.get("B")), PER_UNIT.get(value.get("A", ""))
    return None if counts is None or per is None else counts / per


def treated_outside(cells: TaskCells, outline: shapely.Geometry) -> int:
    """Cells that get product though their middle lies outside an outline in degrees."""
    shapely.prepare(outline)
    inside = shapely.contains_xy(outline, cells.east, cells.north)
    return int((~inside & (cells.rates > 0)).sum())

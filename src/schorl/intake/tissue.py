"""Leaf, sap and brix checks from a table: one row a check, in a zone or at a place."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import shapely

from schorl.findings import Finding, finding
from schorl.geodesy import WGS84, transform_points
from schorl.intake.guards import Unreadable
from schorl.intake.lab_tables import Table, read_table
from schorl.intake.quantities import plain_words
from schorl.model.field import Field
from schorl.model.reading import Reading
from schorl.model.record import Recognition
from schorl.model.tissue import TissueSample

#: What a column may be called, after ``plain_words`` and without its unit.
WORDS = {
    "name": ("sample", "sample id", "id", "name", "check"),
    "zone": ("zone", "zone number", "management zone"),
    "lon": ("lon", "longitude"),
    "lat": ("lat", "latitude"),
    "leaf": ("leaf boron", "boron", "b", "tissue boron", "plant boron"),
    "young": ("young leaf boron", "young leaves boron", "boron young leaves", "young boron"),
    "old": ("old leaf boron", "old leaves boron", "boron old leaves", "old boron"),
    "evening": ("brix evening", "evening brix"),
    "morning": ("brix morning", "morning brix"),
}
UNITS = ("mg/kg", "ppm", "mg/kg dm", "mg/kg dry matter", "ppm dm")
LEAVES, NUMBERS = ("leaf", "young", "old"), ("leaf", "young", "old", "evening", "morning")
#: No plant part holds more than a leaf of a poisoned crop (mg/kg); no sap more sugar (degrees).
MOST = {"leaf": 3000.0, "young": 3000.0, "old": 3000.0, "evening": 40.0, "morning": 40.0}


def read_tissue(path: Path, *, field: Field) -> Reading[tuple[TissueSample, ...]]:
    """Read checks of plants.

    A row lies in a zone by its number, or at longitude and latitude inside the field. Boron
    columns must name their unit: ``leaf boron (mg/kg)``.
    """
    try:
        table = read_table(path, layer=None, known=lambda row: len(_named(row)))
    except Unreadable as problem:
        return Reading(value=None, findings=(problem.found,))
    columns = {key: place for place, key in _named(table.headers)}
    found = _column_faults(table, columns)
    if found:
        return Reading(value=None, findings=tuple(found))
    samples = [_sample(table, place, columns, field, found) for place in range(len(table.rows))]
    if found:
        return Reading(value=None, findings=tuple(found))
    recognised = tuple(
        Recognition(what=key, where=f"{path.name}, column `{table.headers[place]}`", how="as named")
        for key, place in columns.items()
    )
    return Reading(value=tuple(one for one in samples if one), recognised=recognised)


def _named(headers: Sequence[str]) -> list[tuple[int, str]]:
    """Place and meaning of the headers that are known."""
    found = []
    for place, header in enumerate(headers):
        bare = plain_words(re.sub(r"\(.*?\)|\[.*?\]", " ", header))
        for key, words in WORDS.items():
            if bare in words:
                found.append((place, key))
    return found


def _column_faults(table: Table, columns: dict[str, int]) -> list[Finding]:
    found = []
    if not any(key in columns for key in NUMBERS):
        what = f"no column of leaf boron or brix among {', '.join(table.headers)}"
        hint = "name columns `leaf boron (mg/kg)`, `young leaf boron (mg/kg)`, `brix evening`, ..."
        found.append(finding("TISSUE-COLUMN", where=table.source, what=what, hint=hint))
    if "zone" not in columns and not {"lon", "lat"} <= set(columns):
        what = "neither a zone number nor longitude and latitude"
        found.append(finding("TISSUE-COLUMN", where=table.source, what=what))
    for key in LEAVES:
        if key in columns and _unit(table, columns[key]) not in UNITS:
            header = table.headers[columns[key]]
            what = f"the unit of `{header}` is not said"
            hint = f"name the column `{header.split('(')[0].strip()} (mg/kg)` of dry matter"
            found.append(finding("TISSUE-UNIT", where=table.source, what=what, hint=hint))
    return found


def _unit(table: Table, place: int) -> str:
    inside = re.search(r"[(\[](.*?)[)\]]", table.headers[place])
    said = inside.group(1) if inside else table.units[place] if place < len(table.units) else ""
    return plain_words(said)


def _sample(
    table: Table, place: int, columns: dict[str, int], field: Field, found: list[Finding]
) -> TissueSample | None:
    row, where = table.rows[place], f"{table.source}, line {table.lines[place]}"
    said = {key: row[at].strip() if at < len(row) else "" for key, at in columns.items()}
    if not any(said.values()):
        return None
    numbers = {key: _number(said.get(key, ""), table, where, key, found) for key in NUMBERS}
    zone, at = _zone(said.get("zone", ""), where, found), None
    if zone is None and not said.get("zone"):
        at = _place(said, table, where, field, found)
    return TissueSample(
        name=said.get("name") or f"row {place + 1}", zone=zone, place_m=at,
        leaf=numbers["leaf"], below_limit=said.get("leaf", "").startswith("<"),
        young=numbers["young"], old=numbers["old"], brix_evening=numbers["evening"],
        brix_morning=numbers["morning"],
    )  # fmt: skip


def _number(text: str, table: Table, where: str, key: str, found: list[Finding]) -> float | None:
    bare = text.removeprefix("<").strip()
    if not bare:
        return None
    try:
        value = float(bare.replace(",", ".") if table.decimal_comma else bare)
    except ValueError:
        value = math.nan
    if not 0 <= value <= MOST.get(key, math.inf):
        what = f"`{text}` is no value for {key}"
        found.append(finding("TISSUE-VALUE", where=where, what=what))
        return None
    return value


def _zone(text: str, where: str, found: list[Finding]) -> int | None:
    if not text:
        return None
    if not text.isdigit():
        found.append(finding("TISSUE-VALUE", where=where, what=f"`{text}` is no zone number"))
        return None
    return int(text)


def _place(
    said: dict[str, str], table: Table, where: str, field: Field, found: list[Finding]
) -> tuple[float, float] | None:
    degrees = []
    for key in ("lon", "lat"):
        text = said.get(key, "")
        try:
            degrees.append(float(text.replace(",", ".") if table.decimal_comma else text))
        except ValueError:
            what = f"`{text}` is no {'longitude' if key == 'lon' else 'latitude'}"
            found.append(finding("TISSUE-VALUE", where=where, what=what))
            return None
    ((east, north),) = transform_points(np.array([degrees]), source=WGS84, target=field.crs)
    if not shapely.contains_xy(field.boundary.buffer(1.0), east, north):
        what = f"{degrees[0]}, {degrees[1]} does not lie in the field"
        found.append(finding("TISSUE-PLACE", where=where, what=what))
        return None
    return float(east), float(north)

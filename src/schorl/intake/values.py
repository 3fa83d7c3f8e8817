"""The values of one column in the unit the property is held in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from schorl.intake.draft import Draft
from schorl.intake.headers import Column
from schorl.intake.lab_tables import Table
from schorl.intake.quantities import (
    BORON_IN_B2O3,
    FACTORS,
    MATTER_PER_CARBON,
    SLICE_CM,
    Cell,
    either_way,
    marks_of,
    read_cell,
    unit_named,
)
from schorl.model.reading import SampleHints
from schorl.model.samples import PROPERTY_UNITS, Measured


@dataclass(frozen=True, kw_only=True)
class Read:
    """A property's values, the unit they were printed in, and whether it is per volume."""

    measured: Measured
    unit: str
    per_volume: bool


def measured_values(
    table: Table,
    column: Column,
    name: str,
    rows: list[int],
    ids: tuple[str, ...],
    *,
    hints: SampleHints,
    draft: Draft,
) -> Read | None:
    """Read and convert a column; None with findings where that cannot be done safely."""
    if _thousands_or_decimals(table, column, draft):
        return None
    cells = [
        read_cell(table.rows[row][column.place], decimal_comma=table.decimal_comma) for row in rows
    ]
    for cell, row, sample in zip(cells, rows, ids, strict=True):
        if cell.bad:
            text = table.rows[row][column.place]
            draft.note(
                "IN-NOT-NUMBER",
                f"`{text}` in `{column.header}` is not a number",
                where=f"line {table.lines[row]}, sample {sample}",
            )
    unit = _unit_of(table, column, name, cells, hints, draft)
    if unit is None:
        return None
    factor = _factor(unit, name, column, hints, draft)
    if factor is None:
        return None
    values = np.array([np.nan if cell.value is None else cell.value for cell in cells]) * factor
    below = np.array([cell.below for cell in cells])
    if not _fill_limits(values, below, name, column, draft):
        return None
    _say(name, column, unit, factor, table, draft)
    return Read(
        measured=Measured(
            values=values, below_limit=below, column=column.header, unit_read=unit or "pH"
        ),
        unit=unit,
        per_volume=unit == "mg/L soil",
    )


def _thousands_or_decimals(table: Table, column: Column, draft: Draft) -> bool:
    """Ask about figures such as 1,234 where neither column nor table tells what their mark parts.

    A mark that parts decimals elsewhere in the column, or alone in the table, parts them here too.
    """
    cells = [row[column.place] for row in table.rows]
    doubtful = [
        (cell, line) for cell, line in zip(cells, table.lines, strict=True) if either_way(cell)
    ]
    if not doubtful:
        return False
    own = {mark for cell in cells for mark in marks_of(cell)[:1]} - {""}
    parting = {mark for cell in cells for mark in marks_of(cell)[1:]} - {""}
    everywhere = {mark for row in table.rows for cell in row for mark in marks_of(cell)[:1]} - {""}
    marks = {either_way(cell) for cell, _ in doubtful}
    english = marks == {"."} and not (own | everywhere) - {"."}
    told = own == marks and not parting
    alone = not own and everywhere == marks and not parting
    if told or alone or english or (marks == {"."} and table.how == "spreadsheet"):
        return False
    cell, line = doubtful[0]
    bare = cell.replace(",", "").replace(".", "")
    as_decimal = cell.replace(",", ".")
    draft.note(
        "IN-THOUSANDS",
        f"`{cell}` in `{column.header}` may be {bare} or {as_decimal}",
        where=f"line {line}",
    )
    return True


def _unit_of(
    table: Table, column: Column, name: str, cells: list[Cell], hints: SampleHints, draft: Draft
) -> str | None:
    if name == "ph":
        return ""
    asked = hints.units.get(name)
    if asked is not None:
        unit = unit_named(asked)
        if unit is None:
            draft.note("IN-UNIT", f"`{asked}` is not a unit that is known", where=column.header)
        elif column.unit not in (None, unit) and not unit.startswith(f"{column.unit} "):
            what = f"`--unit {name}={asked}` was given, `{column.header}` says {column.unit}"
            draft.note("IN-UNIT", what, "leave `--unit` out, or mend the header")
            return None
        return unit
    from_cells = {cell.unit for cell in cells if cell.unit}
    named = {unit_named(one) for one in from_cells}
    in_row = unit_named(table.units[column.place])
    said = column.unit or in_row
    if len((named | {said, in_row}) - {None}) > 1:
        draft.note(
            "IN-UNIT",
            f"`{column.header}` mixes units: {', '.join(sorted({*from_cells, *(one for one in (said, in_row) if one)}))}",
            f"bring it to one unit, or give `--unit {name}=...`",
        )
        return None
    unit = said or (named.pop() if named else None)
    if unit is None:
        draft.note(
            "IN-UNIT",
            f"`{column.header}` does not say its unit",
            f"give it with `--unit {name}={PROPERTY_UNITS[name]}`",
        )
    return unit


def _factor(unit: str, name: str, column: Column, hints: SampleHints, draft: Draft) -> float | None:
    if unit == "mg/L" and name == "boron":
        draft.note(
            "IN-VOLUME",
            f"`{column.header}` is in mg/L: of soil or of extract is not said",
            'give `--unit boron="mg/L soil"` where the laboratory reports by volume of soil; '
            "figures per litre of extract must be brought to mg/kg by the laboratory",
        )
        return None
    factor = FACTORS[name].get(unit)
    if factor is None:
        draft.note(
            "IN-UNIT",
            f"`{column.header}` in {unit} cannot be {name.replace('_', ' ')}",
            f"name the right column or unit: `--unit {name}={PROPERTY_UNITS[name]}`",
        )
        return None
    if name == "boron" and unit in ("lb/acre", "kg/ha") and hints.report_depth_cm is not None:
        factor *= SLICE_CM / hints.report_depth_cm
    if column.oxide and name == "boron":
        factor *= BORON_IN_B2O3
    if column.what == "organic_carbon":
        factor *= MATTER_PER_CARBON
    return factor


def _fill_limits(
    values: np.ndarray, below: np.ndarray, name: str, column: Column, draft: Draft
) -> bool:
    """A bare "not detected" takes the limit the file states elsewhere; else it is asked for."""
    bare = below & ~np.isfinite(values)
    if not bare.any():
        return True
    stated = values[below & np.isfinite(values)]
    if not len(stated):
        draft.note(
            "IN-LIMIT",
            f"`{column.header}` says not detected {int(bare.sum())} times without the limit",
            "write the limit into the file, as in `<0.1`",
        )
        return False
    values[bare] = stated.max()
    return True


def _say(name: str, column: Column, unit: str, factor: float, table: Table, draft: Draft) -> None:
    words = name.replace("_", " ")
    how = f"{words} in {PROPERTY_UNITS[name]}"
    if unit and factor != 1.0:
        how += f", read as {unit} x {factor:.5g}"
    elif unit:
        how += f" (printed as {unit})"
    if column.what == "organic_carbon":
        how += f"; organic carbon x {MATTER_PER_CARBON}"
    if column.oxide:
        how += "; as B2O3"
    draft.saw(words, f"column `{table.headers[column.place]}`", how)

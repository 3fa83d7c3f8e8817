"""A laboratory file as samples in the field's metres: recognised, converted, nothing guessed."""

from __future__ import annotations

from collections import Counter
from pathlib import Path

import numpy as np

from schorl.intake.columns import Chosen, choose_columns, pivoted
from schorl.intake.draft import Draft
from schorl.intake.guards import Unreadable
from schorl.intake.headers import method_in
from schorl.intake.lab_tables import TABLE_SUFFIXES, Table, read_table
from schorl.intake.places import places_of
from schorl.intake.quantities import SLICE_CM, plain_words, read_cell
from schorl.intake.repeats import averaged
from schorl.intake.values import measured_values
from schorl.intake.vectors import Features, read_features
from schorl.model.field import Field
from schorl.model.reading import Reading, SampleHints
from schorl.model.samples import Campaign, Measured, SampleSet

POINT_CORES, ZONE_CORES = 8, 15
MEASURABLE = (
    "boron", "organic_matter", "clay", "sand", "ph", "bulk_density", "stones", "calcium",
    "total_boron",
)  # fmt: skip


def read_samples(path: Path, *, field: Field, hints: SampleHints) -> Reading[SampleSet]:
    """Read a laboratory file or vector layer into samples.

    Every recognition is reported. What is missing or ambiguous is asked for by option name in a
    finding of severity error; then ``value`` is None.
    """
    draft = Draft(source=path.name)
    try:
        samples = _read(path, field, hints, draft)
    except Unreadable as problem:
        draft.findings.append(problem.found)
        samples = None
    return Reading(
        value=None if draft.broken else samples,
        findings=tuple(draft.findings),
        recognised=tuple(draft.recognised),
    )


def _read(path: Path, field: Field, hints: SampleHints, draft: Draft) -> SampleSet | None:
    features = None
    if path.suffix.lower() in TABLE_SUFFIXES:
        table = read_table(path, layer=hints.layer)
        draft.saw("table", "file", f"{len(table.rows)} rows ({table.how})")
        for line, said in table.footer:
            draft.note("IN-FOOTER", f"`{said}` under the table is no sample", where=f"line {line}")
    else:
        features = read_features(path, layer=hints.layer, crs=hints.crs, option="samples")
        table = _as_table(path, features)
    table = pivoted(table, draft)
    chosen = choose_columns(table, hints, draft)
    rows = _wanted_rows(table, chosen, hints, draft)
    if not rows:
        draft.note("IN-NO-ROWS", "no sample is left to read")
        return None
    ids = _ids(table, chosen, rows, draft)
    places = places_of(
        table, chosen, rows, ids, features=features, field=field, hints=hints, draft=draft
    )
    campaign = _campaign(table, chosen, hints, draft)
    properties, constants, volume = _properties(table, chosen, rows, ids, hints, draft)
    if draft.broken or places is None or campaign is None:
        return None
    cores = _cores(table, chosen, rows, places.kind, hints)
    return averaged(
        SampleSet(
            ids=ids,
            east_north_m=places.east_north_m,
            properties=properties,
            kind=places.kind,
            cores=cores,
            campaign=_with_volume(campaign, volume),
            areas=places.areas,
            constants=constants,
            source=path.name,
        ),
        hints,
        draft,
    )


def _as_table(path: Path, features: Features) -> Table:
    """Attributes of a vector layer as a table of text."""
    headers: list[str] = []
    for row in features.attributes:
        headers += [key for key in row if key not in headers]
    rows = tuple(
        tuple("" if row.get(key) is None else str(row.get(key)) for key in headers)
        for row in features.attributes
    )
    return Table(
        source=path.name,
        headers=tuple(headers),
        units=("",) * len(headers),
        rows=rows,
        lines=tuple(range(1, len(rows) + 1)),
        decimal_comma=any("," in cell for row in rows for cell in row),
        how="vector layer",
    )


def _wanted_rows(table: Table, chosen: Chosen, hints: SampleHints, draft: Draft) -> list[int]:
    """Rows that are samples of the wanted depth and not struck out."""
    rows = list(range(len(table.rows)))
    struck = {one.strip().lower() for one in hints.strike_out}
    there = {
        table.rows[i][chosen.sample].strip().lower() for i in rows if chosen.sample is not None
    }
    for name in sorted(struck - there):
        draft.note("IN-NO-SUCH-SAMPLE", f"`--strike-out {name}`: no sample is called that")
    if struck and chosen.sample is not None:
        kept = [i for i in rows if table.rows[i][chosen.sample].strip().lower() not in struck]
        if len(kept) < len(rows):
            draft.note("IN-STRUCK", f"{len(rows) - len(kept)} samples were struck out by name")
        rows = kept
    if chosen.depth is None:
        return rows
    depths = sorted({table.rows[i][chosen.depth] for i in rows if table.rows[i][chosen.depth]})
    if len(depths) <= 1:
        return rows
    if hints.keep_depth is None:
        draft.note(
            "IN-DEPTHS",
            f"the file holds several depths: {', '.join(depths[:8])}",
            f'choose one with `--keep-depth "{depths[0]}"`',
        )
        return rows
    wanted = plain_words(hints.keep_depth)
    kept = [i for i in rows if plain_words(table.rows[i][chosen.depth]) == wanted]
    if not kept:
        draft.note("IN-DEPTHS", f"no row has the depth {hints.keep_depth}; there are {depths}")
    return kept


def _ids(table: Table, chosen: Chosen, rows: list[int], draft: Draft) -> tuple[str, ...]:
    if chosen.sample is None:
        draft.saw("sample names", "rows", "numbered by row, no column of names was understood")
        return tuple(f"row {table.lines[i]}" for i in rows)
    names = [table.rows[i][chosen.sample] or f"row {table.lines[i]}" for i in rows]
    double = sorted(name for name, count in Counter(names).items() if count > 1)
    if double:
        draft.note(
            "IN-SAME-NAME",
            f"several rows have the name {', '.join(f'`{one}`' for one in double[:5])}",
            "name each sample once, or choose the depth or analysis that is meant",
        )
    return tuple(names)


def _ask_about_clashes(chosen: Chosen, hints: SampleHints, draft: Draft) -> None:
    """What a person gave must not contradict what the file says of method and depth."""
    named = None if hints.method is None else method_in(plain_words(hints.method))
    if named is not None and chosen.method not in (None, named):
        what = f'`--method "{hints.method}"` was given, the boron column says {chosen.method}'
        draft.note("IN-METHOD-CLASH", what)
    said = chosen.depth_cm
    if hints.depth_cm is not None and said is not None and abs(hints.depth_cm - said) > 0.5:
        what = f"`--depth-cm {hints.depth_cm:g}` was given, the file says {said:g} cm"
        draft.note("IN-DEPTH-CLASH", what)


def _campaign(table: Table, chosen: Chosen, hints: SampleHints, draft: Draft) -> Campaign | None:
    _ask_about_clashes(chosen, hints, draft)
    method = hints.method or chosen.method
    if method is None:
        draft.note(
            "IN-METHOD",
            "how boron was extracted is not said",
            'give it with `--method "hot water"` (or "mehlich-3", "dtpa-sorbitol", ...)',
        )
    depth = hints.depth_cm or chosen.depth_cm
    if depth is None:
        draft.note("IN-DEPTH", "the sampling depth is not said", "give it with `--depth-cm 20`")
    if method is None or depth is None:
        return None
    return Campaign(
        method=method.lower(),
        depth_cm=depth,
        sampled_on=hints.sampled_on,
        laboratory=hints.laboratory,
        lab_relative_sd=hints.lab_relative_sd,
    )


def _with_volume(campaign: Campaign, volume: bool) -> Campaign:
    from dataclasses import replace

    return replace(campaign, per_volume=volume)


def _properties(
    table: Table,
    chosen: Chosen,
    rows: list[int],
    ids: tuple[str, ...],
    hints: SampleHints,
    draft: Draft,
) -> tuple[dict[str, Measured], dict[str, float], bool]:
    properties: dict[str, Measured] = {}
    constants: dict[str, float] = {}
    volume = False
    declared = {"clay": hints.clay_pct, "organic_matter": hints.organic_matter_pct}
    for name in MEASURABLE:
        if declared.get(name) is not None:
            value = declared[name]
            assert value is not None
            constants[name] = value
            draft.saw(name.replace("_", " "), "job", f"one figure for the field: {value:g} %")
            if name in chosen.properties:
                header = chosen.properties[name].header
                draft.note("IN-DECLARED", f"{value:g} % is declared, `{header}` is not used")
            continue
        column = chosen.properties.get(name)
        if column is None:
            continue
        read = measured_values(table, column, name, rows, ids, hints=hints, draft=draft)
        if read is None:
            continue
        volume = volume or read.per_volume
        _warn_depth_basis(read.unit, name, hints, draft)
        if name != "boron" and _one_value(read.measured):
            constants[name] = float(np.nanmean(read.measured.values))
            what = f"`{table.headers[column.place]}` has one value: a figure for the whole field"
            draft.note("IN-CONSTANT", what)
            continue
        properties[name] = read.measured
    if "boron" not in properties and not draft.broken:
        draft.note(
            "IN-NO-BORON",
            "no column of available boron was understood; it has "
            + ", ".join(f"`{one}`" for one in table.headers if one),
            'name it with `--column boron="..."`',
        )
    return properties, constants, volume


def _one_value(measured: Measured) -> bool:
    whole = bool(measured.known.all()) and not measured.below_limit.any()
    return len(measured.values) > 2 and whole and bool(np.ptp(measured.values) == 0)


def _warn_depth_basis(unit: str, name: str, hints: SampleHints, draft: Draft) -> None:
    if name != "boron" or unit not in ("lb/acre", "kg/ha") or hints.report_depth_cm is not None:
        return
    depth = hints.depth_cm
    if depth is not None and not 15.0 <= depth <= 18.0:
        draft.note(
            "IN-SLICE",
            f"boron in {unit} was divided as for a furrow slice of about {SLICE_CM:.0f} cm, but the "
            f"samples are {depth:g} cm deep",
            "say the depth that the sheet's figures stand for with `--report-depth-cm`",
        )


def _cores(
    table: Table, chosen: Chosen, rows: list[int], kinds: tuple[str, ...], hints: SampleHints
) -> np.ndarray:
    cores = np.array([ZONE_CORES if kind == "zone" else POINT_CORES for kind in kinds])
    if hints.cores is not None:
        cores[:] = hints.cores
    if chosen.cores is not None:
        for place, row in enumerate(rows):
            cell = read_cell(table.rows[row][chosen.cores], decimal_comma=table.decimal_comma)
            if cell.value is not None and cell.value >= 1:
                cores[place] = int(cell.value)
    return cores

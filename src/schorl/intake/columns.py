"""Choosing the column for each property: by name, by hint, asked for where ambiguous."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field

from schorl.intake.draft import Draft
from schorl.intake.headers import Column, method_in, recognise
from schorl.intake.lab_tables import Table
from schorl.intake.quantities import plain_words
from schorl.model.reading import SampleHints

CM_PER_INCH = 2.54
LENGTHS = frozenset({"cm", "mm", "in", "inch", "inches"})
PLACES = ("sample", "longitude", "latitude", "east", "north", "depth", "cores")


@dataclass(frozen=True, kw_only=True)
class Chosen:
    """Places of the columns that are used."""

    properties: Mapping[str, Column] = field(default_factory=dict)
    sample: int | None = None
    longitude: int | None = None
    latitude: int | None = None
    east: int | None = None
    north: int | None = None
    depth: int | None = None
    cores: int | None = None
    method: str | None = None
    depth_cm: float | None = None


def choose_columns(table: Table, hints: SampleHints, draft: Draft) -> Chosen:
    """One column for each thing; two candidates are asked about, a hint decides."""
    found = recognise(table.headers)
    hinted = _hinted(table, hints, draft)
    properties: dict[str, Column] = {}
    for what in ("boron", "organic_matter", "organic_carbon", "clay", "sand", "ph", "stones",
                 "bulk_density", "calcium", "total_boron"):  # fmt: skip
        column = _one_of(what, [one for one in found if one.what == what], hinted, draft)
        if column is not None:
            properties[what] = column
    if "organic_matter" in properties:
        properties.pop("organic_carbon", None)
    elif "organic_carbon" in properties:
        properties["organic_matter"] = properties.pop("organic_carbon")
    places = {}
    for what in PLACES:
        candidates = [one for one in found if one.what == what]
        if what in hinted:
            places[what] = hinted[what].place
        elif candidates:
            places[what] = candidates[0].place
        if what in ("longitude", "latitude") and what not in hinted:
            _one_of(what, candidates, hinted, draft)
    boron = properties.get("boron")
    return Chosen(
        properties=properties,
        method=boron.method if boron is not None else None,
        depth_cm=_depth_cm(table, properties, places.get("depth"), hints),
        **places,
    )


def _hinted(table: Table, hints: SampleHints, draft: Draft) -> dict[str, Column]:
    hinted = {}
    by_header = {plain_words(header): place for place, header in enumerate(table.headers)}
    plain = [plain_words(header) for header in table.headers]
    for what, header in hints.columns.items():
        place = by_header.get(plain_words(header))
        if plain.count(plain_words(header)) > 1:
            draft.note("IN-TWO-COLUMNS", f"{plain.count(plain_words(header))} columns are called "
                       f"`{header}`", "give them different names")  # fmt: skip
            continue
        if place is None:
            have = ", ".join(f"`{one}`" for one in table.headers if one)
            draft.note("IN-COLUMN", f"no column `{header}`; it has {have}")
            continue
        known = next((one for one in recognise([table.headers[place]])), None)
        hinted[what] = Column(
            place=place,
            header=table.headers[place],
            what=_says_carbon(what, table.headers[place]),
            unit=known.unit if known else None,
            method=method_in(plain_words(table.headers[place])),
            oxide="b2o3" in plain_words(table.headers[place]),
            depth=known.depth if known else None,
        )
    return hinted


CARBON = frozenset(
    ["oc", "toc", "soc", "corg", "carbon", "kohlenstoff", "carbone", "carbono", "carbonio", "kol"]
)


def _says_carbon(what: str, header: str) -> str:
    """A column named as organic matter whose header says carbon is carbon."""
    words = set(re.split(r"[\s,;:()\[\]{}/.%-]+", plain_words(header)))
    said = words & CARBON or plain_words(header).replace(".", "").startswith(("c org", "org c"))
    return "organic_carbon" if what == "organic_matter" and said else what


def _one_of(
    what: str, candidates: list[Column], hinted: dict[str, Column], draft: Draft
) -> Column | None:
    if what in hinted:
        return hinted[what]
    if len(candidates) <= 1:
        return candidates[0] if candidates else None
    names = ", ".join(f"`{one.header}`" for one in candidates)
    draft.note(
        "IN-TWO-COLUMNS",
        f"{len(candidates)} columns may be {what.replace('_', ' ')}: {names}",
        f'say which with `--column {what}="{candidates[0].header}"`',
    )
    return None


def _depth_cm(
    table: Table, properties: Mapping[str, Column], depth: int | None, hints: SampleHints
) -> float | None:
    said = [one.depth for one in properties.values() if one.depth]
    if not said and depth is not None:
        wanted = hints.keep_depth
        cells = {row[depth] for row in table.rows if row[depth]}
        said = [wanted] if wanted else (list(cells) if len(cells) == 1 else [])
        header = plain_words(table.headers[depth])
        unit = next((one for one in re.split(r"[\s()\[\]]+", header) if one in LENGTHS), "")
        if said and said[0] and not re.search(r"[a-z\"]", plain_words(said[0])):
            said = [f"{said[0]} {unit}"]
    if not said or said[0] is None:
        return None
    return _bottom_cm(said[0])


def _bottom_cm(text: str) -> float | None:
    """Lower end of "0-20 cm", "20 cm", "0 - 8 in" in centimetres; None without a unit.

    Samples that do not begin at the surface say nothing of the topsoil: None, so it is asked.
    """
    text = plain_words(text).replace("–", "-")
    found = re.fullmatch(
        r"(?:(\d+(?:[.,]\d+)?)\s*-\s*)?(\d+(?:[.,]\d+)?)\s*(cm|mm|in|inch|inches|\")", text
    )
    if found is None or float((found[1] or "0").replace(",", ".")) > 0:
        return None
    factor = {"cm": 1.0, "mm": 0.1}.get(found[3], CM_PER_INCH)
    depth = float(found[2].replace(",", ".")) * factor
    return depth if 0 < depth <= 200 else None


def pivoted(table: Table, draft: Draft) -> Table:
    """Results in rows (one analyte a row) turned into one row a sample."""
    found = {one.what: one.place for one in recognise(table.headers)}
    if "analyte" not in found or "result" not in found or "sample" not in found:
        return table
    sample, analyte, result = found["sample"], found["analyte"], found["result"]
    unit, depth = found.get("unit"), found.get("depth")
    names: list[str] = []
    merged: dict[tuple[str, str], dict[str, str]] = {}
    lines: dict[tuple[str, str], int] = {}
    own = [p for p in range(len(table.headers)) if p not in (analyte, result, unit)]
    kept: dict[tuple[str, str], tuple[str, ...]] = {}
    for row, line in zip(table.rows, table.lines, strict=True):
        header = row[analyte] + (f" ({row[unit]})" if unit is not None and row[unit] else "")
        if header not in names:
            names.append(header)
        key = (row[sample], plain_words(row[depth]) if depth is not None else "")
        if header in merged.get(key, {}):
            draft.note(
                "IN-SAME-NAME", f"sample `{key[0]}` has two results for {row[analyte]}",
                where=f"line {line}",
            )  # fmt: skip
        merged.setdefault(key, {})[header] = row[result]
        kept.setdefault(key, tuple(row[p] for p in own))
        lines.setdefault(key, line)
    draft.saw("layout", "rows", f"one analyte a row: {', '.join(names[:8])}")
    return Table(
        source=table.source,
        headers=(*(table.headers[p] for p in own), *names),
        units=("",) * (len(own) + len(names)),
        rows=tuple((*kept[key], *(merged[key].get(n, "") for n in names)) for key in merged),
        lines=tuple(lines[key] for key in merged),
        decimal_comma=table.decimal_comma,
        how=table.how,
    )

"""A laboratory file as samples in the field's metres: recognised, converted, nothing guessed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import shapely

from schorl.findings import Finding, finding
from schorl.geodesy import WGS84, transform_geometry, transform_points
from schorl.intake.columns import Chosen, choose_columns, pivoted
from schorl.intake.guards import Unreadable
from schorl.intake.lab_tables import TABLE_SUFFIXES, Table, read_table
from schorl.intake.quantities import SLICE_CM, plain_words, read_cell
from schorl.intake.values import measured_values
from schorl.intake.vectors import Features, read_features
from schorl.model.field import Area, Field
from schorl.model.reading import Reading, SampleHints
from schorl.model.record import Recognition
from schorl.model.samples import Campaign, Measured, SampleSet

POINT_CORES, ZONE_CORES = 8, 15
MEASURABLE = (
    "boron", "organic_matter", "clay", "sand", "ph", "bulk_density", "stones", "calcium",
    "total_boron",
)  # fmt: skip


@dataclass
class Draft:
    """What is known so far while a file is read; findings are gathered, not raised."""

    source: str
    findings: list[Finding] = field(default_factory=list)
    recognised: list[Recognition] = field(default_factory=list)

    def note(self, code: str, what: str, hint: str = "", *, where: str = "") -> None:
        """Add a finding about the file or a place in it."""
        place = f"{self.source}, {where}" if where else self.source
        self.findings.append(finding(code, where=place, what=what, hint=hint))

    def saw(self, what: str, where: str, how: str) -> None:
        """Add a recognition."""
        self.recognised.append(Recognition(what=what, where=f"{self.source}, {where}", how=how))

    @property
    def broken(self) -> bool:
        """Whether an error was found."""
        return any(one.stops for one in self.findings)


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
    places = _places(
        table, chosen, rows, ids, features=features, field=field, hints=hints, draft=draft
    )
    campaign = _campaign(table, chosen, hints, draft)
    properties, constants, volume = _properties(table, chosen, rows, ids, hints, draft)
    if draft.broken or places is None or campaign is None:
        return None
    cores = _cores(table, chosen, rows, places.kind, hints)
    return _averaged(
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
    double = sorted({name for name in names if names.count(name) > 1})
    if double:
        draft.note(
            "IN-SAME-NAME",
            f"several rows have the name {', '.join(f'`{one}`' for one in double[:5])}",
            "name each sample once, or choose the depth or analysis that is meant",
        )
    return tuple(names)


@dataclass(frozen=True, kw_only=True)
class Places:
    """Where samples are: points in metres, their kind, areas of sample zones."""

    east_north_m: np.ndarray
    kind: tuple[str, ...]
    areas: tuple[Area | None, ...]


def _places(
    table: Table,
    chosen: Chosen,
    rows: list[int],
    ids: tuple[str, ...],
    *,
    features: Features | None,
    field: Field,
    hints: SampleHints,
    draft: Draft,
) -> Places | None:
    if features is not None:
        return _from_features(features, rows, ids, field, draft)
    if hints.zone_layer is not None:
        return _from_zone_layer(hints, ids, field, draft)
    pairs = [
        (chosen.longitude, chosen.latitude, WGS84),
        (chosen.east, chosen.north, hints.crs),
    ]
    for first, second, system in pairs:
        if first is None or second is None:
            continue
        return _from_columns(
            table,
            (first, second),
            rows,
            ids,
            system=system,
            field=field,
            hints=hints,
            draft=draft,
        )
    draft.note(
        "IN-NO-PLACE",
        "no columns of coordinates were understood",
        'name them with `--column longitude="..." --column latitude="..."` or `east` and `north`, '
        "or join sample zones with `--zone-layer FILE`",
    )
    return None


def _from_features(
    features: Features, rows: list[int], ids: tuple[str, ...], field: Field, draft: Draft
) -> Places | None:
    kinds, areas, points = [], [], []
    for place, name in zip(rows, ids, strict=True):
        geometry = features.geometries[place]
        if geometry is None or geometry.is_empty:
            draft.note("IN-NO-PLACE", "the sample has no geometry", where=name)
            continue
        moved = transform_geometry(geometry, source=features.crs, target=field.crs)
        kind, area, point = _placed(moved)
        if point is None:
            draft.note("IN-NOT-PLACE", f"a {geometry.geom_type} is no sample place", where=name)
            continue
        kinds.append(kind)
        areas.append(area)
        points.append(point)
    if draft.broken:
        return None
    draft.saw("places", "geometries", f"{sorted(set(kinds))[0]} samples, {features.crs_said}")
    return Places(east_north_m=np.array(points), kind=tuple(kinds), areas=tuple(areas))


def _placed(geometry: Any) -> tuple[str, Area | None, tuple[float, float] | None]:
    if geometry.geom_type == "MultiPoint" and len(geometry.geoms) == 1:
        geometry = geometry.geoms[0]
    if geometry.geom_type == "Point":
        return "point", None, (geometry.x, geometry.y)
    if geometry.geom_type in ("Polygon", "MultiPolygon"):
        if not geometry.is_valid:
            geometry = shapely.make_valid(geometry, method="structure")
        inner = geometry.representative_point()
        return "zone", geometry, (inner.x, inner.y)
    return "", None, None


def _from_zone_layer(
    hints: SampleHints, ids: tuple[str, ...], field: Field, draft: Draft
) -> Places | None:
    assert hints.zone_layer is not None
    features = read_features(hints.zone_layer, layer=None, crs=None, option="samples")
    named: dict[str, Any] = {}
    column = hints.zone_column
    for row, geometry in zip(features.attributes, features.geometries, strict=True):
        keys = [column] if column else [key for key in row if key.lower() in ("zone", "name", "id")]
        for key in keys:
            if row.get(key) is not None:
                named.setdefault(plain_words(str(row[key])), geometry)
    kinds, areas, points = [], [], []
    for name in ids:
        geometry = named.get(plain_words(name))
        if geometry is None:
            there = ", ".join(sorted(named)[:8])
            draft.note(
                "IN-JOIN",
                f"no zone is called `{name}` in {hints.zone_layer.name}; there are: {there}",
                "name the column with `--zone-column`, or mend the names",
            )
            continue
        moved = transform_geometry(geometry, source=features.crs, target=field.crs)
        kind, area, point = _placed(moved)
        kinds.append(kind)
        areas.append(area)
        points.append(point or (np.nan, np.nan))
    if draft.broken:
        return None
    draft.saw("places", "zone layer", f"{len(ids)} sample zones joined by name")
    return Places(east_north_m=np.array(points), kind=tuple(kinds), areas=tuple(areas))


def _from_columns(
    table: Table,
    columns: tuple[int, int],
    rows: list[int],
    ids: tuple[str, ...],
    *,
    system: str | None,
    field: Field,
    hints: SampleHints,
    draft: Draft,
) -> Places | None:
    names = " and ".join(f"`{table.headers[one]}`" for one in columns)
    if system is None:
        draft.note(
            "IN-CRS",
            f"the columns {names} do not say their coordinate system",
            "give it with `--samples-crs EPSG:...`",
        )
        return None
    if hints.crs is not None:
        system = hints.crs
    points = np.full((len(rows), 2), np.nan)
    for place, row in enumerate(rows):
        for axis, column in enumerate(columns):
            cell = read_cell(table.rows[row][column], decimal_comma=table.decimal_comma)
            if cell.value is None:
                draft.note(
                    "IN-NO-PLACE",
                    f"`{table.rows[row][column]}` is no coordinate",
                    where=f"line {table.lines[row]}, sample {ids[place]}",
                )
                continue
            points[place, axis] = cell.value
    if draft.broken:
        return None
    if _outside_degrees(points, system):
        draft.note(
            "IN-DEGREES",
            f"the columns {names} are no longitude and latitude: {points[0, 0]:g}, {points[0, 1]:g}",
            "they may be metres, or swapped: name them with `--column` and give `--samples-crs`",
        )
        return None
    try:
        metres = transform_points(points, source=system, target=field.crs)
    except Exception:
        draft.note(
            "IN-CRS", f"`{system}` is not a coordinate system", "give `--samples-crs EPSG:...`"
        )
        return None
    if not np.isfinite(metres).all():
        draft.note("IN-DEGREES", f"some coordinates cannot lie in {system}")
        return None
    draft.saw("places", f"columns {names}", f"points, {system}")
    return Places(east_north_m=metres, kind=("point",) * len(rows), areas=(None,) * len(rows))


def _outside_degrees(points: np.ndarray, system: str) -> bool:
    if system != WGS84:
        return False
    return bool((np.abs(points[:, 0]) > 180).any() or (np.abs(points[:, 1]) > 90).any())


def _campaign(table: Table, chosen: Chosen, hints: SampleHints, draft: Draft) -> Campaign | None:
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
    known = measured.values[measured.known]
    return len(known) > 2 and bool(np.ptp(known) == 0)


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


def _averaged(samples: SampleSet, hints: SampleHints, draft: Draft) -> SampleSet:
    """Average samples at one place where that was asked for."""
    if not hints.average_duplicates or any(kind != "point" for kind in samples.kind):
        return samples
    keys = [tuple(one) for one in np.round(samples.east_north_m * 2) / 2]
    order: dict[tuple[float, ...], list[int]] = {}
    for place, key in enumerate(keys):
        order.setdefault(key, []).append(place)
    if len(order) == len(keys):
        return samples
    groups = list(order.values())
    draft.note("IN-AVERAGED", f"{len(keys) - len(groups)} duplicates were averaged")
    return _grouped(samples, groups)


def _grouped(samples: SampleSet, groups: list[list[int]]) -> SampleSet:
    from dataclasses import replace

    first = [group[0] for group in groups]

    def mean(values: np.ndarray) -> np.ndarray:
        with np.errstate(invalid="ignore"):
            return np.array(
                [np.nanmean(values[g]) if np.isfinite(values[g]).any() else np.nan for g in groups]
            )

    properties: Mapping[str, Measured] = {
        name: Measured(
            values=mean(one.values),
            below_limit=np.array([bool(one.below_limit[g].all()) for g in groups]),
            column=one.column,
            unit_read=one.unit_read,
        )
        for name, one in samples.properties.items()
    }
    return replace(
        samples,
        ids=tuple("+".join(samples.ids[i] for i in group) for group in groups),
        east_north_m=samples.east_north_m[first],
        properties=properties,
        kind=tuple(samples.kind[i] for i in first),
        cores=np.array([samples.cores[g].sum() for g in groups]),
        areas=tuple(samples.areas[i] for i in first),
        core_points_m=tuple(samples.core_points_m[i] for i in first),
    )

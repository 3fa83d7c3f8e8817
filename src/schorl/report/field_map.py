"""The map of the page: layers to choose by radio buttons, legends, readings for the script.

Choosing works by style rules alone, so that the map serves without JavaScript; the script adds
reading at a place, the keyboard and zooming.
"""

from __future__ import annotations

import base64
import json
import zlib
from typing import Any

import numpy as np

from schorl.model.arrays import Floats
from schorl.model.field import CellGrid
from schorl.model.record import RunRecord
from schorl.report import map_svg
from schorl.report.charts import swatch
from schorl.report.layers import Doubtful, Layer, Readings, doubtful_places, layers_of, readings_of
from schorl.report.map_svg import Sheet
from schorl.report.markup import Safe, join, shape, tag, text
from schorl.report.png import cells_png
from schorl.report.shown import Shown, figure
from schorl.report.words import RULED, kind_words, product_words

MISSING = 65535
GROUPS = ("What is spread", "The soil", "How sure")


def field_map(record: RunRecord, shown: Shown) -> tuple[Safe, str, dict[str, Any]]:
    """The map's markup, its style rules and the facts its script reads."""
    layers, sheet = layers_of(record), map_svg.sheet_of(record.field.boundary)
    doubtful = doubtful_places(record)
    keys = ["rate", "zones", *(layer.key for layer in layers)]
    body = tag(
        "div",
        _choices(layers),
        tag("div", _svg(record, shown, layers, doubtful), _zoom_buttons(), class_="canvas"),
        tag("div", _legends(record, shown, layers), _overlays(doubtful, shown), class_="keys"),
        _reading_box(),
        class_="fieldmap",
        id="map",
    )
    return join([body, _atlas(layers, sheet)]), _rules(keys), _facts(record, shown, sheet)


def _rules(keys: list[str]) -> str:
    """Style rules that show the chosen layer; the second set serves browsers without :has()."""
    shows = []
    for key in keys:
        shows.append(f"#map:has(#show-{key}:checked) .on-{key}{{display:inline}}")
        shows.append(f'#map[data-show="{key}"] .on-{key}{{display:inline}}')
        shows.append(f"#map:has(#show-{key}:checked) .key-{key}{{display:block}}")
        shows.append(f'#map[data-show="{key}"] .key-{key}{{display:block}}')
    fallback = "@supports not selector(:has(*)){#map:not([data-show]) .on-rate{display:inline}"
    fallback += "#map:not([data-show]) .key-rate{display:block}}"
    return ".layer,.key{display:none}" + "".join(shows) + fallback


def _choices(layers: tuple[Layer, ...]) -> Safe:
    offered = [("What is spread", "rate", "Rate"), ("What is spread", "zones", "Zones")]
    offered += [(layer.group, layer.key, layer.name) for layer in layers]
    groups = []
    for group in GROUPS:
        own = [one for one in offered if one[0] == group]
        if own:
            buttons = [_choice(key, name) for _, key, name in own]
            groups.append(
                tag("div", tag("span", group, class_="grouphead"), *buttons, class_="choicegroup")
            )
    return tag("fieldset", tag("legend", "Show on the map"), *groups, class_="choices")


def _choice(key: str, name: str) -> Safe:
    button = tag(
        "input", type="radio", name="show", value=key, id=f"show-{key}", checked=key == "rate"
    )
    return tag("label", button, tag("span", name), for_=f"show-{key}", class_="choice")


def _svg(record: RunRecord, shown: Shown, layers: tuple[Layer, ...], doubtful: Doubtful) -> Safe:
    prescription, sheet = record.prescription, map_svg.sheet_of(record.field.boundary)
    thin = sheet.side_m / 550
    colours = map_svg.rate_colours(prescription)
    fills = tuple(colours[rate.product_rate] for rate in prescription.rates)
    numbers = tuple(str(rate.zone) for rate in prescription.rates)
    rates = tuple(
        shown.rate_figure(r.product_rate) if r.product_rate else "0" for r in prescription.rates
    )
    zones = map_svg.zone_colours(prescription)
    boundary = map_svg.path_of(record.field.boundary, sheet)
    cut = shape("clipPath", {"id": "cut"}, shape("path", {"d": boundary, "clip-rule": "evenodd"}))

    def layer(key: str, *parts: Safe) -> Safe:
        return shape("g", {"class": f"layer on-{key}"}, *parts)

    pictures = [layer(one.key, _picture(record.grid, one, sheet)) for one in layers]
    outline = shape(
        "g", {"class": "zonelines"}, map_svg.zone_lines(record, sheet, width=3 * thin, colour="#fff"),
        map_svg.zone_lines(record, sheet, width=thin),
    )  # fmt: skip
    parts = [
        shape("defs", {}, cut, map_svg.patterns(sheet)),
        layer("rate", shape("g", {"id": "fill-rate"}, map_svg.zone_fills(record, sheet, fills))),
        layer("zones", shape("g", {"id": "fill-zones"}, map_svg.zone_fills(record, sheet, zones))),
        *pictures,
        shape("g", {"class": "doubts"}, _doubt_paths(record, doubtful, sheet)),
        outline,
        shape("g", {"id": "fieldline"}, map_svg.field_line(record, sheet, width=2.5 * thin)),
        shape("g", {"class": "samples"}, map_svg.sample_marks(record, sheet)),
        layer("rate", map_svg.zone_labels(record, sheet, rates, fills)),
        layer("zones", map_svg.zone_labels(record, sheet, numbers, zones)),
        shape("path", {"id": "crossback", "fill": "none", "stroke": "#fff", "class": "cross back"}),
        shape("path", {"id": "cross", "fill": "none", "stroke": "#111", "class": "cross"}),
        shape("g", {"class": "furniture"}, map_svg.furniture(sheet, us=shown.us)),
    ]
    attributes: dict[str, object] = {
        "id": "field",
        "viewBox": sheet.view,
        "role": "img",
        "aria-label": f"Map of {record.settings.field_name}",
    }
    return shape("svg", attributes, *parts)


def _picture(grid: CellGrid, layer: Layer, sheet: Sheet) -> Safe:
    x, y = sheet.place(grid.west_m - grid.cell_m, grid.north_m + grid.cell_m)
    image = {
        "id": f"cells-{layer.key}",
        "x": f"{x:.1f}",
        "y": f"{y:.1f}",
        "width": f"{(grid.cols + 2) * grid.cell_m:.1f}",
        "height": f"{(grid.rows + 2) * grid.cell_m:.1f}",
        "preserveAspectRatio": "none",
        "class": "cells",
        "href": cells_png(grid, layer.classes, layer.scale.colours),
    }
    return shape("g", {"clip-path": "url(#cut)"}, shape("image", image), _signs(grid, layer, sheet))


def _signs(grid: CellGrid, layer: Layer, sheet: Sheet) -> Safe:
    """Plus and minus on a lattice: where colour is lost, more and less stay apart."""
    if layer.key != "boron":
        return Safe("")
    size = sheet.side_m / 150
    every = max(int(round(sheet.side_m / 26 / grid.cell_m)), 1)
    raster = grid.to_raster(layer.classes.astype(float), fill=-1).astype(int)
    minus, plus = [], []
    for row in range(every // 2, grid.rows, every):
        for col in range(every // 2, grid.cols, every):
            kind = raster[row, col]
            x, y = sheet.place(
                grid.west_m + (col + 0.5) * grid.cell_m, grid.north_m - (row + 0.5) * grid.cell_m
            )
            across = f"M{x - size:.1f} {y:.1f}h{2 * size:.1f}"
            if 0 <= kind <= 2:
                minus.append(across)
            elif kind >= 4:
                plus.append(f"{across}M{x:.1f} {y - size:.1f}v{2 * size:.1f}")
    path = "".join(minus + plus)
    back = {"d": path, "stroke": "#fff", "stroke-width": f"{size * 0.75:.1f}", "fill": "none"}
    front = {"d": path, "stroke": "#111", "stroke-width": f"{size * 0.32:.1f}", "fill": "none"}
    return join([shape("path", back | {"opacity": 0.55}), shape("path", front)])


def _doubt_paths(record: RunRecord, doubtful: Doubtful, sheet: Sheet) -> Safe:
    drawn = []
    for name, cells in (("fed", doubtful.fed), ("left", doubtful.left)):
        if cells.any():
            path = map_svg.cell_runs(record.grid, cells, sheet)
            drawn.append(
                shape("path", {"d": path, "fill": f"url(#{name})", "clip-path": "url(#cut)"})
            )
    return join(drawn)


def _zoom_buttons() -> Safe:
    buttons = [("in", "Nearer", "+"), ("out", "Farther", "−"), ("all", "Whole field", "◻")]
    return tag(
        "div",
        *(
            tag("button", sign, type="button", id=f"zoom-{key}", aria_label=name, title=name)
            for key, name, sign in buttons
        ),
        class_="zoom scripted",
    )


def _legends(record: RunRecord, shown: Shown, layers: tuple[Layer, ...]) -> Safe:
    prescription = record.prescription
    colours = map_svg.rate_colours(prescription)
    rates = [
        (colours[rate], shown.rate_figure(rate) if rate else "0, untreated", "")
        for rate in sorted(colours)
        if any(one.product_rate == rate for one in prescription.rates)
    ]
    if len(rates) > 8:  # many rates are coloured by size: a few of them say it all
        rates = [rates[round(i * (len(rates) - 1) / 6)] for i in range(7)]
    zones = [
        (colour, f"{rate.zone}: {figure(rate.boron_mean_mg_kg, 2)} mg/kg", "")
        for colour, rate in zip(map_svg.zone_colours(prescription), prescription.rates, strict=True)
    ]
    name = f"Rate of {product_words(record)}"
    drawn = [
        _legend("rate", name, shown.rate_unit, rates, "The figure stands in its zone."),
        _legend("zones", "Zones", "number: mean boron", zones, "Dark is least boron."),
    ]
    for layer in layers:
        signs = layer.scale.signs or ("",) * len(layer.scale.colours)
        rows = list(zip(layer.scale.colours, layer.scale.labels, signs, strict=True))
        shares = layer.key == "boron" and "target" in layer.scale.labels[0]
        unit = "of the place's own target" if shares else layer.unit
        drawn.append(_legend(layer.key, layer.name, unit, rows, layer.note))
    return join(drawn)


def _legend(key: str, name: str, unit: str, rows: list[tuple[str, str, str]], note: str) -> Safe:
    items = [
        tag("li", swatch(colour), label, tag("em", f" {sign}") if sign else "")
        for colour, label, sign in rows
    ]
    head = tag("p", tag("b", name), f", {unit}" if unit else "")
    inner = [head, tag("ul", *items), tag("p", note, class_="soft") if note else ""]
    return tag("div", *inner, class_=f"key key-{key}", id=f"key-{key}")


def _overlays(doubtful: Doubtful, shown: Shown) -> Safe:
    boxes = [("zonelines", "Outlines of zones", True), ("samples", "Samples", True)]
    drawn = [_overlay(*box) for box in boxes]
    if doubtful.fed_ha + doubtful.left_ha > 0:
        drawn.append(_overlay("doubts", "Doubtful places", True))
        said = []
        if doubtful.fed_ha > 0:
            said.append(
                _hatch_key(
                    "fed",
                    f"treated, though two times in three it needs none: {shown.area(doubtful.fed_ha)}",
                )
            )
        if doubtful.left_ha > 0:
            said.append(
                _hatch_key(
                    "left",
                    f"untreated, though two times in three it is short: {shown.area(doubtful.left_ha)}",
                )
            )
        drawn.append(tag("ul", *said, class_="hatchkey"))
    return tag("fieldset", tag("legend", "On top of it"), *drawn, class_="overlays")


def _hatch_key(name: str, said: str) -> Safe:
    turn = (
        "M-2 12L12-2M5 19L19 5M12 19L24 7" if name == "fed" else "M-2 2L12 16M5-5L24 14M12-5L24 7"
    )
    box = {"width": 22, "height": 14, "x": 0.5, "y": 0.5, "fill": "#fff", "stroke": "#444"}
    mark = shape(
        "svg", {"viewBox": "0 0 23 15", "class": "swatch", "aria-hidden": "true"},
        shape("rect", box), shape("path", {"d": turn, "stroke": "#111", "stroke-width": 1.5}),
    )  # fmt: skip
    return tag("li", mark, said)


def _overlay(key: str, name: str, checked: bool) -> Safe:
    box = tag("input", type="checkbox", id=f"top-{key}", checked=checked)
    return tag("label", box, tag("span", name), for_=f"top-{key}", class_="tick")


def _reading_box() -> Safe:
    return tag(
        "div",
        tag("h3", "At the pointer", id="reading-head"),
        tag(
            "p",
            "Point at a place, tap it, or move there with the arrow keys (Shift for long steps).",
            class_="soft scripted",
        ),
        tag(
            "p",
            "Readings at a place need JavaScript; the tables below do not.",
            class_="unscripted",
        ),
        tag("dl", id="reading"),
        tag("p", "", id="spoken", class_="heard", role="status", aria_live="polite"),
        class_="reading",
        role="region",
        aria_labelledby="reading-head",
    )


def _atlas(layers: tuple[Layer, ...], sheet: Sheet) -> Safe:
    """All maps side by side, for print: pictures of the map above, drawn again by reference."""
    cards = [_card("fill-rate", "Rate", sheet), _card("fill-zones", "Zones", sheet)]
    cards += [_card(f"cells-{layer.key}", layer.name, sheet, layer) for layer in layers]
    return tag("div", *cards, class_="atlas", aria_hidden="true")


def _card(target: str, name: str, sheet: Sheet, layer: Layer | None = None) -> Safe:
    picture = shape(
        "svg",
        {"viewBox": sheet.view},
        shape("g", {"clip-path": "url(#cut)"}, shape("use", {"href": f"#{target}"})),
        shape("use", {"href": "#fieldline"}),
    )
    rows: list[Safe] = []
    if layer is not None:
        signs = layer.scale.signs or ("",) * len(layer.scale.colours)
        rows = [
            tag("li", swatch(colour), said, f" {sign}" if sign else "")
            for colour, said, sign in zip(
                layer.scale.colours, layer.scale.labels, signs, strict=True
            )
        ]
    unit = f", {layer.unit}" if layer is not None else ""
    return tag("div", tag("p", tag("b", name), unit), picture, tag("ul", *rows), class_="card")


def packed(readings: tuple[Readings, ...]) -> str:
    """All readings as 16-bit whole numbers, each less the one before, deflated, as base64.

    65535 stands for a missing value; larger values than fit are missing rather than wrong.
    """
    blocks = []
    for one in readings:
        whole = np.rint(one.values * 10.0**one.decimals)
        good = np.isfinite(whole) & (whole >= 0) & (whole < MISSING)
        counts = np.where(good, whole, MISSING).astype(np.int64)
        steps = np.diff(counts, prepend=0) & 0xFFFF
        blocks.append(steps.astype("<u2").tobytes())
    return base64.b64encode(zlib.compress(b"".join(blocks), 9)).decode("ascii")


def _row_runs(grid: CellGrid) -> list[int]:
    """Row, first column and length of every run of cells, one after the other."""
    said: list[int] = []
    for row in range(grid.rows):
        edges = np.flatnonzero(
            np.diff(np.concatenate([[0], grid.inside[row].astype(np.int8), [0]]))
        )
        for first, last in edges.reshape(-1, 2):
            said += [row, int(first), int(last - first)]
    return said


def _facts(record: RunRecord, shown: Shown, sheet: Sheet) -> dict[str, Any]:
    readings, grid = readings_of(record), record.grid
    x, y = sheet.place(grid.west_m, grid.north_m)
    units = {name: surface.unit for name, surface in record.surfaces.items()}
    return {
        "grid": {
            "x": x, "y": y, "cell": grid.cell_m, "rows": grid.rows, "cols": grid.cols,
            "count": grid.n_cells, "runs": _row_runs(grid),
        },
        "west": sheet.west_m, "north": sheet.north_m,
        "fields": [[one.name, one.decimals] for one in readings],
        "cells": packed(readings),
        "units": units,
        "constant": [name for name, one in record.surfaces.items() if one.constant],
        "zones": _zone_facts(record, shown),
        "samples": _sample_facts(record, sheet),
        "metre": 1 / 0.3048 if shown.us else 1,
        "length": shown.length_unit,
    }  # fmt: skip


def _zone_facts(record: RunRecord, shown: Shown) -> list[dict[str, str]]:
    prescription = record.prescription
    return [
        {
            "zone": str(rate.zone),
            "kind": kind_words(zone.kind),
            "rate": shown.rate(rate.product_rate),
            "boron": shown.boron_rate(rate.boron_kg_ha),
            "ruled": RULED[rate.ruled_by],
            "why": rate.why,
        }
        for zone, rate in zip(prescription.zone_map.zones, prescription.rates, strict=True)
    ]


def _sample_facts(record: RunRecord, sheet: Sheet) -> list[list[object]]:
    boron = record.samples.properties.get("boron")
    rows: list[list[object]] = []
    for place, name in enumerate(record.samples.ids):
        east, north = (float(v) for v in record.samples.east_north_m[place])
        x, y = sheet.place(east, north)
        said = "boron not known"
        if boron is not None and boron.known[place]:
            sign = "under " if boron.below_limit[place] else ""
            said = f"boron {sign}{figure(_value(boron.values, place), 2)}"
        rows.append([str(name), round(x, 1), round(y, 1), said])
    return rows


def _value(values: Floats, place: int) -> float:
    return float(values[place])


def facts_script(facts: dict[str, Any]) -> Safe:
    """Facts as a block of data that no text in them can end."""
    said = json.dumps(facts, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for sign in "<>&":
        said = said.replace(sign, f"\\u{ord(sign):04x}")
    return Safe(f'<script type="application/json" id="facts">{said}</script>')


__all__ = ["facts_script", "field_map", "packed", "text"]

"""The map of the page: layers to choose by radio buttons, legends, readings for the script.

Choosing works by style rules alone, so that the map serves without JavaScript; the script adds
reading at a place, the keyboard and zooming.
"""

from __future__ import annotations

from typing import Any

from schorl.model.field import CellGrid
from schorl.model.record import RunRecord
from schorl.report import map_svg, zones_svg
from schorl.report.charts import swatch
from schorl.report.layers import Doubtful, Layer, doubtful_places, layers_of
from schorl.report.legends import legends, overlays
from schorl.report.map_svg import Sheet
from schorl.report.markup import Safe, join, shape, tag
from schorl.report.png import cells_png
from schorl.report.readings import map_facts
from schorl.report.shown import Shown

GROUPS = ("What is spread", "The soil", "How sure")


def field_map(record: RunRecord, shown: Shown) -> tuple[Safe, str, dict[str, Any]]:
    """The map's markup, its style rules and the facts its script reads."""
    layers, sheet = layers_of(record), map_svg.sheet_of(record.field.boundary)
    doubtful = doubtful_places(record)
    keys = ["rate", "zones", *(layer.key for layer in layers)]
    body = tag(
        "div",
        _choices(layers),
        tag(
            "div",
            _svg(record, shown, layers, doubtful),
            tag("div", id="scalebar", class_="scripted", aria_hidden="true"),
            tag("div", "N", class_="north scripted", aria_hidden="true"),
            _zoom_buttons(),
            class_="canvas",
        ),
        _reading_box(),
        tag("div", legends(record, shown, layers), overlays(doubtful, shown), class_="keys"),
        class_="fieldmap",
        id="map",
    )
    return join([body, _atlas(layers, sheet)]), _rules(keys), map_facts(record, shown, sheet)


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
    colours = zones_svg.rate_colours(prescription)
    fills = tuple(colours[rate.product_rate] for rate in prescription.rates)
    numbers = tuple(str(rate.zone) for rate in prescription.rates)
    rates = zones_svg.rate_labels(record, shown)
    zones = zones_svg.zone_colours(prescription)
    places = record.samples.east_north_m
    boundary = map_svg.path_of(record.field.boundary, sheet)
    cut = shape("clipPath", {"id": "cut"}, shape("path", {"d": boundary, "clip-rule": "evenodd"}))

    def layer(key: str, *parts: Safe) -> Safe:
        return shape("g", {"class": f"layer on-{key}"}, *parts)

    pictures = [layer(one.key, _picture(record.grid, one, sheet)) for one in layers]
    parts = [
        shape("defs", {}, cut, zones_svg.patterns(sheet)),
        layer("rate", shape("g", {"id": "fill-rate"}, zones_svg.zone_fills(record, sheet, fills))),
        layer(
            "zones", shape("g", {"id": "fill-zones"}, zones_svg.zone_fills(record, sheet, zones))
        ),
        *pictures,
        shape("g", {"class": "doubts"}, _doubt_paths(record, doubtful, sheet)),
        _outline(record, sheet, thin),
        shape("g", {"id": "fieldline"}, map_svg.field_line(record, sheet, width=2.5 * thin)),
        shape("g", {"class": "samples"}, map_svg.sample_marks(record, sheet)),
        layer("rate", zones_svg.zone_labels(record, sheet, rates, fills, clear_of_m=places)),
        layer("zones", zones_svg.zone_labels(record, sheet, numbers, zones, clear_of_m=places)),
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


def _outline(record: RunRecord, sheet: Sheet, thin: float) -> Safe:
    return shape(
        "g", {"class": "zonelines"}, zones_svg.zone_lines(record, sheet, width=3 * thin, colour="#fff"),
        zones_svg.zone_lines(record, sheet, width=thin),
    )  # fmt: skip


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
    """Minus, plus and × (over the ceiling) on a lattice, for eyes and print without colour."""
    if layer.key != "boron":
        return Safe("")
    size = sheet.side_m / 150
    every = max(round(sheet.side_m / 26 / grid.cell_m), 1)
    raster = grid.to_raster(layer.classes.astype(float), fill=-1).astype(int)
    minus, plus, cross = [], [], []
    for row in range(every // 2, grid.rows, every):
        for col in range(every // 2, grid.cols, every):
            kind = raster[row, col]
            x, y = sheet.place(
                grid.west_m + (col + 0.5) * grid.cell_m, grid.north_m - (row + 0.5) * grid.cell_m
            )
            across = f"M{x - size:.1f} {y:.1f}h{2 * size:.1f}"
            if 0 <= kind <= 2:
                minus.append(across)
            elif kind == 6:
                half = 0.8 * size
                first = f"M{x - half:.1f} {y - half:.1f}l{2 * half:.1f} {2 * half:.1f}"
                cross.append(
                    f"{first}M{x - half:.1f} {y + half:.1f}l{2 * half:.1f} {-2 * half:.1f}"
                )
            elif kind >= 4:
                plus.append(f"{across}M{x:.1f} {y - size:.1f}v{2 * size:.1f}")
    path = "".join(minus + plus + cross)
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

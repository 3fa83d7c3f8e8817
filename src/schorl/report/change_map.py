"""The map of change: real change, rates of both seasons, ground that moved, strips and sites.

Layers are chosen by style rules alone; the page needs no script.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np

from schorl.model.change import ChangeMap, SeasonChange, SeasonPack
from schorl.report import map_svg, scales
from schorl.report.charts import swatch
from schorl.report.map_svg import FONT, Sheet
from schorl.report.markup import Safe, join, shape, tag
from schorl.report.png import cells_png
from schorl.report.scales import Scale
from schorl.report.shown import figure

CLASSES = 7
MOVED = "#b85c28"
Row = tuple[str, str]


def change_scale(mapped: ChangeMap) -> Scale:
    """Seven classes about no change, of one round width."""
    largest = float(np.quantile(np.abs(mapped.change_mg_kg), 0.98))
    step = scales.round_step(2 * largest / CLASSES)
    breaks = tuple(round((place - 2.5) * step, 9) for place in range(CLASSES - 1))
    places = 2 if step >= 0.02 else 3
    said = [f"{value:+.{places}f}" for value in breaks]
    labels = [f"under {said[0]}"]
    labels += [f"{low} to {high}" for low, high in pairwise(said)]
    return Scale(breaks, scales.CHANGE, (*labels, f"{said[-1]} and over"))


def change_map_part(change: SeasonChange) -> tuple[Safe, str]:
    """The map's markup and the style rules that show its layers."""
    sheet = map_svg.sheet_of(change.common)
    layers = _layers(change, sheet)
    keys = [key for key, *_ in layers]
    choices = [
        _choice(key, name, checked=place == 0) for place, (key, name, *_) in enumerate(layers)
    ]
    field = tag(
        "fieldset", tag("legend", "Show on the map"), tag("div", *choices, class_="choicegroup"),
        class_="choices",
    )  # fmt: skip
    legends = [_legend(key, title, rows, note) for key, _, _, title, rows, note in layers]
    body = tag(
        "div", field, tag("div", _svg(change, sheet, layers), class_="canvas"),
        tag("div", *legends, _top(change), class_="keys"),
        class_="fieldmap", id="map",
    )  # fmt: skip
    return join([body, _atlas(layers, sheet)]), _rules(keys)


Layer = tuple[str, str, Safe, str, list[Row], str]


def _layers(change: SeasonChange, sheet: Sheet) -> list[Layer]:
    """Key, name, drawing, legend's title, rows and note of every layer there is."""
    layers: list[Layer] = []
    if change.change_map is not None:
        layers.append(_change_layer(change, change.change_map, sheet))
    both = sorted(
        {zone.boron_kg_ha for pack in (change.before, change.after) for zone in pack.zones}
    )
    for key, pack in (("before", change.before), ("after", change.after)):
        layers.append(_rate_layer(key, pack, both, sheet))
    layers.append(_moved_layer(change, sheet))
    return layers


def _change_layer(change: SeasonChange, mapped: ChangeMap, sheet: Sheet) -> Layer:
    scale, grid = change_scale(mapped), mapped.grid
    x, y = sheet.place(grid.west_m - grid.cell_m, grid.north_m + grid.cell_m)
    picture = shape("image", {
        "x": f"{x:.1f}", "y": f"{y:.1f}", "preserveAspectRatio": "none", "class": "cells",
        "width": f"{(grid.cols + 2) * grid.cell_m:.1f}",
        "height": f"{(grid.rows + 2) * grid.cell_m:.1f}",
        "href": cells_png(grid, scale.classes(mapped.change_mg_kg), scale.colours),
    })  # fmt: skip
    noise = map_svg.cell_runs(grid, (~mapped.real).astype(np.intp), sheet)
    cover = shape("path", {"d": noise, "fill": "url(#noise)", "clip-path": "url(#cut)"})
    picture = shape("g", {"clip-path": "url(#cut)"}, picture)
    drawn = join([picture, cover, _real_zones(change, sheet)])
    rows = list(zip(scale.colours, scale.labels, strict=True))
    real = (
        f"{mapped.real_ha:.1f} ha stand out from noise"
        if mapped.real.any()
        else ("no cell stands out from noise")
    )
    note = (
        f"Change at the sites sampled in both seasons, kriged. Where it is hatched it cannot be "
        f"told from noise: {real} (false discoveries held to 10 %). A zone whose mean change is "
        "real has a bold outline, whatever its cells can show one by one."
    )
    return "change", "Change of boron", drawn, "Change of boron, mg/kg", rows, note


def _real_zones(change: SeasonChange, sheet: Sheet) -> Safe:
    """Zones whose mean change is real: a bold outline, and the change written in."""
    earlier = min(change.before, change.after, key=lambda one: one.when)
    areas = {zone.number: zone.area for zone in earlier.zones}
    size, drawn = FONT * sheet.side_m * 1.15, []
    for one in change.zones:
        if not one.real:
            continue
        path = map_svg.path_of(areas[one.zone], sheet)
        for colour, width in (("#fff", 110), ("#111", 190)):
            line = {"stroke": colour, "stroke-width": f"{sheet.side_m / width:.2f}"}
            drawn.append(shape("path", {"d": path, "fill": "none"} | line))
        for east, north in map_svg.label_places(areas[one.zone], least_radius_m=2 * size):
            x, y = sheet.place(east, north)
            said = f"{one.zone}: {one.change:+.2f}"
            drawn.append(map_svg.words_at(x, y, said, size=size, colour="#111", halo="#fff"))
    return join(drawn)


def _rate_layer(key: str, pack: SeasonPack, rates: Sequence[float], sheet: Sheet) -> Layer:
    given = [one for one in rates if one > 0]
    picked = scales.spread_over(scales.RATES[1:], len(given)) if given else ()
    colours = {0.0: scales.NOTHING} | dict(zip(given, picked, strict=True))
    fills = [
        shape("path", {
            "d": map_svg.path_of(zone.area, sheet), "fill": colours[zone.boron_kg_ha],
            "fill-rule": "evenodd", "stroke": "#111", "stroke-width": f"{sheet.side_m / 500:.2f}",
            "class": "thin",
        })
        for zone in pack.zones
    ]  # fmt: skip
    size = FONT * sheet.side_m * 1.15
    labels = []
    for zone in pack.zones:
        ink = scales.ink_on(colours[zone.boron_kg_ha])
        halo = colours[zone.boron_kg_ha] if ink == "#ffffff" else "#ffffff"
        said = f"{zone.number}: {figure(zone.boron_kg_ha, 2)}"
        for east, north in map_svg.label_places(zone.area, least_radius_m=1.6 * size):
            x, y = sheet.place(east, north)
            labels.append(map_svg.words_at(x, y, said, size=size, colour=ink, halo=halo))
    own = sorted({zone.boron_kg_ha for zone in pack.zones})
    rows = [(colours[one], f"{figure(one, 2)}" if one else "0, untreated") for one in own]
    name = f"Rates {pack.season}"
    note = "Zone number and boron rate stand in the zone."
    return key, name, join([*fills, *labels]), f"Boron in {pack.season}, kg/ha", rows, note


def _moved_layer(change: SeasonChange, sheet: Sheet) -> Layer:
    drawn = [
        shape("path", {
            "d": map_svg.path_of(one.area, sheet), "fill": MOVED, "fill-rule": "evenodd",
        })
        for one in change.moved.moved
    ]  # fmt: skip
    for pack, dash in ((change.before, f"{sheet.side_m / 90:.1f}"), (change.after, None)):
        for zone in pack.zones:
            drawn.append(
                shape("path", {
                    "d": map_svg.path_of(zone.area, sheet), "fill": "none", "stroke": "#111",
                    "stroke-width": f"{sheet.side_m / 420:.2f}", "stroke-dasharray": dash,
                    "class": "thin",
                })
            )  # fmt: skip
    rows = [(MOVED, f"in another zone than before: {change.moved.moved_ha:.1f} ha")]
    note = f"Dashed: outlines of {change.before.season}. Full: outlines of {change.after.season}."
    return "moved", "Zones that moved", join(drawn), "Ground that changed its zone", rows, note


def _svg(change: SeasonChange, sheet: Sheet, layers: Sequence[Layer]) -> Safe:
    boundary = map_svg.path_of(change.common, sheet)
    cut = shape("clipPath", {"id": "cut"}, shape("path", {"d": boundary, "clip-rule": "evenodd"}))
    pitch = sheet.side_m / 70
    noise = shape(
        "pattern",
        {
            "id": "noise", "patternUnits": "userSpaceOnUse", "width": f"{pitch:.2f}",
            "height": f"{pitch:.2f}", "patternTransform": "rotate(45)",
        },
        shape("rect", {"width": f"{pitch:.2f}", "height": f"{pitch:.2f}", "fill": "#fff",
                       "opacity": 0.55}),
        shape("path", {"d": f"M0 0V{pitch:.2f}", "stroke": "#4a535c",
                       "stroke-width": f"{pitch / 6:.2f}"}),
    )  # fmt: skip
    parts = [shape("defs", {}, cut, noise)]
    parts += [
        shape("g", {"class": f"layer on-{key}"}, shape("g", {"id": f"fill-{key}"}, drawn))
        for key, _, drawn, *_ in layers
    ]
    line = {
        "d": boundary, "fill": "none", "stroke": "#111", "stroke-linejoin": "round",
        "stroke-width": f"{sheet.side_m / 220:.2f}", "class": "thick",
    }  # fmt: skip
    parts.append(shape("g", {"id": "fieldline"}, shape("path", line)))
    parts.append(shape("g", {"class": "strips"}, _strips(change, sheet)))
    parts.append(shape("g", {"class": "sites"}, _sites(change, sheet)))
    parts.append(shape("g", {}, map_svg.furniture(sheet, us=False)))
    attributes: dict[str, object] = {
        "viewBox": sheet.view, "role": "img",
        "aria-label": f"Map of change in {change.after.field_name}",
    }  # fmt: skip
    return shape("svg", attributes, *parts)


def _strips(change: SeasonChange, sheet: Sheet) -> Safe:
    drawn = []
    for strip in change.strips:
        fill = "#ffffff" if strip.kind == "untreated" else "#122d48"
        drawn.append(
            shape("path", {
                "d": map_svg.path_of(strip.area, sheet), "fill": fill, "stroke": "#111",
                "stroke-width": f"{sheet.side_m / 350:.2f}",
            })
        )  # fmt: skip
    return join(drawn)


def _sites(change: SeasonChange, sheet: Sheet) -> Safe:
    size = sheet.side_m / 120
    drawn = []
    for site in change.revisit:
        x, y = sheet.place(site.east_m, site.north_m)
        ring = {
            "cx": f"{x:.1f}", "cy": f"{y:.1f}", "r": f"{size:.2f}", "fill": "#fff",
            "stroke": "#111", "stroke-width": f"{size / 3:.2f}",
        }  # fmt: skip
        drawn.append(shape("circle", ring))
    return join(drawn)


def _top(change: SeasonChange) -> Safe:
    boxes = [("sites", "Sites to sample again")]
    if change.strips:
        boxes.insert(0, ("strips", "Check strips (white untreated, dark double)"))
    ticks = [
        tag(
            "label", tag("input", type="checkbox", id=f"top-{key}", checked=False),
            tag("span", name), for_=f"top-{key}", class_="tick",
        )
        for key, name in boxes
    ]  # fmt: skip
    return tag("fieldset", tag("legend", "On top of it"), *ticks, class_="overlays")


def _legend(key: str, title: str, rows: Sequence[Row], note: str) -> Safe:
    items = [tag("li", swatch(colour), said) for colour, said in rows]
    return tag(
        "div", tag("p", tag("b", title)), tag("ul", *items), tag("p", note, class_="soft"),
        class_=f"key key-{key}",
    )  # fmt: skip


def _choice(key: str, name: str, *, checked: bool) -> Safe:
    button = tag("input", type="radio", name="show", value=key, id=f"show-{key}", checked=checked)
    return tag("label", button, tag("span", name), for_=f"show-{key}", class_="choice")


def _rules(keys: Sequence[str]) -> str:
    """Rules that show the chosen layer; browsers without :has() show the first."""
    shows = [
        f"#map:has(#show-{key}:checked) .on-{key}{{display:inline}}"
        f"#map:has(#show-{key}:checked) .key-{key}{{display:block}}"
        for key in keys
    ]
    hides = [
        f"#map:has(#top-{key}:not(:checked)) .{key}{{display:none}}" for key in ("strips", "sites")
    ]
    first = keys[0]
    fallback = (
        f"@supports not selector(:has(*)){{#map .on-{first}{{display:inline}}"
        f"#map .key-{first}{{display:block}}}}"
    )
    wide = ".fieldmap{grid-template-columns:1fr}"
    return ".layer,.key{display:none}" + wide + "".join(shows + hides) + fallback


def _atlas(layers: Sequence[Layer], sheet: Sheet) -> Safe:
    """All layers side by side, for print."""
    cards = []
    for key, name, _, _, rows, _ in layers:
        picture = shape(
            "svg", {"viewBox": sheet.view}, shape("use", {"href": f"#fill-{key}"}),
            shape("use", {"href": "#fieldline"}),
        )  # fmt: skip
        items = [tag("li", swatch(colour), said) for colour, said in rows]
        cards.append(
            tag("div", tag("p", tag("b", name)), picture, tag("ul", *items), class_="card")
        )
    return tag("div", *cards, class_="atlas", aria_hidden="true")

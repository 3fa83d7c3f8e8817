"""The map of change: real change, rates of both seasons, ground that moved, strips and sites.

Layers are chosen by style rules alone; the page needs no script.
"""

from __future__ import annotations

from collections.abc import Sequence

from schorl.model.change import SeasonChange
from schorl.report import map_svg
from schorl.report.change_layers import Layer, Row, layers_of_change
from schorl.report.charts import swatch
from schorl.report.map_svg import Sheet
from schorl.report.markup import Safe, join, shape, tag


def change_map_part(change: SeasonChange) -> tuple[Safe, str]:
    """The map's markup and the style rules that show its layers."""
    sheet = map_svg.sheet_of(change.common)
    layers = layers_of_change(change, sheet)
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

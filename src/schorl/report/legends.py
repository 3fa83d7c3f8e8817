"""Legends of the map and the boxes for what lies on top of it."""

from __future__ import annotations

from schorl.model.record import RunRecord
from schorl.report import zones_svg
from schorl.report.charts import swatch
from schorl.report.layers import Doubtful, Layer
from schorl.report.markup import Safe, join, shape, tag
from schorl.report.shown import Shown, figure
from schorl.report.words import product_words


def legends(record: RunRecord, shown: Shown, layers: tuple[Layer, ...]) -> Safe:
    """One legend a layer, with its unit; the page shows that of the layer on the map."""
    prescription = record.prescription
    colours = zones_svg.rate_colours(prescription)
    rates = [
        (colours[rate], shown.rate_figure(rate) if rate else "0, untreated", "")
        for rate in sorted(colours)
        if any(one.product_rate == rate for one in prescription.rates)
    ]
    if len(rates) > 8:  # many rates are coloured by size: a few of them say it all
        rates = [rates[round(i * (len(rates) - 1) / 6)] for i in range(7)]
    zones = [
        (colour, f"{rate.zone}: {figure(rate.boron_mean_mg_kg, 2)} mg/kg", "")
        for colour, rate in zip(
            zones_svg.zone_colours(prescription), prescription.rates, strict=True
        )
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


def overlays(doubtful: Doubtful, shown: Shown) -> Safe:
    """Boxes to tick for outlines, samples and doubtful places, with what the hatching means."""
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
                    f"untreated, though two times in three it is short (often by too little for a pass): {shown.area(doubtful.left_ha)}",
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

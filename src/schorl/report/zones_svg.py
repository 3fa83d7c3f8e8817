"""Zones and rates as SVG: fills, hatching, outlines, labels, and the rate map by itself."""

from __future__ import annotations

import numpy as np

from schorl.model.arrays import Floats
from schorl.model.prescription import Prescription
from schorl.model.record import RunRecord
from schorl.model.zones import ZoneKind
from schorl.report import scales
from schorl.report.map_svg import (
    FONT,
    Sheet,
    field_line,
    furniture,
    label_places,
    path_of,
    sheet_of,
    words_at,
)
from schorl.report.markup import Safe, join, shape
from schorl.report.shown import Shown


def rate_colours(prescription: Prescription) -> dict[float, str]:
    """Colour of every product rate: white for none, darker for more.

    Up to six rates are spread evenly over the scale, so that neighbours differ; more of them are
    coloured by size.
    """
    rates = sorted({rate.product_rate for rate in prescription.rates if rate.product_rate > 0})
    colours = {0.0: scales.NOTHING}
    if len(rates) <= scales.MOST_RATE_CLASSES:
        picked = scales.spread_over(scales.RATES[1:], len(rates)) if rates else ()
        return colours | dict(zip(rates, picked, strict=True))
    last = len(scales.RATES) - 1
    span = max(rates[-1] - rates[0], 1e-9)
    return colours | {one: scales.RATES[round((one - rates[0]) / span * last)] for one in rates}


def zone_colours(prescription: Prescription) -> tuple[str, ...]:
    """Colour of every zone, dark for least boron."""
    order = np.argsort([rate.boron_mean_mg_kg for rate in prescription.rates], kind="stable")
    picked = scales.spread_over(scales.ZONES, len(order))
    colours = [""] * len(order)
    for rank, place in enumerate(order):
        colours[int(place)] = picked[rank]
    return tuple(colours)


def patterns(sheet: Sheet, prefix: str = "") -> Safe:
    """Two hatches that look different in black and white, in map metres."""
    pitch = sheet.side_m / 75
    stroke = pitch / 6

    def hatch(name: str, turn: int, colour: str, gap: float) -> Safe:
        attributes: dict[str, object] = {
            "id": prefix + name,
            "patternUnits": "userSpaceOnUse",
            "width": f"{pitch * gap:.2f}",
            "height": f"{pitch * gap:.2f}",
            "patternTransform": f"rotate({turn})",
        }
        line = {"d": f"M0 0V{pitch * gap:.2f}", "stroke": colour, "stroke-width": f"{stroke:.2f}"}
        return shape("pattern", attributes, shape("path", line))

    return join(
        [
            hatch("fed", 45, "#111", 1.0),
            hatch("left", -45, "#111", 1.0),
            hatch("off", 45, "#777", 2.2),
        ]
    )


def zone_fills(record: RunRecord, sheet: Sheet, colours: tuple[str, ...], prefix: str = "") -> Safe:
    """Zones filled; keep-off areas and hot spots are hatched on top."""
    drawn = []
    for zone, colour in zip(record.prescription.zone_map.zones, colours, strict=True):
        path = path_of(zone.geometry, sheet)
        drawn.append(shape("path", {"d": path, "fill": colour, "fill-rule": "evenodd"}))
        if zone.kind is not ZoneKind.ZONE:
            hatch = {"d": path, "fill": f"url(#{prefix}off)", "fill-rule": "evenodd"}
            drawn.append(shape("path", hatch))
    return join(drawn)


def zone_lines(record: RunRecord, sheet: Sheet, *, width: float, colour: str = "#111") -> Safe:
    """Outlines of all zones; ``width`` in map metres."""
    path = "".join(path_of(zone.geometry, sheet) for zone in record.prescription.zone_map.zones)
    return shape(
        "path",
        {
            "d": path,
            "fill": "none",
            "stroke": colour,
            "stroke-width": f"{width:.2f}",
            "stroke-linejoin": "round",
            "class": "thin",
        },
    )


def zone_labels(
    record: RunRecord,
    sheet: Sheet,
    said: tuple[str, ...],
    fills: tuple[str, ...] | None,
    *,
    clear_of_m: Floats | None = None,
) -> Safe:
    """One label for every part of a zone with room for it; ink follows the fill."""
    size = FONT * sheet.side_m * 1.15
    drawn = []
    for place, zone in enumerate(record.prescription.zone_map.zones):
        ink = scales.ink_on(fills[place]) if fills else "#111"
        halo = "#ffffff" if ink != "#ffffff" else None
        if fills and ink == "#ffffff":
            halo = fills[place]
        for east, north in label_places(
            zone.geometry, least_radius_m=size * 0.8, clear_of_m=clear_of_m, clear_m=1.3 * size
        ):
            x, y = sheet.place(east, north)
            drawn.append(words_at(x, y, said[place], size=size, colour=ink, halo=halo))
    return join(drawn)


def rate_labels(record: RunRecord, shown: Shown) -> tuple[str, ...]:
    """The product rate of every zone as it is written on maps; a plain 0 for none."""
    rates = (rate.product_rate for rate in record.prescription.rates)
    return tuple(shown.rate_figure(rate) if rate else "0" for rate in rates)


def rate_map_svg(record: RunRecord, shown: Shown) -> str:
    """The rate map by itself, for print and to send: rates written into their zones."""
    prescription = record.prescription
    sheet = sheet_of(record.field.boundary)
    colours = rate_colours(prescription)
    fills = tuple(colours[rate.product_rate] for rate in prescription.rates)
    said = rate_labels(record, shown)
    width = sheet.side_m / 400
    inner = [
        shape("defs", {}, patterns(sheet)),
        zone_fills(record, sheet, fills),
        zone_lines(record, sheet, width=width * 0.7),
        field_line(record, sheet, width=width * 1.6),
        zone_labels(record, sheet, said, fills),
        furniture(sheet, us=shown.us),
    ]
    attributes: dict[str, object] = {
        "xmlns": "http://www.w3.org/2000/svg",
        "viewBox": sheet.view,
        "font-family": "DejaVu Sans",
    }
    return str(shape("svg", attributes, *inner))

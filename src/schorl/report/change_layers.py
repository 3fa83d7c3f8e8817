"""Layers of the map of change: what each draws, its key and its note."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
import shapely

from schorl.model.arrays import Counts, Floats
from schorl.model.change import ChangeMap, SeasonChange, SeasonPack
from schorl.model.field import Area, CellGrid
from schorl.model.settings import AppliedBoron
from schorl.report import map_svg, scales
from schorl.report.map_svg import FONT, Sheet
from schorl.report.markup import Safe, join, shape
from schorl.report.png import cells_png
from schorl.report.scales import Scale
from schorl.report.shown import figure

CLASSES = 7
MOVED = "#b85c28"
Row = tuple[str, str]
#: Key, name, drawing, the key's title, its rows and a note.
Layer = tuple[str, str, Safe, str, list[Row], str]


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


def layers_of_change(change: SeasonChange, sheet: Sheet) -> list[Layer]:
    """Key, name, drawing, legend's title, rows and note of every layer there is."""
    layers: list[Layer] = []
    if change.change_map is not None:
        layers.append(_change_layer(change, change.change_map, sheet))
    both = sorted(
        {zone.boron_kg_ha for pack in (change.before, change.after) for zone in pack.zones}
    )
    seasons = (("before", change.before), ("after", change.after))
    if all("boron" in pack.surfaces for _, pack in seasons):
        scale = _shared_scale(change)
        told = (
            f"there is no map of change: {change.no_map or change.refused}"
            if change.change_map is None
            else "the map of change tells what is not"
        )
        layers += [_boron_layer(f"boron-{key}", pack, scale, sheet, told) for key, pack in seasons]
    layers += [_rate_layer(key, pack, both, sheet) for key, pack in seasons]
    earlier = min((change.before, change.after), key=lambda one: one.when)
    if earlier.applied is not None and earlier.applied.areas:
        layers.append(_given_layer(earlier, earlier.applied, sheet))
    layers.append(_moved_layer(change, sheet))
    return layers


def _change_layer(change: SeasonChange, mapped: ChangeMap, sheet: Sheet) -> Layer:
    scale, grid = change_scale(mapped), mapped.grid
    picture = _picture(grid, mapped.change_mg_kg, scale, sheet)
    noise = map_svg.cell_runs(grid, (~mapped.real).astype(np.intp), sheet)
    cover = shape("path", {"d": noise, "fill": "url(#noise)", "clip-path": "url(#cut)"})
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


def _picture(grid: CellGrid, values: Floats, scale: Scale, sheet: Sheet) -> Safe:
    """Values of cells as a picture, cut with the field."""
    return _cells(grid, scale.classes(values), scale, sheet)


def _cells(grid: CellGrid, classes: Counts, scale: Scale, sheet: Sheet) -> Safe:
    x, y = sheet.place(grid.west_m - grid.cell_m, grid.north_m + grid.cell_m)
    picture = shape("image", {
        "x": f"{x:.1f}", "y": f"{y:.1f}", "preserveAspectRatio": "none", "class": "cells",
        "width": f"{(grid.cols + 2) * grid.cell_m:.1f}",
        "height": f"{(grid.rows + 2) * grid.cell_m:.1f}",
        "href": cells_png(grid, classes, scale.colours),
    })  # fmt: skip
    return shape("g", {"clip-path": "url(#cut)"}, picture)


def _shared_scale(change: SeasonChange) -> Scale:
    """One set of classes for the boron of both seasons, dark where there is least."""
    both = [pack.surfaces["boron"] for pack in (change.before, change.after)]
    return scales.even_scale(np.concatenate(both), scales.SUPPORTING[::-1], decimals=2)


def _boron_layer(key: str, pack: SeasonPack, scale: Scale, sheet: Sheet, told: str) -> Layer:
    labels, size = [], FONT * sheet.side_m * 1.15
    for zone in pack.zones:
        for east, north in map_svg.label_places(zone.area, least_radius_m=1.6 * size):
            x, y = sheet.place(east, north)
            labels.append(
                map_svg.words_at(x, y, str(zone.number), size=size, colour="#000", halo="#fff")
            )
    drawn = [_picture(pack.grid, pack.surfaces["boron"], scale, sheet)]
    for colour, width in (("#fff", 220), ("#111", 500)):
        drawn += [_outline(zone.area, sheet, colour=colour, width=width) for zone in pack.zones]
    rows = list(zip(scale.colours, scale.labels, strict=True))
    note = (
        f"Boron as mapped in {pack.season}, with that season's zones. Both seasons share one key. "
        f"Much of what differs between two such maps is noise; {told}."
    )
    title = f"Boron in {pack.season}, mg/kg"
    return key, f"Boron {pack.season}", join([*drawn, *labels]), title, rows, note


def _outline(
    area: Area, sheet: Sheet, *, colour: str = "#111", width: float, dash: str | None = None
) -> Safe:
    """A zone's outline, ``side / width`` metres wide."""
    return shape("path", {
        "d": map_svg.path_of(area, sheet), "fill": "none", "stroke": colour,
        "stroke-width": f"{sheet.side_m / width:.2f}", "stroke-dasharray": dash, "class": "thin",
    })  # fmt: skip


def _real_zones(change: SeasonChange, sheet: Sheet) -> Safe:
    """Zones whose mean change is real: a bold outline, and the change written in."""
    earlier = min(change.before, change.after, key=lambda one: one.when)
    areas = {zone.number: zone.area for zone in earlier.zones}
    size, drawn = FONT * sheet.side_m * 1.15, []
    for one in change.zones:
        if not one.real:
            continue
        for colour, width in (("#fff", 110), ("#111", 190)):
            drawn.append(_outline(areas[one.zone], sheet, colour=colour, width=width))
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


def _given_layer(pack: SeasonPack, applied: AppliedBoron, sheet: Sheet) -> Layer:
    """What was really given, cell by cell: nothing is white, as in the maps of rates."""
    rates = np.array([rate for _, rate in applied.areas])
    tree = shapely.STRtree([area for area, _ in applied.areas])
    cell, area = tree.query(shapely.points(pack.grid.centres_m), predicate="within")
    given = np.zeros(pack.grid.n_cells)
    np.add.at(given, cell, rates[area])
    scale = scales.even_scale(given[given > 0], scales.spread_over(scales.RATES[1:], 5), decimals=2)
    classes = np.where(given > 0, scale.classes(given) + 1, 0)
    shown = Scale((), (scales.NOTHING, *scale.colours), ("0, untreated", *scale.labels))
    drawn = [_cells(pack.grid, classes, shown, sheet)]
    drawn += [_outline(zone.area, sheet, width=500) for zone in pack.zones]
    rows = list(zip(shown.colours, shown.labels, strict=True))
    note = f"As logged in {applied.source}, with the zones of {pack.season}."
    return (
        "given", f"Given {pack.season}", join(drawn), f"Boron given in {pack.season}, kg/ha", rows,
        note,
    )  # fmt: skip


def _moved_layer(change: SeasonChange, sheet: Sheet) -> Layer:
    drawn = [
        shape("path", {
            "d": map_svg.path_of(one.area, sheet), "fill": MOVED, "fill-rule": "evenodd",
        })
        for one in change.moved.moved
    ]  # fmt: skip
    for pack, dash in ((change.before, f"{sheet.side_m / 90:.1f}"), (change.after, None)):
        drawn += [_outline(zone.area, sheet, width=420, dash=dash) for zone in pack.zones]
    drawn += _moves_said(change, sheet)
    rows = [(MOVED, f"in another zone than before: {change.moved.moved_ha:.1f} ha")]
    note = (
        f"Dashed: outlines of {change.before.season}. Full: outlines of {change.after.season}. "
        f"The figures say from which zone into which, by the numbers of {change.before.season}."
    )
    return "moved", "Zones that moved", join(drawn), "Ground that changed its zone", rows, note


def _moves_said(change: SeasonChange, sheet: Sheet) -> list[Safe]:
    """The zone before and the zone after, written into pieces with room for it."""
    size, said = FONT * sheet.side_m, []
    for one in change.moved.moved:
        for part in shapely.get_parts(one.area):
            if part.area < (4 * size) ** 2:
                continue
            (east, north), *_ = map_svg.label_places(part, least_radius_m=size)
            x, y = sheet.place(east, north)
            words = f"{one.before} → {change.moved.kept.get(one.after, one.after)}"
            said.append(map_svg.words_at(x, y, words, size=size, colour="#000", halo="#fff"))
    return said

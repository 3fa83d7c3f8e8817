"""The field as SVG: boundary with holes, zones, rates, cells, samples, scale bar and north."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, Polygon

from schorl.model.arrays import Counts, Floats
from schorl.model.field import Area, CellGrid
from schorl.model.record import RunRecord
from schorl.report import scales
from schorl.report.markup import Safe, join, shape
from schorl.report.shown import figure
from schorl.units import M_PER_FT

MARGIN = 0.03  # of the longer side
FONT = 1 / 38  # of the longer side: letters on the map


@dataclass(frozen=True, slots=True)
class Sheet:
    """Where the map's zero lies (west, north, metres) and its size; down is positive."""

    west_m: float
    north_m: float
    width_m: float
    height_m: float

    @property
    def side_m(self) -> float:
        """The longer side."""
        return max(self.width_m, self.height_m)

    @property
    def view(self) -> str:
        """The ``viewBox``: the field with a margin all round and room for the scale bar."""
        edge = MARGIN * self.side_m
        return (
            f"{-edge:.1f} {-edge:.1f} {self.width_m + 2 * edge:.1f} "
            f"{self.height_m + 2 * edge + 1.6 * FONT * self.side_m:.1f}"
        )

    def place(self, east_m: float, north_m: float) -> tuple[float, float]:
        """A position on the map."""
        return east_m - self.west_m, self.north_m - north_m


def sheet_of(area: Area) -> Sheet:
    """A sheet that holds an area."""
    west, south, east, north = area.bounds
    return Sheet(west, north, east - west, north - south)


def path_of(area: Area, sheet: Sheet) -> str:
    """Path data of polygons, holes included, rounded to decimetres."""
    parts = area.geoms if isinstance(area, MultiPolygon) else (area,)
    rings = [ring for part in parts for ring in (part.exterior, *part.interiors)]
    return "".join(
        _ring(np.asarray(ring.coords)[:-1], sheet) for ring in rings if not ring.is_empty
    )


def _ring(points: np.ndarray, sheet: Sheet) -> str:
    east, north = points[:, 0] - sheet.west_m, sheet.north_m - points[:, 1]
    steps = [f"{x:.1f} {y:.1f}" for x, y in zip(east, north, strict=True)]
    return "M" + "L".join(steps) + "Z"


def cell_runs(grid: CellGrid, chosen: Counts, sheet: Sheet) -> str:
    """Path data of chosen cells ``(n_cells,)``, one rectangle for each run along a row."""
    raster = np.zeros(grid.inside.shape, dtype=bool)
    raster[grid.inside] = chosen.astype(bool)
    said = []
    for row in np.flatnonzero(raster.any(axis=1)):
        edges = np.flatnonzero(np.diff(np.concatenate([[0], raster[row].astype(np.int8), [0]])))
        x0, y = sheet.place(grid.west_m, grid.north_m - row * grid.cell_m)
        for first, last in edges.reshape(-1, 2):
            across = (last - first) * grid.cell_m
            at = x0 + first * grid.cell_m
            said.append(f"M{at:.1f} {y:.1f}h{across:.1f}v{grid.cell_m:.1f}h{-across:.1f}z")
    return "".join(said)


def label_places(
    area: Area, *, least_radius_m: float, clear_of_m: Floats | None = None, clear_m: float = 0.0
) -> tuple[tuple[float, float], ...]:
    """East and north for the label of every part that has room for one.

    The middle of the largest inscribed circle, so that a label never leaves its zone; where a
    point of ``clear_of_m`` ``(n, 2)`` is nearer than ``clear_m``, the clearest place inside the
    circle. The largest part of a zone gets a label in any case.
    """
    parts = list(area.geoms) if isinstance(area, MultiPolygon) else [area]
    found = [_circle(part) for part in parts if isinstance(part, Polygon)]
    found.sort(key=lambda circle: (-circle[2], circle[0]))
    return tuple(
        _clearest(circle, clear_of_m, clear_m)
        for place, circle in enumerate(found)
        if circle[2] >= least_radius_m or place == 0
    )


def _clearest(
    circle: tuple[float, float, float], points_m: Floats | None, clear_m: float
) -> tuple[float, float]:
    east, north, radius = circle
    if points_m is None or not len(points_m):
        return east, north
    turns = np.arange(8) * np.pi / 4
    reach = 0.6 * max(radius - clear_m, 0.0)
    places = np.array([[0.0, 0.0], *np.column_stack([np.sin(turns), np.cos(turns)]) * reach])
    places += [east, north]
    apart = places[:, None, :] - points_m[None, :, :]
    # A label is about twice as wide as it is high: points beside it are nearer than they look.
    away = np.hypot(apart[..., 0] / 1.6, apart[..., 1]).min(axis=1)
    best = 0 if away[0] >= clear_m else int(np.argmax(away))
    return float(places[best, 0]), float(places[best, 1])


def _circle(part: Polygon) -> tuple[float, float, float]:
    line = shapely.maximum_inscribed_circle(part, tolerance=max(part.length / 2000, 0.5))
    (east, north), _ = line.coords
    return float(east), float(north), float(line.length)


def field_line(record: RunRecord, sheet: Sheet, *, width: float) -> Safe:
    """The boundary with its holes."""
    return shape(
        "path",
        {
            "d": path_of(record.field.boundary, sheet),
            "fill": "none",
            "stroke": "#111",
            "stroke-width": f"{width:.2f}",
            "stroke-linejoin": "round",
            "class": "thick",
        },
    )


def words_at(
    x: float, y: float, said: str, *, size: float, colour: str, halo: str | None = None
) -> Safe:
    """A label whose middle stands at a place; ``pin`` lets the page keep its size on the screen.

    The halo is a copy beneath, because not every renderer knows ``paint-order``.
    """
    base: dict[str, object] = {
        "text-anchor": "middle",
        "font-size": f"{size:.2f}",
        "font-weight": "700",
        "y": f"{size * 0.36:.2f}",
    }
    drawn = []
    if halo:
        outline = {"stroke": halo, "stroke-width": f"{size / 4:.2f}", "stroke-linejoin": "round"}
        drawn.append(shape("text", base | {"fill": halo} | outline, said))
    drawn.append(shape("text", base | {"fill": colour}, said))
    inner = shape("g", {"class": "pin"}, *drawn)
    return shape("g", {"transform": f"translate({x:.1f} {y:.1f})"}, inner)


def sample_marks(record: RunRecord, sheet: Sheet) -> Safe:
    """Samples: a ring at a point, a dashed outline for a sample zone."""
    size = sheet.side_m / 110
    drawn = []
    for area in record.samples.areas:
        if area is not None:
            line = {"d": path_of(area, sheet), "fill": "none", "stroke": "#111", "class": "dash"}
            line |= {"stroke-width": f"{size / 4:.2f}", "stroke-dasharray": f"{size:.1f}"}
            drawn.append(shape("path", line))
    for east, north in record.samples.east_north_m:
        x, y = sheet.place(float(east), float(north))
        ring = {"r": f"{size:.2f}", "fill": "#fff", "stroke": "#111"}
        dot = shape("circle", ring | {"stroke-width": f"{size / 3:.2f}"})
        pin = shape("g", {"class": "pin"}, dot)
        drawn.append(shape("g", {"transform": f"translate({x:.1f} {y:.1f})"}, pin))
    return join(drawn)


def bar_length_m(sheet: Sheet, *, us: bool) -> tuple[float, str]:
    """A round length near a quarter of the width, with its words."""
    unit = M_PER_FT if us else 1.0
    step = scales.round_step(sheet.width_m / unit / 5)
    return step * unit, f"{figure(step, 0)} {'ft' if us else 'm'}"


def furniture(sheet: Sheet, *, us: bool) -> Safe:
    """Scale bar under the field and a north arrow in the corner."""
    length, said = bar_length_m(sheet, us=us)
    size = FONT * sheet.side_m
    y = sheet.height_m + 1.6 * size
    bar = f"M0 {y - size / 3:.1f}V{y:.1f}H{length:.1f}V{y - size / 3:.1f}"
    line = {"d": bar, "fill": "none", "stroke": "#111", "stroke-width": f"{size / 9:.2f}"}
    label = {"x": f"{length + size / 2:.1f}", "y": f"{y:.1f}", "font-size": f"{size:.1f}"}
    x, top = sheet.width_m - size * 0.3, sheet.height_m + 0.2 * size
    arrow = f"M{x:.1f} {top:.1f}l{size * 0.42:.1f} {size * 1.3:.1f}l{-size * 0.42:.1f} {-size * 0.35:.1f}"
    arrow += f"l{-size * 0.42:.1f} {size * 0.35:.1f}z"
    north = {"x": f"{x - size * 1.3:.1f}", "y": f"{y:.1f}", "font-size": f"{size:.1f}"}
    return join(
        [
            shape("path", line),
            shape("text", label | {"fill": "#111"}, said),
            shape("path", {"d": arrow, "fill": "#111"}),
            shape(
                "text", north | {"text-anchor": "middle", "font-weight": "700", "fill": "#111"}, "N"
            ),
        ]
    )

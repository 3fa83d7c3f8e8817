"""Small drawings beside the words: boron of a zone on one axis, variogram, leave-one-out, bars."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from schorl.agronomy.chances import chance_below
from schorl.geostat.covariance import correlation_in_place
from schorl.model.arrays import Floats
from schorl.model.record import RunRecord
from schorl.model.surface import Surface
from schorl.report.markup import Safe, shape, tag
from schorl.report.scales import round_step
from schorl.report.shown import Shown, figure
from schorl.units import M_PER_FT

INK, SOFT, GRID = "#14181c", "#4a535c", "#d3d8dd"
DEEP, RUST = "#1c4e63", "#8f3a14"


@dataclass(frozen=True, slots=True)
class Axis:
    """A linear axis in drawing units."""

    low: float
    high: float
    start: float
    end: float

    def __call__(self, value: float) -> float:
        """Where a value lies."""
        share = (value - self.low) / ((self.high - self.low) or 1.0)
        return round(self.start + share * (self.end - self.start), 1)

    def ticks(self, about: int = 4) -> list[float]:
        """Round values along the axis."""
        step = round_step((self.high - self.low) / about)
        first = np.ceil(self.low / step - 1e-9) * step
        values = np.arange(first, self.high + step * 1e-6, step)
        return [0.0 if abs(v) < step * 1e-6 else float(v) for v in values]


def label(x: float, y: float, said: str, anchor: str = "middle", **more: object) -> Safe:
    """Small letters in a drawing."""
    base: dict[str, object] = {"x": x, "y": y, "text-anchor": anchor, "font-size": 12, "fill": SOFT}
    return shape("text", base | more, said)


def line(d: str, colour: str = INK, width: float = 1.5, **more: object) -> Safe:
    """A stroke."""
    base: dict[str, object] = {"d": d, "fill": "none", "stroke": colour, "stroke-width": width}
    return shape("path", base | {k.replace("_", "-"): v for k, v in more.items()})


def drawing(width: int, height: int, words: str, *parts: Safe) -> Safe:
    """An SVG picture whose content is told in words."""
    attributes: dict[str, object] = {
        "viewBox": f"0 0 {width} {height}",
        "role": "img",
        "aria-label": words,
        "class": "chart",
    }
    return shape("svg", attributes, *parts)


def boron_axis(record: RunRecord) -> Axis:
    """One axis for all zones: from 0 to beyond everything that is drawn."""
    need = record.cell_need
    top = max(
        float(np.quantile(need.boron_mg_kg, 0.99)),
        float(need.ceiling_mg_kg.max()),
        float(need.target_mg_kg.max()),
    )
    return Axis(0.0, top * 1.12, 4.0, 296.0)


def zone_quantiles(record: RunRecord, place: int) -> tuple[float, float]:
    """Between which values single places of a zone lie 9 times in 10, mg/kg."""
    need, chosen = record.cell_need, record.prescription.zone_map.labels == place
    if not chosen.any():
        return float("nan"), float("nan")
    location, sd = need.boron_location[chosen], need.boron_sd[chosen]

    def share(value: float) -> float:
        return float(chance_below(np.array(value), location, sd, log=need.boron_log).mean())

    low, high = 0.0, 4.0 * float(need.boron_mg_kg[chosen].max()) + 1.0
    return _bisect(share, 0.05, low, high), _bisect(share, 0.95, low, high)


def _bisect(share: object, wanted: float, low: float, high: float) -> float:
    assert callable(share)
    for _ in range(30):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if share(middle) < wanted else (low, middle)
    return 0.5 * (low + high)


def ladder(record: RunRecord, place: int, axis: Axis) -> Safe:
    """Boron of a zone: places (thin), mean (thick), samples (ticks), target, ceiling."""
    rate = record.prescription.rates[place]
    low, high = zone_quantiles(record, place)
    half = 1.645 * rate.boron_sd_mg_kg
    mean = rate.boron_mean_mg_kg
    cells = record.grid.cell_of(record.samples.east_north_m)
    here = (cells >= 0) & (record.prescription.zone_map.labels[cells] == place)
    boron = record.samples.properties.get("boron")
    values = boron.values[here & boron.known] if boron is not None else np.empty(0)
    marks = "".join(f"M{axis(float(v))} 21v7" for v in values)
    words = (
        f"Boron of zone {rate.zone}: mean {figure(mean, 2)}, between {figure(mean - half, 2)} and "
        f"{figure(mean + half, 2)}; single places between {figure(low, 2)} and {figure(high, 2)}; "
        f"target {figure(rate.target_mg_kg, 2)}, soil ceiling {figure(rate.ceiling_mg_kg, 2)}"
    )
    parts = [
        shape("rect", {"x": 4, "y": 0, "width": 292, "height": 28, "fill": "#f6f5f1"}),
        line(f"M{axis(rate.target_mg_kg)} 0v28", DEEP, 2.5),
        line(f"M{axis(rate.ceiling_mg_kg)} 0v28", RUST, 2, stroke_dasharray="4 3"),
    ]
    if np.isfinite(low) and np.isfinite(high):
        parts.append(line(f"M{axis(low)} 12H{min(axis(high), 296)}", SOFT, 1.5))
    parts.append(line(f"M{axis(max(mean - half, 0))} 12H{axis(mean + half)}", INK, 7))
    parts.append(line(f"M{axis(mean)} 6v12", "#ffffff", 2))
    parts.append(line(marks, INK, 1))
    return drawing(300, 28, words, *parts)


def ladder_scale(axis: Axis) -> Safe:
    """The figures along the axis of all ladders."""
    marks = [label(axis(value), 12, f"{value:g}") for value in axis.ticks(5)]
    return shape("svg", {"viewBox": "0 0 300 16", "class": "chart", "aria-hidden": "true"}, *marks)


def variogram_plot(surface: Surface, shown: Shown) -> Safe:
    """Pairs of samples as dots (larger: more pairs), the fitted variogram as a line."""
    fit = surface.fit
    assert fit is not None
    unit_m = M_PER_FT if shown.us else 1.0
    lags, gammas = np.asarray(fit.lag_m) / unit_m, np.asarray(fit.semivariance)
    pairs, reach = np.asarray(fit.pairs), fit.practical_range_m / unit_m
    far = max(float(lags.max(initial=0.0)), 1.2 * reach)
    if lags.size:
        far = min(far, 2.0 * float(lags.max()))
    sill = fit.nugget + fit.partial_sill
    top = 1.15 * max(sill, float(gammas.max(initial=0.0)), 1e-12)
    across, up = Axis(0.0, far, 46.0, 290.0), Axis(0.0, top, 150.0, 8.0)
    parts = _frame(across, up, lambda v: figure(v, 0), f"distance, {shown.length_unit}")
    parts.append(label(12, 80, "semivariance", transform="rotate(-90 12 80)"))
    if lags.size:
        most = max(float(pairs.max(initial=1.0)), 1.0)
        for lag, gamma, count in zip(lags, gammas, pairs, strict=True):
            radius = round(2.0 + 3.5 * float(np.sqrt(count / most)), 1)
            dot = {"cx": across(float(lag)), "cy": up(float(gamma)), "r": radius}
            parts.append(shape("circle", dot | {"fill": "#fff", "stroke": INK}))
    steps = np.linspace(0.0, far, 60)
    shape_of = correlation_in_place(steps.copy(), fit.family, reach)
    curve = fit.nugget + fit.partial_sill * (1.0 - shape_of)
    points = "L".join(
        f"{across(float(h))} {up(float(g))}" for h, g in zip(steps, curve, strict=True)
    )
    parts.append(line("M" + points, DEEP, 2.5))
    if reach <= far:
        at = across(reach)
        parts.append(line(f"M{at} 8V150", RUST, 1.5, stroke_dasharray="4 3"))
    words = (
        f"Variogram: nugget {fit.nugget:.3g}, sill {sill:.3g}, practical range "
        f"{shown.length(fit.practical_range_m)}"
    )
    return drawing(300, 186, words, *parts)


def loo_plot(surface: Surface) -> Safe:
    """Samples left out in turn: told (up) against measured (across); the line is agreement."""
    quality = surface.quality
    assert quality is not None
    both = np.concatenate([quality.observed, quality.predicted])
    both = both[np.isfinite(both)]
    low, high = float(both.min()), float(both.max())
    edge = 0.06 * ((high - low) or 1.0)
    low, high = max(low - edge, 0.0) if low >= 0 else low - edge, high + edge
    across, up = Axis(low, high, 46.0, 290.0), Axis(low, high, 150.0, 8.0)
    parts = _frame(across, up, lambda v: f"{v:g}", f"measured, {surface.unit}")
    parts.append(label(12, 80, "told by the others", transform="rotate(-90 12 80)"))
    parts.append(line(f"M{across(low)} {up(low)}L{across(high)} {up(high)}", DEEP, 2))
    for seen, told in zip(quality.observed, quality.predicted, strict=True):
        if np.isfinite(seen) and np.isfinite(told):
            dot = {"cx": across(float(seen)), "cy": up(float(told)), "r": 3.2}
            parts.append(shape("circle", dot | {"fill": "#fff", "stroke": INK}))
    words = f"Leave-one-out: typical error {quality.rmse:.2g} {surface.unit}, line is agreement"
    return drawing(300, 186, words, *parts)


def _frame(across: Axis, up: Axis, said: object, below: str) -> list[Safe]:
    assert callable(said)
    parts = []
    for value in up.ticks():
        parts.append(line(f"M46 {up(value)}H290", GRID, 1))
        parts.append(label(42, up(value) + 4, f"{value:.4g}", "end"))
    for value in across.ticks():
        parts.append(line(f"M{across(value)} 150v4", SOFT, 1))
        parts.append(label(across(value), 166, str(said(value))))
    parts.append(line("M46 8V150H290", SOFT, 1))
    parts.append(label(168, 182, below))
    return parts


def saving_bars(rows: Sequence[tuple[int, float, float, float]], chosen: int) -> Safe:
    """Share of the loss saved by each number of zones, its range as a line; the chosen dark."""
    top = max(0.1, *(max(high, saving) for _, saving, _, high in rows))
    up = Axis(0.0, top, 130.0, 14.0)
    width = 280.0 / len(rows)
    parts = []
    for value in up.ticks(3):
        parts.append(line(f"M34 {up(value)}H316", GRID, 1))
        parts.append(label(30, up(value) + 4, f"{100 * value:.0f} %", "end"))
    for place, (count, saving, low, high) in enumerate(rows):
        x = 36 + place * width + width * 0.2
        y = up(max(saving, 0.0))
        bar = {
            "x": round(x, 1),
            "y": y,
            "width": round(width * 0.6, 1),
            "height": round(130 - y, 1),
        }
        fill = DEEP if count == chosen else "#b9c4ca"
        parts.append(shape("rect", bar | {"fill": fill}))
        middle = round(x + width * 0.3, 1)
        span = f"M{middle} {up(max(low, 0.0))}V{up(max(high, 0.0))}"
        parts.append(line(span, "#ffffff", 4))
        parts.append(line(span, INK, 1.5))
        weight = "700" if count == chosen else "400"
        parts.append(label(middle, 146, str(count), **{"font-weight": weight, "fill": INK}))
    parts.append(line("M34 130H316", SOFT, 1))
    parts.append(label(176, 163, "number of zones"))
    words = "; ".join(f"{count} zones save {100 * saving:.0f} %" for count, saving, _, _ in rows)
    return drawing(320, 168, words, *parts)


def share_bar(share: float, words: str) -> Safe:
    """A share as a bar."""
    filled = round(100 * min(max(share, 0.0), 1.0), 1)
    return tag(
        "span",
        shape(
            "svg",
            {"viewBox": "0 0 100 10", "class": "share", "role": "img", "aria-label": words,
             "preserveAspectRatio": "none"},
            shape("rect", {"width": 100, "height": 10, "fill": "#e6e8e6"}),
            shape("rect", {"width": filled, "height": 10, "fill": DEEP}),
        ),
    )  # fmt: skip


def swatch(colour: str, sign: str = "") -> Safe:
    """A square of a legend."""
    box = {"width": 22, "height": 14, "x": 0.5, "y": 0.5, "fill": colour, "stroke": "#444"}
    return shape(
        "svg",
        {"viewBox": "0 0 23 15", "class": "swatch", "aria-hidden": "true"},
        shape("rect", box),
        *([label(11.5, 12, sign)] if sign else []),
    )


def spread_of(values: Floats) -> str:
    """Lowest, mean and highest in words."""
    known = values[np.isfinite(values)]
    if not known.size:
        return "–"
    return f"{known.min():.3g} to {known.max():.3g}, mean {known.mean():.3g}"

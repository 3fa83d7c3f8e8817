"""Colour scales: few classes, told apart under every colour deficiency and in grey print.

Colours are samples of the scientific colour maps vik, oslo, lajolla (Crameri 2018, MIT licence),
viridis (CC0) and cividis (Nuñez, Anderton and Renslow 2018, PLoS ONE 13 e0199239). Signs and
hatching carry the meaning where colour is lost.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from schorl.model.arrays import Counts, Floats
from schorl.report.shown import figure

ABOUT_TARGET = ("#022a70", "#136697", "#80b2ca", "#ebe6e2", "#d7a081", "#b85c28", "#731406")
ABOUT_TARGET_SIGNS = ("− − −", "− −", "−", "at target", "+", "+ +", "×")
UNSURE = ("#eff0f1", "#a9b5ca", "#6e90c8", "#295a91", "#122d48")
SUPPORTING = ("#f3db42", "#b5a86f", "#7d7c78", "#49536c", "#002b62")
CHANGE = ("#731406", "#b85c28", "#d7a081", "#ebe6e2", "#80b2ca", "#136697", "#022a70")
ZONES = (
    "#481769", "#472f7d", "#404688", "#375b8d", "#2e6e8e", "#27808e", "#20928c", "#20a386",
    "#31b57b", "#52c569", "#7cd250", "#addc30", "#dfe318",
)  # fmt: skip
RATES = (
    "#fcf0a2", "#f8dd79", "#f2c85d", "#eeb555", "#eba453", "#e79452", "#e48351", "#e0724f",
    "#d9604e", "#c7504b", "#ad4746", "#8f403d", "#743830",
)  # fmt: skip
NOTHING = "#ffffff"
MOST_RATE_CLASSES = 6


@dataclass(frozen=True, slots=True)
class Scale:
    """Classes with their colours, labels and signs; ``breaks`` are where a class begins."""

    breaks: tuple[float, ...]
    colours: tuple[str, ...]
    labels: tuple[str, ...]
    signs: tuple[str, ...] = ()

    def classes(self, values: Floats) -> Counts:
        """Class of each value."""
        return np.searchsorted(np.asarray(self.breaks), values, side="right").astype(np.intp)


def spread_over(colours: tuple[str, ...], count: int) -> tuple[str, ...]:
    """``count`` colours evenly apart on a list; a single one comes from its middle."""
    if count == 1:
        return (colours[len(colours) // 2],)
    last = len(colours) - 1
    return tuple(colours[round(place * last / (count - 1))] for place in range(count))


def luminance(colour: str) -> float:
    """Relative luminance of ``#rrggbb`` as WCAG 2 defines it, 0 to 1."""
    parts = [int(colour[at : at + 2], 16) / 255 for at in (1, 3, 5)]
    linear = [v / 12.92 if v <= 0.04045 else ((v + 0.055) / 1.055) ** 2.4 for v in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def ink_on(colour: str) -> str:
    """Black or white, whichever stands out more on a colour."""
    light = luminance(colour) + 0.05
    return "#ffffff" if 1.05 / light > light / 0.05 else "#000000"


def round_step(span: float) -> float:
    """The round number (1, 2, 2.5 or 5 times a power of ten) at or above ``span``."""
    if span <= 0:
        return 1.0
    power = 10.0 ** np.floor(np.log10(span))
    return float(next(m * power for m in (1.0, 2.0, 2.5, 5.0, 10.0) if m * power >= span * 0.999))


def even_scale(values: Floats, colours: tuple[str, ...], *, decimals: int = 1) -> Scale:
    """Classes of round, equal width over the middle 96 % of the values."""
    low, high = (float(v) for v in np.quantile(values, [0.02, 0.98]))
    if high - low <= 1e-9 * max(abs(high), 1.0):
        return Scale((), (colours[1],), (f"{high:.3g} everywhere",))
    step = round_step((high - low) / len(colours))
    first = np.floor(low / step) * step + step
    breaks = tuple(float(round(first + i * step, 6)) for i in range(len(colours) - 1))
    places = max(decimals, int(np.ceil(-np.log10(step) - 1e-9)) if step < 1 else 0)
    if step < 1 and round(step * 10**places) != step * 10**places:
        places += 1
    return Scale(breaks, colours, class_labels(breaks, places))


def fixed_scale(breaks: tuple[float, ...], colours: tuple[str, ...], *, decimals: int) -> Scale:
    """Classes with given breaks."""
    return Scale(breaks, colours, class_labels(breaks, decimals))


def class_labels(breaks: tuple[float, ...], decimals: int) -> tuple[str, ...]:
    """Labels from under the first break to the last break and over."""
    said = [figure(value, decimals) for value in breaks]
    middle = [f"{a} to {b}" for a, b in pairwise(said)]
    return (f"under {said[0]}", *middle, f"{said[-1]} and over")


#: Classes of boron about its own target: shares of the target, then the way to the ceiling.
SHARES = (0.5, 0.7, 0.9, 1.1)


def boron_classes(boron: Floats, target: Floats, ceiling: Floats) -> Counts:
    """Class 0 to 6 of each cell about its own target; 6 is at or over its soil ceiling."""
    share = boron / np.maximum(target, 1e-9)
    classes = np.searchsorted(np.asarray(SHARES), share, side="right")
    halfway = 0.5 * (SHARES[-1] * target + ceiling)
    classes = np.where((classes == 4) & (boron >= halfway), 5, classes)
    return np.where(boron >= ceiling, 6, classes).astype(np.intp)


def boron_scale(target: Floats, ceiling: Floats) -> Scale:
    """The legend of :func:`boron_classes`: in mg/kg where one target holds, else in shares."""
    same = float(np.ptp(target)) < 0.005 and float(np.ptp(ceiling)) < 0.005
    if same:
        aim, most = float(target[0]), float(ceiling[0])
        breaks = (*(share * aim for share in SHARES), 0.5 * (SHARES[-1] * aim + most), most)
        return Scale(breaks, ABOUT_TARGET, class_labels(breaks, 2), ABOUT_TARGET_SIGNS)
    labels = (
        "under 50 % of the target",
        "50 to 70 %",
        "70 to 90 %",
        "90 to 110 %",
        "over 110 %, nearer the target",
        "nearer the soil ceiling",
        "at or over the soil ceiling",
    )
    return Scale(SHARES, ABOUT_TARGET, labels, ABOUT_TARGET_SIGNS)

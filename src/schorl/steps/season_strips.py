"""Check strips for the next prescription: one untreated, one with double the boron.

Without ground that got none, nobody can tell what the boron did. A strip is as wide as the machine
works, runs with the direction of travel and crosses two zones, so that both answer at once.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np
import shapely

from schorl.model.arrays import Floats
from schorl.model.change import CheckStrip, SeasonPack, SeasonZone
from schorl.model.field import Area
from schorl.zoning.travel import axes_of

#: Metres of a strip in each of its two zones, at least and at most (proposals).
LEAST_M, MOST_M = 30.0, 100.0
#: Strips keep this many working widths from each other and from the field's edge.
APART_WIDTHS = 1
#: Less ground than this of another zone under a strip is rounding (a choice).
LEAST_TOUCHED_M2 = 1.0
#: Limits that a doubled rate must keep, by the names zones carry them under.
NO_LIMITS = ("need", "machine", "least rate worth giving")


def check_strips(pack: SeasonPack) -> tuple[CheckStrip, ...]:
    """Propose an untreated and a doubled strip; fewer, or none, where the field has no room.

    The doubled strip gives at most what the zone's own limits (rate cap, absolute limit, chance of
    excess, soil ceiling) leave; where they leave nothing above the zone's rate there is none.
    """
    chosen: list[CheckStrip] = []
    for kind in ("untreated", "doubled"):
        strip = _best(pack, kind, [one.area for one in chosen])
        if strip is not None:
            chosen.append(strip)
    return tuple(chosen)


def _best(pack: SeasonPack, kind: str, taken: list[Area]) -> CheckStrip | None:
    best, longest = None, 0.0
    for area, zones, lengths in _candidates(pack):
        if any(area.distance(one) < APART_WIDTHS * pack.working_width_m for one in taken):
            continue
        doubled = [doubled_kg_ha(zone, beside=_touched(pack, area, zones)) for zone in zones]
        rates = [0.0] * len(zones) if kind == "untreated" else doubled
        if kind == "doubled" and any(
            rate <= zone.boron_kg_ha for rate, zone in zip(rates, zones, strict=True)
        ):
            continue
        if sum(lengths) > longest + 1e-6:
            longest, best = sum(lengths), _strip(kind, area, zones, rates)
    return best


def doubled_kg_ha(zone: SeasonZone, *, beside: Sequence[SeasonZone] = ()) -> float:
    """Twice a zone's boron rate, held to every limit that the zone's own rate was held to.

    ``beside`` are other zones that the strip touches with a side: their limits hold there too.
    """
    limits = [
        value
        for one in (zone, *beside)
        for name, value in one.limits_kg_ha.items()
        if name not in NO_LIMITS
    ]
    return min([2 * zone.boron_kg_ha, *limits])


def _touched(
    pack: SeasonPack, strip: Area, zones: tuple[SeasonZone, ...]
) -> tuple[SeasonZone, ...]:
    """Zones under a strip beside the two it is laid across."""
    numbers = {zone.number for zone in zones}
    others = [zone for zone in pack.zones if zone.number not in numbers]
    return tuple(one for one in others if strip.intersection(one.area).area > LEAST_TOUCHED_M2)


def _strip(kind: str, area: Area, zones: tuple[SeasonZone, ...], rates: list[float]) -> CheckStrip:
    numbers = " and ".join(str(zone.number) for zone in zones)
    if kind == "untreated":
        said = f"no boron in this strip across zones {numbers}"
    else:
        parts = [
            f"{rate:.2f} instead of {zone.boron_kg_ha:.2f} kg B/ha in zone {zone.number}"
            for rate, zone in zip(rates, zones, strict=True)
        ]
        said = "; ".join(parts) + " (twice the rate, held to the zone's limits)"
    return CheckStrip(
        kind=kind, area=area, zones=tuple(zone.number for zone in zones),
        rates_kg_ha=tuple(rates), said=said,
    )  # fmt: skip


def _candidates(
    pack: SeasonPack,
) -> Iterator[tuple[Area, tuple[SeasonZone, ...], tuple[float, ...]]]:
    """Strips across the border of two treated zones, with their metres in each."""
    treated = [zone for zone in pack.zones if zone.boron_kg_ha > 0]
    for place, first in enumerate(treated):
        for second in treated[place + 1 :]:
            yield from _between(pack, first, second)


def _between(
    pack: SeasonPack, first: SeasonZone, second: SeasonZone
) -> Iterator[tuple[Area, tuple[SeasonZone, ...], tuple[float, ...]]]:
    width = pack.working_width_m
    axes = axes_of(pack.heading_deg)
    across = shapely.get_coordinates(pack.boundary) @ axes[0]
    along = shapely.get_coordinates(pack.boundary) @ axes[1]
    inner = pack.boundary.buffer(-APART_WIDTHS * width)
    for middle in np.arange(across.min() + 1.5 * width, across.max() - width, width):
        line = shapely.linestrings(
            [middle * axes[0] + end * axes[1] for end in (along.min() - 1, along.max() + 1)]
        )
        for start, border, end in _stretches(line, first.area, second.area, inner, axes):
            lengths = min(border - start, MOST_M), min(end - border, MOST_M)
            if min(lengths) < LEAST_M:
                continue
            box = _box(middle, border - lengths[0], border + lengths[1], width, axes)
            if _mostly(box, first.area, second.area) and _all_treated(pack, box, (first, second)):
                yield box, (first, second), lengths


def _stretches(
    line: shapely.Geometry, first: Area, second: Area, inner: Area, axes: Floats
) -> Iterator[tuple[float, float, float]]:
    """Where a line leaves one zone straight into the other: start, border and end along it."""

    def spans(area: Area) -> list[tuple[float, float]]:
        pieces = shapely.get_parts(line.intersection(area).intersection(inner))
        ends = [
            np.sort(shapely.get_coordinates(one) @ axes[1])[[0, -1]] for one in pieces if one.length
        ]
        return [(float(low), float(high)) for low, high in ends]

    for low, high in spans(first):
        for start, end in spans(second):
            if abs(high - start) < 1e-3:
                yield low, high, end
            elif abs(end - low) < 1e-3:
                yield start, low, high


def _box(middle: float, low: float, high: float, width: float, axes: Floats) -> Area:
    corners = [
        (middle + side * width / 2) * axes[0] + end * axes[1]
        for side, end in ((-1, low), (1, low), (1, high), (-1, high))
    ]
    return shapely.Polygon(corners)


def _mostly(box: Area, first: Area, second: Area) -> bool:
    """Whether nine tenths of a strip lie in its two zones: its sides may touch a third."""
    shared = box.intersection(first).area + box.intersection(second).area
    return bool(shared >= 0.9 * box.area)


def _all_treated(pack: SeasonPack, box: Area, zones: tuple[SeasonZone, ...]) -> bool:
    """Whether a strip keeps clear of ground that gets none: keep-off areas and hot spots."""
    return all(one.boron_kg_ha > 0 for one in _touched(pack, box, zones))

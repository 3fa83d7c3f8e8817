"""Checks on samples against their field: all findings at once, each with place, value, way out."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import shapely

from schorl.findings import Finding, finding
from schorl.geodesy import WGS84, transform_points
from schorl.model.field import Field
from schorl.model.samples import Measured, SampleSet

SAME_PLACE_M = 0.5
NEAR_OUTSIDE_M = 30.0
FEW, VERY_FEW = 15, 4
BOUNDS = {
    "boron": (0.0, 20.0),
    "organic_matter": (0.0, 100.0),
    "clay": (0.0, 100.0),
    "sand": (0.0, 100.0),
    "ph": (2.5, 11.5),
    "bulk_density": (0.05, 2.65),
    "stones": (0.0, 95.0),
}
DECIMAL_PLACE = 8.0  # a value this many times off the middle looks like a slipped decimal point
#: Middle of a field's values outside which another unit or exchanged columns are likely.
LIKELY = {"boron": (0.12, 4.0), "organic_matter": (0.5, 15.0), "clay": (3.0, 65.0)}
USUAL_BORON = (0.02, 8.0)  # median of a field, mg/kg


def check_samples(
    samples: SampleSet, field: Field, *, confirmed: tuple[str, ...] = ()
) -> tuple[Finding, ...]:
    """Everything that can be wrong with samples that were read without error."""
    return tuple(
        one
        for part in (
            _outside(samples, field),
            _duplicates(samples),
            _missing(samples),
            _impossible(samples),
            _nought(samples),
            _slipped(samples, confirmed),
            _unit_mixed_up(samples),
            _few(samples),
            _layout(samples, field),
            _overlapping(samples),
        )
        for one in part
    )


def _where(samples: SampleSet, place: int) -> str:
    return f"{samples.source}, sample {samples.ids[place]}"


def _outside(samples: SampleSet, field: Field) -> Iterator[Finding]:
    points = shapely.points(samples.east_north_m)
    gap = shapely.distance(field.boundary, points)
    away = np.flatnonzero(gap > NEAR_OUTSIDE_M)
    if len(away) > len(samples) / 2:
        yield _all_outside(samples, field, gap)
        return
    for place in np.flatnonzero(gap > 0.5):
        code = "IN-OUTSIDE" if gap[place] > NEAR_OUTSIDE_M else "IN-EDGE"
        what = f"it lies {gap[place]:.0f} m outside the field"
        yield finding(code, where=_where(samples, int(place)), what=what)


def _all_outside(samples: SampleSet, field: Field, gap: np.ndarray) -> Finding:
    swapped = _inside_when_swapped(samples, field)
    count = int((gap > NEAR_OUTSIDE_M).sum())
    what = f"{count} of {len(samples)} samples lie outside the field, {np.median(gap) / 1000:.1f} km away"
    if swapped:
        return finding(
            "IN-SWAPPED",
            where=samples.source,
            what=f"{what}; with their coordinates swapped they lie inside",
        )
    return finding("IN-ELSEWHERE", where=samples.source, what=what)


def _inside_when_swapped(samples: SampleSet, field: Field) -> bool:
    degrees = transform_points(samples.east_north_m, source=field.crs, target=WGS84)
    swapped = degrees[:, ::-1]
    if not np.isfinite(swapped).all() or (np.abs(swapped[:, 1]) > 90).any():
        return False
    back = transform_points(swapped, source=WGS84, target=field.crs)
    if not np.isfinite(back).all():
        return False
    inside = shapely.contains_xy(field.boundary, back[:, 0], back[:, 1])
    return bool(inside.mean() > 0.5)


def _duplicates(samples: SampleSet) -> Iterator[Finding]:
    from scipy.spatial import cKDTree

    pairs = sorted(cKDTree(samples.east_north_m).query_pairs(SAME_PLACE_M))
    for first, second in pairs[:20]:
        if samples.kind[first] == "zone":
            continue
        what = f"it lies at the place of sample {samples.ids[first]}"
        yield finding("IN-DUPLICATE", where=_where(samples, second), what=what)


def _missing(samples: SampleSet) -> Iterator[Finding]:
    for name, one in samples.properties.items():
        gone = np.flatnonzero(~one.known)
        if len(gone):
            names = ", ".join(samples.ids[place] for place in gone[:6])
            words = name.replace("_", " ")
            what = f"no {words} in {len(gone)} of {len(samples)} samples: {names}"
            yield finding("IN-MISSING", where=samples.source, what=what)


def _impossible(samples: SampleSet) -> Iterator[Finding]:
    for name, one in samples.properties.items():
        if name not in BOUNDS:
            continue
        low, high = BOUNDS[name]
        bad = one.known & ((one.values < low) | (one.values > high))
        for place in np.flatnonzero(bad)[:20]:
            words = name.replace("_", " ")
            what = f"{words} {one.values[place]:g} is outside {low:g} to {high:g}"
            yield finding("IN-IMPOSSIBLE", where=_where(samples, int(place)), what=what)
    both = [samples.properties.get(name) for name in ("clay", "sand")]
    if both[0] is not None and both[1] is not None:
        total = both[0].values + both[1].values
        for place in np.flatnonzero(total > 101.0)[:5]:
            what = f"clay and sand together are {total[place]:.0f} %"
            yield finding("IN-IMPOSSIBLE", where=_where(samples, int(place)), what=what)


def _nought(samples: SampleSet) -> Iterator[Finding]:
    """A laboratory reports below a limit, not 0: a 0 is a missing value or one below a limit."""
    for name in ("boron", "organic_matter", "clay"):
        one = samples.properties.get(name)
        if one is None:
            continue
        for place in np.flatnonzero(one.known & (one.values == 0))[:20]:
            what = f"{name.replace('_', ' ')} is 0"
            yield finding("IN-NOUGHT", where=_where(samples, int(place)), what=what)


def _slipped(samples: SampleSet, confirmed: tuple[str, ...]) -> Iterator[Finding]:
    for name in ("boron", "organic_matter", "clay"):
        one = samples.properties.get(name)
        if one is None:
            continue
        sure = one.known & ~one.below_limit & (one.values > 0)
        if sure.sum() < VERY_FEW:
            continue
        middle = float(np.median(one.values[sure]))
        logs = np.log(one.values[sure] / middle)
        spread = 1.4826 * float(np.median(np.abs(logs)))
        limit = float(np.clip(np.exp(5.0 * spread), DECIMAL_PLACE / 2, DECIMAL_PLACE))
        ratio = one.values / middle
        odd = sure & ((ratio > limit) | (ratio < 1.0 / limit))
        for place in np.flatnonzero(odd):
            if samples.ids[place] in confirmed:
                continue
            words = name.replace("_", " ")
            what = f"{words} {one.values[place]:g} against {middle:.3g} in the middle of the field"
            yield finding("IN-SLIP", where=_where(samples, int(place)), what=what)


def _unit_mixed_up(samples: SampleSet) -> Iterator[Finding]:
    boron = samples.properties.get("boron")
    if boron is not None and boron.known.any():
        middle = float(np.nanmedian(boron.values))
        low, high = USUAL_BORON
        if middle > 0 and not low <= middle <= high:
            what = (
                f"boron is {middle:.3g} mg/kg in the middle; fields lie within {low:g} to {high:g}"
            )
            yield finding("IN-UNIT-ODD", where=samples.source, what=what)
    for name, (low, high) in LIKELY.items():
        likely = samples.properties.get(name)
        if likely is None or not likely.known.any():
            continue
        middle = float(np.nanmedian(likely.values))
        if middle > 0 and not low <= middle <= high:
            what = (
                f"{name.replace('_', ' ')} is {middle:.3g} in the middle, read as "
                f"{likely.unit_read}; fields mostly lie within {low:g} to {high:g}"
            )
            yield finding("IN-UNIT-LIKELY", where=samples.source, what=what)
    for name, most in (("organic_matter", 60.0), ("clay", 90.0)):
        one: Measured | None = samples.properties.get(name)
        if one is None or not one.known.any():
            continue
        middle = float(np.nanmedian(one.values))
        words = name.replace("_", " ")
        if middle > most:
            what = f"{words} is {middle:.0f} % in the middle: it may be g/kg"
            yield finding("IN-UNIT-ODD", where=samples.source, what=what)
        if name == "clay" and 0 < middle < 1.0:
            what = f"clay is {middle:.2g} % in the middle: it may be a share of one"
            yield finding("IN-UNIT-ODD", where=samples.source, what=what)


def _few(samples: SampleSet) -> Iterator[Finding]:
    boron = samples.properties.get("boron")
    count = int(boron.known.sum()) if boron is not None else 0
    if count < VERY_FEW:
        what = f"{count} samples with boron; at least {VERY_FEW} are needed to say anything"
        yield finding("IN-TOO-FEW", where=samples.source, what=what)
    elif count < FEW and not samples.zone_samples:
        what = f"{count} samples with boron: enough for a flat rate, hardly for a map"
        yield finding("IN-FEW", where=samples.source, what=what)


def _layout(samples: SampleSet, field: Field) -> Iterator[Finding]:
    if len(samples) < VERY_FEW or samples.zone_samples:
        return
    centred = samples.east_north_m - samples.east_north_m.mean(axis=0)
    spread = np.linalg.svd(centred, compute_uv=False)
    if spread[0] < SAME_PLACE_M:
        yield finding("IN-ONE-PLACE", where=samples.source, what="all samples lie in one place")
        return
    if spread[1] < 0.02 * spread[0]:
        yield finding("IN-LINE", where=samples.source, what="all samples lie on one line")
        return
    hull = shapely.convex_hull(shapely.multipoints(samples.east_north_m))
    share = hull.area / field.boundary.area
    if share < 0.3:
        what = (
            f"the samples enclose {100 * share:.0f} % of the field; the rest is guessed from afar"
        )
        yield finding("IN-CORNER", where=samples.source, what=what)


def _overlapping(samples: SampleSet) -> Iterator[Finding]:
    areas = [(place, one) for place, one in enumerate(samples.areas) if one is not None]
    for index, (place, one) in enumerate(areas):
        for other_place, other in areas[index + 1 :]:
            shared = shapely.intersection(one, other).area
            if shared > 0.1 * min(one.area, other.area):
                what = f"its zone overlaps that of sample {samples.ids[place]} by {shared:.0f} m²"
                yield finding("IN-OVERLAP", where=_where(samples, other_place), what=what)

"""Is a change real: the field's mean, each zone's mean, and the laboratory's part in it.

Tests of zone means: paired t at revisited sites, Welch's t at new ones, the normal test with the
known error of a composite where a zone has one sample; Holm's correction over the zones (Holm
1979, Scand. J. Stat. 6:65-70).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy import stats

from schorl.model.arrays import Floats
from schorl.model.change import Shift, ZoneChange

ALPHA, POWER = 0.05, 0.80
LEAST_PAIRS, LEAST_NEW = 3, 4
#: A shift warns above this share of the earlier mean and this many SDs of the earlier samples.
SHIFT_RELATIVE, SHIFT_SD = 0.20, 1.0
NAN = float("nan")


@dataclass(frozen=True, kw_only=True)
class MeanChange:
    """A mean change with its 95 % interval, two-sided p and standard error."""

    change: float
    low: float
    high: float
    p: float
    error: float


def paired_change(change: Floats, *, known_error: float | None = None) -> MeanChange:
    """Mean of differences ``(n,)``: paired t, or normal with a known standard error of one."""
    mean, count = float(change.mean()), len(change)
    if known_error is not None:
        return _interval(mean, known_error / np.sqrt(count), None)
    return _interval(mean, float(change.std(ddof=1)) / np.sqrt(count), count - 1)


def new_sites_change(before: Floats, after: Floats) -> MeanChange:
    """Difference of two means, Welch's t (Welch 1947, Biometrika 34:28-35)."""
    first, second = before.var(ddof=1) / len(before), after.var(ddof=1) / len(after)
    error = float(np.sqrt(first + second))
    freedom = 1.0
    if error > 0:
        freedom = (first + second) ** 2 / (
            first**2 / (len(before) - 1) + second**2 / (len(after) - 1)
        )
    return _interval(float(after.mean() - before.mean()), error, freedom)


def _interval(mean: float, error: float, freedom: float | None) -> MeanChange:
    law = stats.norm if freedom is None else stats.t(freedom)
    reach = float(law.ppf(1 - ALPHA / 2) * error)
    still = 1.0 if mean == 0 else 0.0
    p = 2 * float(law.sf(abs(mean) / error)) if error > 0 else still
    return MeanChange(change=mean, low=mean - reach, high=mean + reach, p=p, error=float(error))


def least_detectable(error: float) -> float:
    """Change that a test with this standard error finds four times in five (normal law)."""
    return float((stats.norm.ppf(1 - ALPHA / 2) + stats.norm.ppf(POWER)) * error)


def holm(p: Sequence[float]) -> Floats:
    """Holm's adjusted p-values, in the order given (Holm 1979)."""
    values = np.asarray(p, dtype=np.float64)
    order = np.argsort(values, kind="stable")
    steps = values[order] * (len(values) - np.arange(len(values)))
    adjusted = np.empty(len(values))
    adjusted[order] = np.minimum(np.maximum.accumulate(steps), 1.0)
    return adjusted


def field_shift(before: Floats, after: Floats, *, paired: bool) -> Shift | None:
    """Change of the field's mean and whether it is too large to be the soil's; None for too few.

    ``before`` and ``after`` are pairs site by site where ``paired``.
    """
    least = LEAST_PAIRS if paired else LEAST_NEW
    if min(len(before), len(after)) < least:
        return None
    found = paired_change(after - before) if paired else new_sites_change(before, after)
    level, spread = float(before.mean()), float(before.std(ddof=1))
    relative = found.change / level if level else NAN
    in_sd = found.change / spread if spread else (0.0 if found.change == 0 else float("inf"))
    jumped = (
        abs(relative) > SHIFT_RELATIVE
        and abs(in_sd) > SHIFT_SD
        and not found.low <= 0.0 <= found.high
    )
    return Shift(
        mean=found.change, low=found.low, high=found.high, relative=relative, in_sd=in_sd,
        sites=len(before), correlation=_correlation(before, after) if paired else NAN,
        concordance=concordance(before, after) if paired else NAN,
        warning=_warning(relative, in_sd) if jumped else "",
    )  # fmt: skip


def _warning(relative: float, in_sd: float) -> str:
    turn = "up" if relative > 0 else "down"
    return (
        f"the whole field went {turn} by {100 * abs(relative):.0f} % ({abs(in_sd):.1f} standard deviations "
        "of the earlier samples): soils hardly do that; laboratory, method, depth or time of "
        "sampling may have moved instead"
    )


def _correlation(before: Floats, after: Floats) -> float:
    if before.std() == 0 or after.std() == 0:
        return NAN
    return float(np.corrcoef(before, after)[0, 1])


def concordance(before: Floats, after: Floats) -> float:
    """Lin's concordance correlation coefficient (Lin 1989, Biometrics 45:255-268).

    Variances with n, as in the paper; 1 for equal values.
    """
    shared = float(np.mean((before - before.mean()) * (after - after.mean())))
    whole = float(before.var() + after.var() + (before.mean() - after.mean()) ** 2)
    return 1.0 if whole == 0 else 2 * shared / whole


@dataclass(frozen=True, kw_only=True)
class ZoneData:
    """Boron of one zone in both seasons; pairs site by site where ``paired``.

    ``composite_error`` is the standard error of the difference of two composites, for zones that
    have one sample each.
    """

    zone: int
    before: Floats
    after: Floats
    paired: bool
    composite_error: float | None = None


def zone_changes(data: Sequence[ZoneData], *, doubted: bool) -> tuple[ZoneChange, ...]:
    """Test every zone that has enough samples; none is called real where the shift is doubted."""
    tested = [_tested(one) for one in data]
    known = [found.p for found, _ in tested if found is not None]
    adjusted: Iterator[float] = iter(holm(known)) if known else iter(())
    rows = []
    for one, (found, test) in zip(data, tested, strict=True):
        rows.append(_row(one, found, test, adjusted=adjusted, doubted=doubted))
    return tuple(rows)


def _tested(one: ZoneData) -> tuple[MeanChange | None, str]:
    if one.paired and len(one.before) >= LEAST_PAIRS:
        return paired_change(one.after - one.before), "same sites"
    if one.paired and len(one.before) and one.composite_error is not None:
        found = paired_change(one.after - one.before, known_error=one.composite_error)
        return found, "one composite each"
    if not one.paired and min(len(one.before), len(one.after)) >= LEAST_NEW:
        return new_sites_change(one.before, one.after), "new sites"
    return None, "too few samples"


def _row(
    one: ZoneData, found: MeanChange | None, test: str, *, adjusted: Iterator[float], doubted: bool
) -> ZoneChange:
    means: dict[str, Any] = {
        "before": float(one.before.mean()) if len(one.before) else NAN,
        "after": float(one.after.mean()) if len(one.after) else NAN,
        "samples": len(one.after),
        "test": test,
        "zone": one.zone,
    }
    if found is None:
        return ZoneChange(
            **means, change=NAN, low=NAN, high=NAN, p=NAN, p_adjusted=NAN, real=False,
            least_detectable=NAN,
        )  # fmt: skip
    p_adjusted = float(next(adjusted))
    return ZoneChange(
        **means, change=found.change, low=found.low, high=found.high, p=found.p,
        p_adjusted=p_adjusted, real=bool(p_adjusted <= ALPHA) and not doubted,
        least_detectable=least_detectable(found.error),
    )  # fmt: skip

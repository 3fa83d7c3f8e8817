"""What a comparison says in tables: rows for the page, lines for the terminal."""

from __future__ import annotations

import math
import textwrap

from schorl.model.change import SeasonChange, ZoneChange
from schorl.report.shown import UNKNOWN, figure
from schorl.report.words import WIDTH


def signed(value: float, decimals: int = 2) -> str:
    """A change with its sign; a dash where it is not known.

    >>> signed(0.125), signed(float("nan"))
    ('+0.12', '–')
    """
    return f"{value:+.{decimals}f}" if math.isfinite(value) else UNKNOWN


def interval(low: float, high: float, decimals: int = 2) -> str:
    """Both ends of an interval."""
    if not (math.isfinite(low) and math.isfinite(high)):
        return UNKNOWN
    return f"{signed(low, decimals)} to {signed(high, decimals)}"


def verdict(one: ZoneChange) -> str:
    """Whether a zone's change is real, in a word or two."""
    if not math.isfinite(one.p_adjusted):
        return one.test
    return "real" if one.real else "noise"


def zone_rows(change: SeasonChange) -> list[list[str]]:
    """One row a zone: means, change, verdict, interval, adjusted p, least change that would show."""
    return [
        [
            str(one.zone), figure(one.before, 2), figure(one.after, 2), signed(one.change),
            verdict(one), interval(one.low, one.high), _p(one.p_adjusted),
            figure(one.least_detectable, 2), f"{one.samples}, {one.test}",
        ]
        for one in change.zones
    ]  # fmt: skip


def _p(value: float) -> str:
    if not math.isfinite(value):
        return UNKNOWN
    return "<0.001" if value < 0.001 else f"{value:.3f}"


def balance_rows(change: SeasonChange) -> list[list[str]]:
    """One row a zone: prescribed, given, taken away, change in the soil, apparent recovery."""
    earlier = min((change.before, change.after), key=lambda one: one.when)
    prescribed = {zone.number: zone.boron_kg_ha for zone in earlier.zones}
    return [
        [
            str(one.zone), figure(prescribed[one.zone], 2), figure(one.applied, 2), figure(one.removed, 2), signed(one.change),
            interval(one.change_low, one.change_high), percent_of(one.recovery),
            _share_interval(one.recovery_low, one.recovery_high),
        ]
        for one in change.balance
    ]  # fmt: skip


def percent_of(share: float) -> str:
    """A share that may be negative or above one."""
    return f"{100 * share:.0f} %" if math.isfinite(share) else UNKNOWN


def _share_interval(low: float, high: float) -> str:
    if not (math.isfinite(low) and math.isfinite(high)):
        return UNKNOWN
    return f"{100 * low:.0f} to {100 * high:.0f} %"


def rate_rows(change: SeasonChange) -> list[list[str]]:
    """One row a zone: its number in both seasons and both rates."""
    rows = []
    for one in change.rates:
        both = one.after_kg_ha - one.before_kg_ha
        rows.append(
            [
                UNKNOWN if one.zone_before is None else str(one.zone_before),
                UNKNOWN if one.zone_after is None else str(one.zone_after),
                figure(one.before_kg_ha, 2), figure(one.after_kg_ha, 2), signed(both),
            ]
        )  # fmt: skip
    return rows


def change_table(change: SeasonChange) -> str:
    """What a comparison came to, in at most 80 columns, for the terminal."""
    head = (
        f"{change.after.field_name}: {change.before.season} to {change.after.season}, "
        f"{change.common_ha:.2f} ha, {len(change.pairs)} sites in both"
    )
    lines = [head[:WIDTH], *textwrap.wrap(change.text, WIDTH)]
    if change.zones:
        layout = "{:>4} {:>7} {:>7} {:>7} {:>16} {:>8}  {}"
        lines += ["", layout.format("zone", "before", "after", "change", "95 %", "p", "it is")]
        lines += [
            layout.format(zone, before, after, moved, held, p, said).rstrip()
            for zone, before, after, moved, said, held, p, *_ in zone_rows(change)
        ]
        lines.append("boron in mg/kg; p by Holm's correction over the zones")
    return "\n".join(lines)

"""What two seasons say, in one paragraph of plain words: real, noise, to do."""

from __future__ import annotations

import numpy as np

from schorl.model.change import SeasonChange, ZoneChange
from schorl.steps.season_zones import LEAST_MOVED_HA

#: Why two packs of one campaign are not subtracted.
SAME_SAMPLES = "both packs rest on the same samples"


def in_words(change: SeasonChange) -> str:
    """One paragraph: the field, the zones, the boron given, and what to do next."""
    if change.same:
        return (
            f"Both packs are the same ({change.before.season}): there is nothing to compare, and "
            "nothing is shown as changed."
        )
    said = [_field(change), _zones(change), _ground(change), _recovery(change), _next(change)]
    return " ".join(one for one in said if one)


def per_cent(share: float) -> str:
    """A share as a whole per cent."""
    return f"{100 * share:.0f} %"


def _seasons(change: SeasonChange) -> str:
    return f"From {change.before.season} to {change.after.season}"


def _field(change: SeasonChange) -> str:
    if change.refused:
        return (
            f"The soil tests of {change.before.season} and {change.after.season} cannot be "
            f"subtracted: {change.refused}. Only zones and rates are compared."
        )
    shift = change.shift
    if shift is None:
        return "There are too few boron values to say whether the field changed."
    if shift.warning:
        return f"{_seasons(change)} {shift.warning}. No change of a zone is called real."
    size = f"{shift.mean:+.2f} mg/kg (95 % between {shift.low:+.2f} and {shift.high:+.2f})"
    if shift.low <= 0 <= shift.high:
        return f"{_seasons(change)} the field as a whole did not change by more than noise: {size}."
    return f"{_seasons(change)} mean boron changed by {size} over the whole field."


def _zones(change: SeasonChange) -> str:
    if change.refused or (change.shift is not None and change.shift.warning):
        return ""
    tested = [one for one in change.zones if np.isfinite(one.p_adjusted)]
    if not tested:
        return "No zone has enough samples in both seasons for a test of its own."
    real = [one for one in tested if one.real]
    least = (
        f"a change under about {change.least_detectable_mg_kg:.2f} mg/kg in one zone would not show"
    )
    if not real:
        return f"No zone's change stands out from noise; {least}."
    rest = len(tested) - len(real)
    others = (
        f" The other {'zone' if rest == 1 else f'{rest} zones'}: noise; {least}." if rest else ""
    )
    return "Real: " + "; ".join(_zone(one) for one in real) + "." + others


def _zone(one: ZoneChange) -> str:
    turn = "gained" if one.change > 0 else "lost"
    return (
        f"zone {one.zone} {turn} {abs(one.change):.2f} mg/kg "
        f"({one.before:.2f} to {one.after:.2f}, 95 % between {one.low:+.2f} and {one.high:+.2f})"
    )


def _ground(change: SeasonChange) -> str:
    moved = change.moved
    if moved.moved_ha < LEAST_MOVED_HA:
        return "The zones lie where they lay."
    share = per_cent(moved.moved_ha / change.common_ha)
    said = f"{moved.moved_ha:.1f} ha ({share}) lie in another zone than before"
    chance = moved.by_chance[0]
    if np.isfinite(chance):
        if moved.kappa >= chance - 0.1:
            said += ", about what sampling again would move by itself"
        else:
            said += f", more than sampling again would move by itself (kappa {moved.kappa:.2f} against {chance:.2f})"
    return said + "."


def _recovery(change: SeasonChange) -> str:
    known = [one for one in change.balance if np.isfinite(one.recovery)]
    if not known or (change.shift is not None and change.shift.warning):
        return ""
    said = []
    for one in known:
        if one.recovery_low <= 0 <= one.recovery_high and one.recovery_high >= 1:
            said.append(f"zone {one.zone}: cannot be told")
        else:
            said.append(
                f"zone {one.zone}: {per_cent(one.recovery)} ({100 * one.recovery_low:.0f} to "
                f"{per_cent(one.recovery_high)})"
            )
    earlier = min((change.before, change.after), key=lambda one: one.when)
    given = "prescribed" if earlier.applied is None else "logged as given"
    return f"Of the boron {given}, the next test shows: " + "; ".join(said) + "."


def _next(change: SeasonChange) -> str:
    if change.refused:
        if change.refused == SAME_SAMPLES:
            return "Compare packs of two sampling campaigns to learn what changed."
        return "Sample both seasons alike (method, depth) to learn what changed."
    if change.shift is not None and change.shift.warning:
        return (
            "To do: have kept samples of the earlier season analysed again beside new ones before "
            "any rate is changed on this."
        )
    said = f"To do: {_zones_next(change)}"
    if change.strips:
        said += f"; leave {_strips(change)} so that next season can tell what the boron did"
    if change.revisit:
        said += f"; sample the {len(change.revisit)} listed sites again"
    return said + "."


def _zones_next(change: SeasonChange) -> str:
    """Whether last season's zones still serve: they do until a zone has really changed."""
    earlier, later = sorted((change.before, change.after), key=lambda one: one.when)
    if not any(one.real for one in change.zones):
        return f"keep the zones of {earlier.season} and renew their rates"
    if change.moved.moved_ha < LEAST_MOVED_HA:
        return "draw the zones anew, since some really changed"
    return f"go on with the zones of {later.season}, since some zones really changed"


def _strips(change: SeasonChange) -> str:
    kinds = [one.kind for one in change.strips]
    words = {"untreated": "one strip untreated", "doubled": "one with double the boron"}
    return " and ".join(words[kind] for kind in kinds)

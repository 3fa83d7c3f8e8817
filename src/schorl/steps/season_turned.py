"""A comparison seen from its other end."""

from __future__ import annotations

from dataclasses import replace

from schorl.model.change import (
    ChangeMap,
    Moved,
    RateChange,
    SeasonChange,
    Shift,
    SitePairs,
    ZoneChange,
    ZonesMoved,
)


def turned(change: SeasonChange) -> SeasonChange:
    """The same comparison with its seasons named in the other order: every change the other way.

    Balance, check strips and sites to revisit stay: they follow the calendar, not the order the
    seasons are named in.
    """
    from schorl.steps.season_words import in_words

    again = replace(
        change,
        before=change.after,
        after=change.before,
        pairs=_pairs(change.pairs),
        shift=None if change.shift is None else _shift(change.shift),
        zones=tuple(_zone(one) for one in change.zones),
        change_map=None if change.change_map is None else _map(change.change_map),
        moved=_moved(change.moved),
        rates=tuple(_rate(one) for one in change.rates),
    )
    return replace(again, text=in_words(again))


def _pairs(pairs: SitePairs) -> SitePairs:
    return replace(
        pairs, before=pairs.after, after=pairs.before, before_mg_kg=pairs.after_mg_kg,
        after_mg_kg=pairs.before_mg_kg,
    )  # fmt: skip


def _shift(shift: Shift) -> Shift:
    """Shares and SDs stay those of the earlier season: a warning must not depend on the order."""
    return replace(
        shift, mean=-shift.mean, low=-shift.high, high=-shift.low, relative=-shift.relative,
        in_sd=-shift.in_sd,
    )  # fmt: skip


def _zone(one: ZoneChange) -> ZoneChange:
    return replace(
        one, before=one.after, after=one.before, change=-one.change, low=-one.high, high=-one.low
    )


def _map(mapped: ChangeMap) -> ChangeMap:
    return replace(mapped, change_mg_kg=-mapped.change_mg_kg)


def _moved(moved: ZonesMoved) -> ZonesMoved:
    return replace(
        moved,
        before=moved.after,
        after=moved.before,
        transition_ha=moved.transition_ha.T,
        moved=tuple(_ground(one) for one in moved.moved),
    )


def _ground(one: Moved) -> Moved:
    return replace(one, before=one.after, after=one.before)


def _rate(one: RateChange) -> RateChange:
    return replace(
        one, zone_before=one.zone_after, zone_after=one.zone_before,
        before_kg_ha=one.after_kg_ha, after_kg_ha=one.before_kg_ha,
    )  # fmt: skip

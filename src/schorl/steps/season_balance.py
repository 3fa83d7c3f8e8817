"""Boron given, taken away and found again, zone by zone."""

from __future__ import annotations

import math

import shapely

from schorl.agronomy.tables import limit
from schorl.model.change import SeasonPack, SeasonZone, ZoneBalance, ZoneChange

NAN = float("nan")


def balances(
    before: SeasonPack, changes: tuple[ZoneChange, ...], *, removed_kg_ha: float | None
) -> tuple[ZoneBalance, ...]:
    """The balance of every zone of the earlier season.

    Change in the test times the soil's mass is boron found in the soil; with what the crop took
    away, over what was given, it is the apparent recovery. Its interval is that of the change: what
    leached, was fixed or came from below is in it too, so it says little of any single cause.
    """
    of_zone = {one.zone: one for one in changes}
    removed = NAN if removed_kg_ha is None else removed_kg_ha
    return tuple(
        _balance(zone, of_zone.get(zone.number), given_kg_ha(before, zone), removed)
        for zone in before.zones
    )


def given_kg_ha(before: SeasonPack, zone: SeasonZone) -> float:
    """Boron that a zone got, kg/ha: as applied where that is known, else as prescribed."""
    applied = before.applied
    if applied is None:
        return zone.boron_kg_ha
    if not applied.areas:
        return applied.kg_ha
    shapely.prepare(zone.area)
    shared = shapely.area(shapely.intersection([area for area, _ in applied.areas], zone.area))
    rates = [rate for _, rate in applied.areas]
    return float(shared @ rates) / zone.area.area if zone.area.area else NAN


def _balance(
    zone: SeasonZone, change: ZoneChange | None, applied: float, removed: float
) -> ZoneBalance:
    mass = NAN if zone.soil_mass is None else zone.soil_mass
    found = [NAN] * 3
    if change is not None:
        found = [one * mass for one in (change.change, change.low, change.high)]
    taken = 0.0 if math.isnan(removed) else removed
    enough = applied >= limit("recovery-least")
    recovery = [(one + taken) / applied if enough else NAN for one in found]
    return ZoneBalance(
        zone=zone.number, applied=applied, removed=removed,
        change=found[0], change_low=found[1], change_high=found[2],
        recovery=recovery[0], recovery_low=recovery[1], recovery_high=recovery[2],
    )  # fmt: skip

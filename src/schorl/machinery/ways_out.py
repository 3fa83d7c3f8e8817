"""Ways out when zones ask for more difference than a machine can make in one pass.

In a fixed order, each with the boron that is then missing and the ground it concerns: two passes,
the lowest zones at 0, two rates, a tank for each rate. None gives any zone more than it was to get.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from schorl.machinery.saying import Saying
from schorl.model.arrays import Floats

EDGE = 1e-9


@dataclass(frozen=True, slots=True, kw_only=True)
class WayOut:
    """One way: boron not given and the hectares it concerns.

    ``rates_kg_ha`` are the rates of the zones in their order. ``ha`` is ground driven twice (two
    passes), left without or with less boron (lowest at 0, two rates), or sprayed from tanks mixed
    apart (a tank for each rate).
    """

    name: str
    rates_kg_ha: tuple[float, ...]
    short_kg: float
    ha: float
    tanks: int = 1


def ways_out(doses: Sequence[tuple[float, float]], turndown: float) -> tuple[WayOut, ...]:
    """The four ways for zones given as (area ha, boron kg/ha) and a machine's highest over lowest.

    Empty where one pass can do them all.
    """
    area = np.array([one for one, _ in doses])
    wanted = np.array([rate for _, rate in doses])
    treated = wanted > 0
    if not treated.any() or wanted.max() <= wanted[treated].min() * turndown * (1.0 + EDGE):
        return ()
    return (
        _two_passes(area, wanted, turndown),
        _lowest_at_zero(area, wanted, turndown),
        _two_rates(area, wanted, turndown),
        _tank_per_rate(area, wanted),
    )


def _way(name: str, area: Floats, wanted: Floats, given: Floats) -> WayOut:
    short = wanted - given
    return WayOut(
        name=name,
        rates_kg_ha=tuple(float(rate) for rate in given),
        short_kg=float((area * short).sum()),
        ha=float(area[short > EDGE].sum()),
    )


def _two_passes(area: Floats, wanted: Floats, turndown: float) -> WayOut:
    """The lowest zone sets the mix; zones above one pass get two of them."""
    low = float(wanted[wanted > 0].min())
    high = low * turndown
    twice = wanted > high * (1.0 + EDGE)
    # Two passes give at least twice the least: between, one full pass is all there is.
    two = np.where(wanted < 2.0 * low, high, np.minimum(wanted, 2.0 * high))
    given = np.where(twice, two, wanted)
    way = _way("two passes", area, wanted, given)
    driven = float(area[twice & (given > high)].sum())
    return WayOut(name=way.name, rates_kg_ha=way.rates_kg_ha, short_kg=way.short_kg, ha=driven)


def _lowest_at_zero(area: Floats, wanted: Floats, turndown: float) -> WayOut:
    given = np.where(wanted * turndown * (1.0 + EDGE) < wanted.max(), 0.0, wanted)
    return _way("lowest zones at 0", area, wanted, given)


def _two_rates(area: Floats, wanted: Floats, turndown: float) -> WayOut:
    """The two of the wanted rates that leave least boron ungiven, no zone above its own."""
    rates = np.unique(wanted[wanted > 0])
    best: WayOut | None = None
    for place, low in enumerate(rates):
        for high in rates[place:]:
            top = min(high, low * turndown)
            given = np.where(wanted >= top, top, np.where(wanted >= low, low, 0.0))
            way = _way("two rates", area, wanted, given)
            if best is None or way.short_kg < best.short_kg - EDGE:
                best = way
    assert best is not None
    return best


def _tank_per_rate(area: Floats, wanted: Floats) -> WayOut:
    """Every rate from its own mix at one volume: nothing is missing, tanks are mixed apart."""
    treated = wanted > 0
    return WayOut(
        name="a tank for each rate",
        rates_kg_ha=tuple(float(rate) for rate in wanted),
        short_kg=0.0,
        ha=float(area[treated].sum()),
        tanks=len(np.unique(np.round(wanted[treated], 9))),
    )


def ways_words(ways: Sequence[WayOut], saying: Saying) -> tuple[str, ...]:
    """One sentence a way, in order."""
    said = []
    for place, way in enumerate(ways, start=1):
        short = f"{saying.boron(way.short_kg)} not given"
        ground = saying.area(way.ha)
        cost = {
            "two passes": f"{ground} driven twice, {short}",
            "lowest zones at 0": f"{ground} untreated, {short}",
            "two rates": f"{ground} with less than its rate, {short}",
            "a tank for each rate": f"{way.tanks} mixes on {ground}, {short}",
        }[way.name]
        said.append(f"Way out {place}, {way.name}: {cost}.")
    return tuple(said)

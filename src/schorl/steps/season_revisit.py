"""Sites to sample again, so that next season's change can be told from noise."""

from __future__ import annotations

import numpy as np

from schorl.agronomy.tables import limit
from schorl.model.arrays import Counts, Floats
from schorl.model.change import RevisitSite, SeasonPack
from schorl.steps.season_sites import ZONE, measured, zone_places
from schorl.steps.season_tests import ALPHA, POWER

LEAST_A_ZONE, MOST_A_ZONE = 3, 12


def revisit_sites(pack: SeasonPack, *, sd_of_change: float) -> tuple[RevisitSite, ...]:
    """Choose existing sites of every zone, spread over it, enough to see a change worth seeing.

    Parameters
    ----------
    sd_of_change
        Standard deviation of the difference at one site, mg/kg; NaN where it is not known yet.

    The number a zone follows from the power of a paired test (80 % at 5 %), 3 to 12; the first
    site is the one nearest the zone's middle, each next the one farthest from those chosen.
    """
    wanted = sites_wanted(sd_of_change)
    known = np.flatnonzero(measured(pack.samples))
    of_site = zone_places(pack, pack.samples.east_north_m)
    chosen: list[RevisitSite] = []
    for place, zone in enumerate(pack.zones):
        if zone.kind != ZONE:
            continue
        own = known[of_site[known] == place]
        for rank, one in enumerate(_spread(pack.samples.east_north_m[own], wanted)):
            site = int(own[one])
            why = "nearest the zone's middle" if rank == 0 else "far from the others of its zone"
            east, north = pack.samples.east_north_m[site]
            chosen.append(
                RevisitSite(
                    name=pack.samples.ids[site], east_m=float(east), north_m=float(north),
                    zone=zone.number, why=why,
                )
            )  # fmt: skip
    return tuple(chosen)


def sites_wanted(sd_of_change: float) -> int:
    """Sites a zone that show a change worth seeing (table of limits) four times in five."""
    from scipy.stats import norm

    if not np.isfinite(sd_of_change):
        return LEAST_A_ZONE * 2
    reach = float(norm.ppf(1 - ALPHA / 2) + norm.ppf(POWER)) * sd_of_change / limit("change-seen")
    return int(np.clip(np.ceil(reach**2), LEAST_A_ZONE, MOST_A_ZONE))


def _spread(places: Floats, count: int) -> Counts:
    """Positions of up to ``count`` places, spread by farthest point, the middle one first."""
    if len(places) == 0:
        return np.empty(0, dtype=np.intp)
    first = int(np.argmin(np.linalg.norm(places - places.mean(axis=0), axis=1)))
    chosen, gap = [first], np.linalg.norm(places - places[first], axis=1)
    while len(chosen) < min(count, len(places)):
        chosen.append(int(np.argmax(gap)))
        gap = np.minimum(gap, np.linalg.norm(places - places[chosen[-1]], axis=1))
    return np.array(chosen, dtype=np.intp)

"""Zones of two seasons: which is which, what ground moved, and what chance alone would move."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import shapely
from scipy.optimize import linear_sum_assignment

from schorl.geodesy import area_ha
from schorl.geostat import krige
from schorl.geostat.reml import fit_best_transform
from schorl.geostat.support import data_covariance, layout_of, noise_of
from schorl.geostat.threads import one_blas_thread
from schorl.model.arrays import Counts, Floats
from schorl.model.change import Moved, RateChange, SeasonPack, SeasonZone, ZonesMoved
from schorl.model.field import Area
from schorl.model.samples import SampleSet
from schorl.model.variogram import Support, VariogramFit
from schorl.steps.mapping import supports_of
from schorl.steps.season_sites import ZONE
from schorl.zoning.matching import (
    ZoneMatch,
    adjusted_rand_by_area,
    disagreement,
    kappa,
    match_zones,
    matched_numbers,
    squared_table,
)

#: Times the sites are sampled again in thought, and cells that classes are found on.
DRAWS, MOST_CELLS = 24, 4000
#: Fewer sites than this do not make a map that could be drawn again.
LEAST_SITES = 10
#: Less ground than this in another zone is drawing, not moving.
LEAST_MOVED_HA = 0.01


def zones_moved(
    before: SeasonPack,
    after: SeasonPack,
    common: Area,
    *,
    random: np.random.Generator,
    draws: int = DRAWS,
) -> ZonesMoved:
    """Match the zones of two packs on their common ground, by overlap (Hungarian method).

    Numbers that both packs share and that overlap are the same zone already; a later zone without
    a match gets a number never used before.
    """
    first = [_clipped(zone, common) for zone in before.zones]
    second = [_clipped(zone, common) for zone in after.zones]
    match = match_zones(first, second)
    numbers = [zone.number for zone in before.zones]
    carried, retired = matched_numbers(match, numbers, retired=before.retired_numbers)
    moved = tuple(_moved(before, after, match, first, second))
    square = squared_table(match)
    quantity, allocation = disagreement(square)
    return ZonesMoved(
        before=tuple(numbers),
        after=tuple(zone.number for zone in after.zones),
        transition_ha=match.transition_ha,
        kept={zone.number: one for zone, one in zip(after.zones, carried, strict=True)},
        retired=tuple(retired),
        moved=moved,
        moved_ha=sum(one.area_ha for one in moved),
        adjusted_rand=adjusted_rand_by_area(match.transition_ha),
        kappa=kappa(square),
        quantity=quantity,
        allocation=allocation,
        by_chance=agreement_by_chance(before, after.samples, random=random, draws=draws),
    )


def _clipped(zone: SeasonZone, common: Area) -> Area:
    return shapely.intersection(zone.area, common)


def _moved(
    before: SeasonPack,
    after: SeasonPack,
    match: ZoneMatch,
    first: Sequence[Area],
    second: Sequence[Area],
) -> list[Moved]:
    partner, found = dict(match.pairs), []
    for one, area in enumerate(first):
        for other, again in enumerate(second):
            if partner.get(one) == other or match.transition_ha[one, other] < LEAST_MOVED_HA:
                continue
            ground = _polygons(shapely.intersection(area, again))
            found.append(
                Moved(
                    before=before.zones[one].number, after=after.zones[other].number, area=ground,
                    area_ha=area_ha(ground, crs=before.crs),
                )
            )  # fmt: skip
    return found


def _polygons(geometry: shapely.Geometry) -> Area:
    parts = [one for one in shapely.get_parts(geometry) if one.geom_type == "Polygon"]
    return parts[0] if len(parts) == 1 else shapely.MultiPolygon(parts)


def rate_changes(
    before: SeasonPack, after: SeasonPack, moved: ZonesMoved
) -> tuple[RateChange, ...]:
    """Boron rates of each zone in both seasons, matched zones in one row."""
    earlier = {zone.number: zone for zone in before.zones}
    rows, seen = [], set()
    for zone in after.zones:
        number = moved.kept[zone.number]
        old = earlier.get(number)
        seen.add(number)
        rows.append(
            RateChange(
                zone_before=number if old else None, zone_after=zone.number,
                before_kg_ha=old.boron_kg_ha if old else float("nan"),
                after_kg_ha=zone.boron_kg_ha,
            )
        )  # fmt: skip
    for number, zone in earlier.items():
        if number not in seen:
            rows.append(
                RateChange(
                    zone_before=number, zone_after=None, before_kg_ha=zone.boron_kg_ha,
                    after_kg_ha=float("nan"),
                )
            )  # fmt: skip
    return tuple(rows)


def agreement_by_chance(
    pack: SeasonPack, later: SampleSet, *, random: np.random.Generator, draws: int
) -> tuple[float, float]:
    """Kappa and adjusted Rand index that sampling again would give, nothing changed.

    Every mapped property is drawn anew from its fitted model given what was measured (same soil,
    new laboratory and short-range error) at the sites of the ``later`` season: new sites move
    zones more than the same ones. Composites, and what was not measured again, are drawn at their
    own. The draws are mapped, and the cells clustered into as many
    classes (k-means); both figures are means over the draws of the agreement with the classes of
    the maps as they are. NaN where zones were not drawn from the samples, or are fewer than two.
    """
    nothing = float("nan"), float("nan")
    count = sum(zone.kind == ZONE for zone in pack.zones)
    if pack.origin != "clusters" or count < 2 or "boron" not in pack.surfaces or draws < 1:
        return nothing
    varying = {name: one for name, one in pack.surfaces.items() if np.ptp(one) > 0}
    again = {name: _sampled_again(pack, later, name, random, draws) for name in varying}
    if all(one is None for one in again.values()):
        return nothing
    seed = int(random.integers(2**31))
    base = _classes(varying, varying, count, seed)
    figures = []
    for place in range(draws):
        drawn = {
            name: one if again[name] is None else again[name][:, place]  # type: ignore[index]
            for name, one in varying.items()
        }
        table = np.zeros((count, count))
        np.add.at(table, (base, _classes(drawn, varying, count, seed)), 1.0)
        first, second = linear_sum_assignment(table, maximize=True)
        figures.append((kappa(table[first][:, second]), adjusted_rand_by_area(table)))
    middle = np.mean(figures, axis=0)
    return float(middle[0]), float(middle[1])


def _classes(
    values: Mapping[str, Floats], scale: Mapping[str, Floats], count: int, seed: int
) -> Counts:
    """Class of each cell by k-means, properties scaled by the spread of ``scale``."""
    from sklearn.cluster import KMeans

    table = np.column_stack([values[name] / scale[name].std() for name in sorted(values)])
    some = table[:: max(len(table) // MOST_CELLS, 1)]
    # One thread: sums split over more would differ in their last bits from machine to machine.
    with one_blas_thread():
        found = KMeans(n_clusters=count, n_init=4, random_state=seed).fit(some)
        return np.asarray(found.predict(table), dtype=np.intp)


def _sampled_again(
    pack: SeasonPack, later: SampleSet, name: str, random: np.random.Generator, draws: int
) -> Floats | None:
    """Maps ``(n_cells, draws)`` of one property from samples taken again."""
    one = pack.samples.properties.get(name)
    known = np.zeros(0, dtype=bool) if one is None else one.known
    if one is None or known.sum() < LEAST_SITES or np.ptp(one.values[known]) == 0:
        return None
    values = one.values[known]
    places, support = pack.samples.east_north_m[known], supports_of(pack.samples, known)
    transform, fit = fit_best_transform(values, places, support=support)
    if fit.verdict == "no pattern" or fit.partial_sill <= 0:
        return None
    scaled = np.log(values) if transform == "log" else values
    again = _later_places(later, name) if support is None else None
    new = _drawn(scaled, places, again, fit, support=support, random=random, draws=draws)
    mapped, _ = krige(
        places if again is None else again, new, pack.grid.centres_m, fit.variogram,
        block_m=pack.grid.cell_m, support=support,
    )  # fmt: skip
    return np.exp(mapped) if transform == "log" else mapped


def _later_places(later: SampleSet, name: str) -> Floats | None:
    """Single samples of the later season that measured a property, ``(m, 2)``; None if too few."""
    one = later.properties.get(name)
    if one is None or one.known.sum() < LEAST_SITES or supports_of(later, one.known) is not None:
        return None
    return later.east_north_m[one.known]


@one_blas_thread()
def _drawn(
    scaled: Floats,
    places: Floats,
    again: Floats | None,
    fit: VariogramFit,
    *,
    support: tuple[Support, ...] | None,
    random: np.random.Generator,
    draws: int,
) -> Floats:
    """Values measured again, ``(m, draws)``, given those measured ``(n,)``."""
    count = len(places)
    there = places if again is None else np.vstack([places, again])
    layout = layout_of(there, support)
    whole = data_covariance(layout, fit.variogram)
    noise = noise_of(
        layout, nugget=fit.variogram.nugget, lab_variance=fit.variogram.lab_variance
    ) * np.ones(len(there))  # fmt: skip
    structured = whole - np.diag(noise)
    new = slice(0, count) if again is None else slice(count, None)
    shared = structured[new, :count]
    weights = np.linalg.solve(whole[:count, :count], shared.T).T
    middle = fit.mean + weights @ (scaled - fit.mean)
    spread = structured[new, new] - weights @ shared.T
    tiny = 1e-9 * float(np.trace(whole)) / len(there)
    root = np.linalg.cholesky(spread + tiny * np.eye(len(middle)))
    told = middle[:, None] + root @ random.normal(size=(len(middle), draws))
    told += np.sqrt(noise[new])[:, None] * random.normal(size=(len(middle), draws))
    return told

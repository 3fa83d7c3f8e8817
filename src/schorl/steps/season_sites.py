"""Sites of two seasons: which were revisited, and which zone each belongs to."""

from __future__ import annotations

import numpy as np
import shapely
from scipy.spatial import cKDTree

from schorl.geostat import leave_one_out
from schorl.geostat.reml import fit_best_transform
from schorl.model.arrays import Counts, Flags, Floats
from schorl.model.change import SeasonPack, SitePairs
from schorl.model.samples import SampleSet
from schorl.steps.mapping import supports_of
from schorl.zoning.sampled import label_in

#: Places this close are one site: hand-held positioning is good to 3 to 5 m (a choice).
SAME_PLACE_M = 10.0
#: Composites of areas that overlap by this share of their union are one sample zone (a choice).
SAME_AREA = 0.80
ZONE = "zone"


def measured(samples: SampleSet) -> Flags:
    """Samples with boron, shape ``(n,)``."""
    boron = samples.properties.get("boron")
    return np.zeros(len(samples), dtype=bool) if boron is None else boron.known


def site_pairs(
    before: SampleSet, after: SampleSet, *, same_place_m: float = SAME_PLACE_M
) -> SitePairs:
    """Sites sampled in both seasons: within ``same_place_m``, the nearest pairs first.

    No site has two partners. Composites of sample zones are paired by their areas, single samples by their places; never one
    with the other.
    """
    found = [*_paired_points(before, after, same_place_m), *_paired_areas(before, after)]
    found.sort()
    first = np.array([a for a, _ in found], dtype=np.intp)
    second = np.array([b for _, b in found], dtype=np.intp)
    nothing = np.empty(0)
    return SitePairs(
        before=first,
        after=second,
        before_mg_kg=before.properties["boron"].values[first] if len(first) else nothing,
        after_mg_kg=after.properties["boron"].values[second] if len(first) else nothing,
        east_north_m=before.east_north_m[first].reshape(-1, 2),
    )


def _of_kind(samples: SampleSet, *, composites: bool) -> Counts:
    is_zone = np.array([kind == ZONE for kind in samples.kind], dtype=bool)
    return np.flatnonzero(measured(samples) & (is_zone == composites))


def _paired_points(before: SampleSet, after: SampleSet, reach: float) -> list[tuple[int, int]]:
    first, second = _of_kind(before, composites=False), _of_kind(after, composites=False)
    if not len(first) or not len(second):
        return []
    places, others = before.east_north_m[first], after.east_north_m[second]
    near = cKDTree(places).sparse_distance_matrix(cKDTree(others), reach, output_type="ndarray")
    found: dict[int, int] = {}
    taken: set[int] = set()
    for one, other in near[np.lexsort((near["j"], near["i"], near["v"]))][["i", "j"]].tolist():
        if int(first[one]) not in found and other not in taken:
            found[int(first[one])] = int(second[other])
            taken.add(other)
    return list(found.items())


def _paired_areas(before: SampleSet, after: SampleSet) -> list[tuple[int, int]]:
    first = [one for one in _of_kind(before, composites=True) if before.areas[one] is not None]
    second = [one for one in _of_kind(after, composites=True) if after.areas[one] is not None]
    found = []
    for one in first:
        for other in second:
            area, again = before.areas[one], after.areas[other]
            shared = shapely.intersection(area, again).area
            if shared >= SAME_AREA * shapely.union(area, again).area > 0:
                found.append((int(one), int(other)))
    return found


def zone_places(pack: SeasonPack, east_north_m: Floats) -> Counts:
    """Position in ``pack.zones`` of the zone each of ``(m, 2)`` points lies in; -1 in none."""
    return label_in([zone.area for zone in pack.zones], east_north_m)


def fair_zones(pack: SeasonPack) -> Counts:
    """Zone of each of a pack's own samples for tests, ``(n,)``; -1 for none.

    Zones drawn from a season's boron hold the samples that came out low or high by chance, and
    next season those go back: zones seem to change where nothing did. Where zones were drawn from
    the samples, each sample therefore goes to the zone whose soil is most like what the *other*
    samples predict for it. Zones that were kept, given or sampled as such take samples by place.
    """
    by_place = zone_places(pack, pack.samples.east_north_m)
    drawn = [place for place, zone in enumerate(pack.zones) if zone.kind == ZONE]
    predicted = _left_out_boron(pack.samples) if pack.origin == "clusters" else None
    if predicted is None or len(drawn) < 2:
        return by_place
    cells = pack.grid.cell_of(pack.samples.east_north_m)
    of_cell = zone_places(pack, pack.grid.centres_m)
    names = [name for name, one in pack.surfaces.items() if np.ptp(one) > 0]
    scores = np.zeros((len(pack.samples), len(drawn)))
    for name in names:
        surface = pack.surfaces[name]
        centres = np.array([surface[of_cell == place].mean() for place in drawn])
        within = np.concatenate(
            [surface[of_cell == p] - m for p, m in zip(drawn, centres, strict=True)]
        )
        own = predicted if name == "boron" else surface[np.maximum(cells, 0)]
        scores += (own[:, None] - centres) ** 2 / max(float(np.mean(within**2)), 1e-12)
    fair = np.array(drawn, dtype=np.intp)[np.argmin(scores, axis=1)]
    usable = (cells >= 0) & np.isfinite(predicted)
    return np.where(usable, fair, by_place)


def _left_out_boron(samples: SampleSet) -> Floats | None:
    """Boron that the others predict for each sample, ``(n,)``, NaN where not measured."""
    known = measured(samples)
    if known.sum() < 10 or np.ptp(samples.properties["boron"].values[known]) == 0:
        return None
    values, places = samples.properties["boron"].values[known], samples.east_north_m[known]
    support = supports_of(samples, known)
    transform, fit = fit_best_transform(values, places, support=support)
    scaled = np.log(values) if transform == "log" else values
    if fit.nugget + fit.partial_sill <= 0:
        return None
    residual, _ = leave_one_out(places, scaled, fit.variogram, support=support)
    predicted = scaled - residual
    left_out = np.full(len(samples), np.nan)
    left_out[known] = np.exp(predicted) if transform == "log" else predicted
    return left_out

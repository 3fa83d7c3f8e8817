"""Two seasons of a field against each other: what changed, is it real, what to do next."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import shapely

from schorl.agronomy.laboratory import lab_relative_sd
from schorl.errors import Refusal
from schorl.findings import Finding, finding
from schorl.geodesy import area_ha
from schorl.model.arrays import Counts, Floats
from schorl.model.change import (
    ChangeMap,
    SeasonChange,
    SeasonPack,
    Shift,
    SitePairs,
    ZoneChange,
)
from schorl.model.field import Area, lay_grid
from schorl.model.progress import Progress, silent
from schorl.model.samples import SampleSet
from schorl.steps.season_balance import balances
from schorl.steps.season_map import LEAST_PAIRS, change_map
from schorl.steps.season_revisit import revisit_sites
from schorl.steps.season_sites import (
    SAME_PLACE_M,
    ZONE,
    fair_zones,
    measured,
    site_pairs,
    zone_places,
)
from schorl.steps.season_strips import check_strips
from schorl.steps.season_tests import ZoneData, field_shift, least_detectable, zone_changes
from schorl.steps.season_turned import turned
from schorl.steps.season_words import SAME_SAMPLES, in_words
from schorl.steps.season_zones import DRAWS, rate_changes, zones_moved
from schorl.zoning.sampled import composite_error_mg_kg

#: Depths of sampling that differ by more (cm) are not the same soil (a choice).
SAME_DEPTH_CM = 2.0
#: Pairs count as the comparison's sites where they are this share of the smaller campaign.
PAIRED_SHARE = 0.5
NAN = float("nan")


def compare(
    before: SeasonPack,
    after: SeasonPack,
    *,
    seed: int = 0,
    same_place_m: float = SAME_PLACE_M,
    draws: int = DRAWS,
    progress: Progress = silent,
) -> SeasonChange:
    """Compare two seasons of one field.

    Computed from the earlier to the later season, whatever the order they are named in, and turned
    round where needed: A to B is B to A reversed, exactly.

    Parameters
    ----------
    before, after
        Packs in one metric system.
    same_place_m
        Sites this close are the same site.
    draws
        Times that sampling again is simulated, to say what moves zones by chance; 0 for never.

    Raises
    ------
    Refusal
        The fields share no ground (exit 4).
    """
    backwards = before.when > after.when
    first, second = (after, before) if backwards else (before, after)
    pairs = site_pairs(first.samples, second.samples, same_place_m=same_place_m)
    random = np.random.default_rng([seed, 8])
    change = _compare(first, second, pairs, random=random, draws=draws, progress=progress)
    return turned(change) if backwards else change


def _compare(
    before: SeasonPack,
    after: SeasonPack,
    pairs: SitePairs,
    *,
    random: np.random.Generator,
    draws: int,
    progress: Progress,
) -> SeasonChange:
    common = _common_ground(before, after)
    same = before.identity == after.identity
    progress("comparing", 0, 3)
    refused = _not_comparable(before.samples, after.samples)
    if not refused and not same and _same_samples(before.samples, after.samples, pairs):
        refused = SAME_SAMPLES
    paired = _are_paired(pairs, before.samples, after.samples)
    shift = None if refused else _shift(pairs, before.samples, after.samples, paired=paired)
    doubted = shift is not None and bool(shift.warning)
    data = [] if refused else _zone_data(before, after, pairs, paired=paired)
    changes = zone_changes(data, doubted=doubted)
    progress("comparing", 1, 3)
    mapped, no_map = _map(before, after, common, pairs, refused=refused, doubted=doubted)
    progress("comparing", 2, 3)
    moved = zones_moved(before, after, common, random=random, draws=draws)
    sd_of_change = float(pairs.change_mg_kg.std(ddof=1)) if len(pairs) > 2 and not same else NAN
    found = _findings(before, after, common, pairs, shift, refused)
    change = SeasonChange(
        before=before,
        after=after,
        same=same,
        common=common,
        common_ha=area_ha(common, crs=before.crs),
        pairs=pairs,
        shift=shift,
        refused=refused,
        least_detectable_mg_kg=_least(changes, shift),
        zones=changes,
        change_map=mapped,
        no_map=no_map,
        moved=moved,
        rates=rate_changes(before, after, moved),
        balance=balances(before, changes, removed_kg_ha=before.removed_kg_ha),
        strips=check_strips(after),
        revisit=revisit_sites(after, sd_of_change=sd_of_change),
        findings=found,
        text="",
    )
    progress("comparing", 3, 3)
    return replace(change, text=in_words(change))


def _common_ground(before: SeasonPack, after: SeasonPack) -> Area:
    shared = shapely.intersection(before.boundary, after.boundary)
    parts = [one for one in shapely.get_parts(shared) if one.geom_type == "Polygon"]
    if not parts or sum(one.area for one in parts) < 0.01 * before.boundary.area:
        what = f"`{before.field_name}` and `{after.field_name}` share no ground"
        raise Refusal([finding("SEASON-ELSEWHERE", where="both packs", what=what)])
    return parts[0] if len(parts) == 1 else shapely.MultiPolygon(parts)


def _not_comparable(before: SampleSet, after: SampleSet) -> str:
    """Why no difference of the soil tests may be taken, or nothing."""
    first, second = before.campaign, after.campaign
    if not measured(before).any() or not measured(after).any():
        return "one of the seasons has no boron values"
    if first.method != second.method:
        return f"boron was extracted with {first.method} first and {second.method} then"
    if first.per_volume != second.per_volume:
        return "one laboratory reports per kilogram of soil, the other per litre"
    if abs(first.depth_cm - second.depth_cm) > SAME_DEPTH_CM:
        return f"samples reach {first.depth_cm:g} cm in one season, {second.depth_cm:g} cm in the other"
    return ""


def _same_samples(before: SampleSet, after: SampleSet, pairs: SitePairs) -> bool:
    """Whether two packs were made from one campaign: same sites, same day, same values."""
    return (
        len(pairs) == len(before) == len(after) > 1
        and before.campaign.sampled_on == after.campaign.sampled_on
        and not pairs.change_mg_kg.any()
    )


def _are_paired(pairs: SitePairs, before: SampleSet, after: SampleSet) -> bool:
    smaller = min(int(measured(before).sum()), int(measured(after).sum()))
    return len(pairs) >= 2 and len(pairs) >= PAIRED_SHARE * smaller


def _boron(samples: SampleSet) -> Floats:
    return samples.properties["boron"].values[measured(samples)]


def _shift(pairs: SitePairs, before: SampleSet, after: SampleSet, *, paired: bool) -> Shift | None:
    if paired:
        return field_shift(pairs.before_mg_kg, pairs.after_mg_kg, paired=True)
    return field_shift(_boron(before), _boron(after), paired=False)


def _zone_data(
    before: SeasonPack, after: SeasonPack, pairs: SitePairs, *, paired: bool
) -> list[ZoneData]:
    """Boron of each zone of the earlier season, its own samples placed fairly."""
    own = fair_zones(before)
    if paired:
        error = _pair_error(before, after, pairs)
        return [
            ZoneData(
                zone=zone.number,
                before=pairs.before_mg_kg[own[pairs.before] == place],
                after=pairs.after_mg_kg[own[pairs.before] == place],
                paired=True,
                composite_error=error,
            )
            for place, zone in enumerate(before.zones)
            if zone.kind == ZONE
        ]
    later = zone_places(before, after.samples.east_north_m)
    return [
        ZoneData(
            zone=zone.number,
            before=_in_zone(before.samples, own, place),
            after=_in_zone(after.samples, later, place),
            paired=False,
        )
        for place, zone in enumerate(before.zones)
        if zone.kind == ZONE
    ]


def _in_zone(samples: SampleSet, of_site: Counts, place: int) -> Floats:
    chosen: Floats = samples.properties["boron"].values[measured(samples) & (of_site == place)]
    return chosen


def _pair_error(before: SeasonPack, after: SeasonPack, pairs: SitePairs) -> float | None:
    """Standard error of one composite's change, where all pairs are composites of zones."""
    kinds = {before.samples.kind[one] for one in pairs.before}
    if kinds != {ZONE}:
        return None
    squares = [
        float(np.mean(composite_error_mg_kg(
            values, pack.samples.cores[chosen],
            lab_relative_sd=lab_relative_sd(pack.samples.campaign),
        ) ** 2))
        for values, chosen, pack in (
            (pairs.before_mg_kg, pairs.before, before), (pairs.after_mg_kg, pairs.after, after),
        )
    ]  # fmt: skip
    return float(np.sqrt(sum(squares)))


def _map(
    before: SeasonPack,
    after: SeasonPack,
    common: Area,
    pairs: SitePairs,
    *,
    refused: str,
    doubted: bool,
) -> tuple[ChangeMap | None, str]:
    if refused:
        return None, f"no difference can be taken: {refused}"
    points = [place for place, one in enumerate(pairs.before) if before.samples.kind[one] != ZONE]
    if len(points) < LEAST_PAIRS:
        return None, (
            f"{len(points)} sites were sampled in both seasons; a map of change needs "
            f"{LEAST_PAIRS}: a difference of two maps would show the noise of both"
        )
    grid = lay_grid(common, cell_m=max(before.grid.cell_m, after.grid.cell_m))
    level = np.sqrt(0.5 * (np.mean(pairs.before_mg_kg**2) + np.mean(pairs.after_mg_kg**2)))
    relative = max(lab_relative_sd(one.samples.campaign) for one in (before, after))
    return (
        change_map(
            pairs.east_north_m[points], pairs.change_mg_kg[points], grid,
            lab_sd=float(relative * level), doubted=doubted,
        ),
        "",
    )  # fmt: skip


def _least(changes: tuple[ZoneChange, ...], shift: Shift | None) -> float:
    """Change that a zone of middling size would show four times in five; the field's without."""
    known = [one.least_detectable for one in changes if np.isfinite(one.least_detectable)]
    if known:
        return float(np.median(known))
    return NAN if shift is None else least_detectable((shift.high - shift.mean) / 1.96)


def _findings(
    before: SeasonPack,
    after: SeasonPack,
    common: Area,
    pairs: SitePairs,
    shift: Shift | None,
    refused: str,
) -> tuple[Finding, ...]:
    found = [*before.findings, *after.findings]
    seasons = f"{before.season} and {after.season}"
    if refused:
        found.append(finding("SEASON-DIFFERENT", where=seasons, what=refused))
    if shift is not None and shift.warning:
        found.append(finding("SEASON-SHIFT", where=seasons, what=shift.warning))
    if common.area < 0.99 * max(before.boundary.area, after.boundary.area):
        what = f"only {area_ha(common, crs=before.crs):.2f} ha lie in both seasons' boundaries"
        found.append(finding("SEASON-AREA", where="boundary", what=what))
    first, second = before.samples.campaign.laboratory, after.samples.campaign.laboratory
    if first and second and first != second:
        what = f"`{first}` analysed the first, `{second}` the other"
        found.append(finding("SEASON-LAB", where=seasons, what=what))
    if _months_apart(before, after) >= 3:
        what = "the samples were taken in different parts of the year"
        found.append(finding("SEASON-TIME", where=seasons, what=what))
    below = _below(before.samples, pairs.before) + _below(after.samples, pairs.after)
    if below:
        what = f"{below} values below the reporting limit count at the limit"
        found.append(finding("SEASON-BELOW", where=seasons, what=what))
    return tuple(dict.fromkeys(found))


def _months_apart(before: SeasonPack, after: SeasonPack) -> int:
    first, second = before.samples.campaign.sampled_on, after.samples.campaign.sampled_on
    if first is None or second is None:
        return 0
    apart = abs(first.month - second.month)
    return min(apart, 12 - apart)


def _below(samples: SampleSet, chosen: Counts) -> int:
    boron = samples.properties.get("boron")
    return 0 if boron is None else int(boron.below_limit[chosen].sum())

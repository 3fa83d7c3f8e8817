"""What the soil of each cell asks for and bears: target, ceiling, need, cap, hot spots."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import shapely

from schorl.agronomy.caps import absolute_limit_kg_ha, rate_cap
from schorl.agronomy.chances import chance_over_ceiling
from schorl.agronomy.crops import Crop, crop_named, removal_g_t
from schorl.agronomy.methods import method_row
from schorl.agronomy.soil_mass import (
    bulk_density_g_cm3,
    ceiling_depth_cm,
    kg_ha_per_mg_kg,
    need_depth_cm,
)
from schorl.agronomy.tables import limit, trace
from schorl.agronomy.textures import texture_named
from schorl.errors import Refusal, UsageProblem
from schorl.findings import Finding, finding
from schorl.model.arrays import Flags, Floats
from schorl.model.field import CellGrid
from schorl.model.prescription import CellNeed
from schorl.model.samples import SampleSet
from schorl.model.settings import RunSettings
from schorl.model.sourced import UNSURE
from schorl.model.surface import Surface
from schorl.steps.given import boron_given
from schorl.steps.limits_of_soil import (
    ceiling_for,
    class_limits_fit,
    class_limits_note,
    hot_water,
    target_for,
    uses_class_table,
)


@dataclass(frozen=True, eq=False, kw_only=True)
class Soil:
    """Clay, organic matter and density where they are asked for, ``(n,)`` each."""

    clay_pct: Floats
    organic_matter_pct: Floats
    density_g_cm3: Floats


@dataclass(frozen=True, eq=False, kw_only=True)
class Assessed:
    """The cells' need and what was noticed and used on the way."""

    need: CellNeed
    sample_need_kg_ha: Floats
    crop: Crop
    findings: tuple[Finding, ...]
    sources: tuple[Mapping[str, str], ...]


def assess_cells(
    samples: SampleSet, surfaces: Mapping[str, Surface], grid: CellGrid, settings: RunSettings
) -> Assessed:
    """Need, ceiling and cap of every cell.

    Raises
    ------
    UsageProblem
        Unknown crop or region (exit 2).
    Refusal
        Limits that do not belong to the extraction method, no clay or organic matter, an organic
        soil without density, a spreader that is too uneven (exit 4); all at once.
    """
    crop = crop_named(settings.crop.crop)
    found: list[Finding] = []
    _refuse_unknown(samples, surfaces, settings, found)
    soil = _soil(samples, surfaces, settings, found)
    target, sources = target_for(crop, settings, soil.clay_pct, soil.organic_matter_pct)
    ceiling, more = ceiling_for(
        crop, settings, soil.clay_pct, soil.organic_matter_pct, builtin=hot_water(samples)
    )
    target, held = _below_ceiling(target, ceiling, settings)
    if held:
        what = f"the target was lowered to {target.min():.2f} mg/kg at the lowest"
        found.append(finding("RATE-CEILING-TARGET", where="target", what=what))
    need = _need(
        samples, surfaces, grid, settings, crop=crop, soil=soil, target=target, ceiling=ceiling
    )
    at_samples = _need_at_samples(samples, grid, need)
    cap = rate_cap(crop, settings.placement, settings.overrides)
    more = [*more, *_texture_used(samples, settings), trace(cap.table, cap.row, cap.kg_ha)]
    if settings.crop.maintenance_yield_t_ha is not None:
        more.append(trace("removal", crop.name, float(removal_g_t(crop.name) or 0.0)))
    found.extend(_status_notes([*sources, *more]))
    if crop.perennial:
        what = f"{crop.name}: only the yearly cap is given here"
        found.append(finding("RATE-PERENNIAL", where="crop", what=what))
    return Assessed(
        need=need,
        sample_need_kg_ha=at_samples,
        crop=crop,
        findings=tuple(found),
        sources=(*sources, *more),
    )


def _refuse_unknown(
    samples: SampleSet,
    surfaces: Mapping[str, Surface],
    settings: RunSettings,
    found: list[Finding],
) -> None:
    """Everything that makes an honest rate impossible, said together."""
    crop, campaign = settings.crop, samples.campaign
    own = crop.target_mg_kg is not None or bool(crop.own_targets)
    own_limits = own and crop.ceiling_mg_kg is not None
    bad = class_limits_fit(samples, settings) if uses_class_table(settings) else []
    fits = own or (uses_class_table(settings) and not bad)
    found.extend(class_limits_note(settings) if uses_class_table(settings) and not bad else [])
    lacking = [name for name, has in (("target", fits), ("ceiling", crop.ceiling_mg_kg)) if not has]
    if not hot_water(samples) and lacking:
        bad.append(
            finding(
                "RATE-METHOD",
                where="boron",
                what=f"boron was extracted with {campaign.method}, the limits are for hot water, "
                f"so {' and '.join(lacking)} are missing; {_published(campaign.method)}",
            )
        )
    if campaign.per_volume and lacking:
        what = f"boron is reported per litre of soil: {' and '.join(lacking)} per litre are missing"
        bad.append(finding("RATE-VOLUME", where="boron", what=what))
    if "clay" not in surfaces and not own_limits and not crop.texture:
        bad.append(finding("RATE-CLAY", where="clay", what="clay is neither measured nor declared"))
    if (
        "organic_matter" not in surfaces
        and crop.bulk_density_g_cm3 is None
        and not _volume(samples)
    ):
        what = "organic matter is neither measured nor declared"
        bad.append(finding("RATE-OM", where="organic matter", what=what))
    if settings.machine.spread_cv_pct > limit("spread-cv-most"):
        what = f"the spreader's CV is {settings.machine.spread_cv_pct:g} %"
        bad.append(finding("RATE-CV", where="machine", what=what))
    if bad:
        raise Refusal([*found, *bad])


def _published(method: str) -> str:
    row = method_row(method)
    return "nothing is known of limits for this method" if row is None else row["note"]


def _volume(samples: SampleSet) -> bool:
    return samples.campaign.per_volume


def _soil(
    samples: SampleSet,
    surfaces: Mapping[str, Surface],
    settings: RunSettings,
    found: list[Finding],
) -> Soil:
    crop = settings.crop
    cells = surfaces["boron"].grid.n_cells
    clay = _cells_of(surfaces, "clay", cells, default=_texture_figure(crop.texture, "clay_pct"))
    organic = _cells_of(surfaces, "organic_matter", cells, default=2.5)
    if crop.bulk_density_g_cm3 is not None:
        density = np.full(cells, crop.bulk_density_g_cm3)
    elif samples.campaign.per_volume:
        density = np.ones(cells)
    else:
        _refuse_peat(organic)
        density = bulk_density_g_cm3(_sand(samples, settings, clay, found), clay, organic)
    return Soil(clay_pct=clay, organic_matter_pct=organic, density_g_cm3=density)


def _cells_of(surfaces: Mapping[str, Surface], name: str, cells: int, *, default: float) -> Floats:
    return surfaces[name].estimate if name in surfaces else np.full(cells, default)


def _texture_figure(texture: str, column: str) -> float:
    """A figure of a named texture class; a loam's where none is named and none is needed."""
    return float(texture_named(texture)[column])


def _texture_used(samples: SampleSet, settings: RunSettings) -> list[Mapping[str, str]]:
    """The row of a declared texture class, where clay or sand was taken from it."""
    declared = settings.crop.texture
    measured = {*samples.properties, *samples.constants}
    if not declared or {"clay", "sand"} <= measured:
        return []
    row = texture_named(declared)
    return [trace("textures", row["id"], float(row["clay_pct"]))]


def _refuse_peat(organic_pct: Floats) -> None:
    most = limit("organic-from")
    if organic_pct.max() > most:
        what = f"organic matter reaches {organic_pct.max():.0f} %, above {most:g} %"
        raise Refusal([finding("RATE-ORGANIC", where="organic matter", what=what)])


def _sand(samples: SampleSet, settings: RunSettings, clay: Floats, found: list[Finding]) -> Floats:
    if settings.crop.sand_pct is not None:
        return np.full(len(clay), settings.crop.sand_pct)
    if "sand" in samples.constants:
        return np.full(len(clay), samples.constants["sand"])
    if "sand" in samples.properties:
        values = samples.properties["sand"].values
        return np.full(len(clay), float(np.nanmean(values)))
    if settings.crop.texture:
        return np.full(len(clay), _texture_figure(settings.crop.texture, "sand_pct"))
    sand = (100.0 - clay) / 2.0
    what = f"sand was taken as half of what is not clay, {sand.mean():.0f} % on average"
    found.append(finding("RATE-SAND", where="soil", what=what))
    return sand


def _below_ceiling(target: Floats, ceiling: Floats, settings: RunSettings) -> tuple[Floats, bool]:
    room = limit("target-below-ceiling")
    if settings.crop.interpretation == "texture line":
        room = limit("line-below-ceiling")
    most = np.maximum(ceiling - room, 0.0)
    return np.minimum(target, most), bool((target > most + 1e-12).any())


def _need(
    samples: SampleSet,
    surfaces: Mapping[str, Surface],
    grid: CellGrid,
    settings: RunSettings,
    *,
    crop: Crop,
    soil: Soil,
    target: Floats,
    ceiling: Floats,
) -> CellNeed:
    boron = surfaces["boron"]
    stones = settings.crop.stones_pct
    depth = need_depth_cm(samples.campaign.depth_cm)
    mass = kg_ha_per_mg_kg(soil.density_g_cm3, depth, stones_pct=stones)
    top = ceiling_depth_cm(settings.crop.incorporation_cm)
    log = boron.transform == "log"
    spread = _with_target_spread(boron, surfaces, crop, settings, soil, target)
    credit, used = boron_given(samples, grid, settings, soil.clay_pct)
    cap = rate_cap(crop, settings.placement, settings.overrides).kg_ha
    most = min(cap, absolute_limit_kg_ha(crop, settings.overrides))
    kept = maintenance_kg_ha(crop, settings) * (boron.estimate < target)
    bare = CellNeed(
        need_mean_kg_ha=(target - boron.estimate) * mass + kept - credit,
        need_sd_kg_ha=_own_sd(boron, spread) * mass,
        boron_mg_kg=boron.estimate,
        boron_location=boron.location,
        boron_sd=spread,
        boron_log=log,
        target_mg_kg=target,
        ceiling_mg_kg=ceiling,
        mass_need=mass,
        mass_ceiling=kg_ha_per_mg_kg(soil.density_g_cm3, top, stones_pct=stones),
        rate_cap_kg_ha=np.maximum(most - used, 0.0),
        hot=np.zeros(grid.n_cells, dtype=bool),
    )
    return _with_hot(bare, samples, grid, settings)


def maintenance_kg_ha(crop: Crop, settings: RunSettings) -> float:
    """Boron that the harvest takes away, kg/ha, where maintenance is asked for by a yield; else 0.

    Only ground below its target gets it: soil that has enough can spare a harvest's boron.

    Raises
    ------
    UsageProblem
        No figure for the crop's removal (exit 2).
    """
    yield_t_ha = settings.crop.maintenance_yield_t_ha
    if yield_t_ha is None:
        return 0.0
    grams = removal_g_t(crop.name)
    if grams is None:
        what = f"no figure for the boron that a tonne of {crop.name} takes away"
        raise UsageProblem([finding("RATE-REMOVAL", where="crop", what=what)])
    return grams * yield_t_ha / 1000.0


def _own_sd(boron: Surface, spread: Floats) -> Floats:
    if boron.transform != "log":
        return spread
    return np.asarray(boron.estimate * np.sqrt(np.expm1(spread**2)))


def _with_target_spread(
    boron: Surface,
    surfaces: Mapping[str, Surface],
    crop: Crop,
    settings: RunSettings,
    soil: Soil,
    target: Floats,
) -> Floats:
    """Decision SD of boron with the doubt of the target (through clay) added, fitted scale."""
    clay = surfaces.get("clay")
    if clay is None or clay.constant:
        return boron.decision_sd
    more_clay = np.minimum(soil.clay_pct + clay.decision_sd, 100.0)
    above, _ = target_for(crop, settings, more_clay, soil.organic_matter_pct)
    of_target = np.abs(above - target)
    if boron.transform == "log":
        of_target = of_target / np.maximum(boron.estimate, 1e-6)
    return np.asarray(np.hypot(boron.decision_sd, of_target))


def _with_hot(
    need: CellNeed, samples: SampleSet, grid: CellGrid, settings: RunSettings
) -> CellNeed:
    from dataclasses import replace

    likely = chance_over_ceiling(need, 0.0) >= limit("hot-chance")
    return replace(need, hot=likely | _near_hot_samples(need, samples, grid, settings))


def _near_hot_samples(
    need: CellNeed, samples: SampleSet, grid: CellGrid, settings: RunSettings
) -> Flags:
    """Cells within half a working width of a sample at or above its ceiling."""
    boron = samples.properties["boron"]
    cells = _cells_near(samples, grid)
    values = np.where(boron.known, boron.values, -np.inf)
    high = (values >= need.ceiling_mg_kg[cells]) & ~boron.below_limit
    struck = np.isin(np.array(samples.ids, dtype=object), list(settings.crop.confirmed_high))
    hot = np.zeros(grid.n_cells, dtype=bool)
    reach = max(settings.machine.working_width_m / 2.0, grid.cell_m)
    for place in np.flatnonzero(high & ~struck):
        area = samples.areas[place]
        if area is not None:
            hot |= shapely.contains_xy(area, grid.centres_m[:, 0], grid.centres_m[:, 1])
            continue
        gap = np.hypot(*(grid.centres_m - samples.east_north_m[place]).T)
        hot |= gap <= max(reach, float(gap.min()))
    return hot


def _cells_near(samples: SampleSet, grid: CellGrid) -> np.ndarray:
    from scipy.spatial import cKDTree

    return np.asarray(cKDTree(grid.centres_m).query(samples.east_north_m)[1])


def _need_at_samples(samples: SampleSet, grid: CellGrid, need: CellNeed) -> Floats:
    """Need at the samples themselves, from their own boron and their cell's target."""
    boron = samples.properties["boron"]
    cells = _cells_near(samples, grid)
    return np.asarray((need.target_mg_kg[cells] - boron.values) * need.mass_need[cells])


def _status_notes(sources: list[Mapping[str, str]]) -> list[Finding]:
    """One note a status: figures that rule here and were not read at their source."""
    groups: dict[str, dict[str, list[str]]] = {}
    for row in sources:
        if row["status"] in UNSURE:
            tables = groups.setdefault(row["status"], {})
            tables.setdefault(row["table"], []).append(f"{row['row']} {row['value']}")
    return [
        finding(
            "RATE-STATUS",
            where="tables",
            what=f"{status}: "
            + "; ".join(f"{name}: {', '.join(rows)}" for name, rows in of.items()),
        )
        for status, of in groups.items()
    ]

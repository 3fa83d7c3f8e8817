"""Two seasons of simulated fields: are changes found, and none invented?

python scripts/quality.py seasons                  100 fields a number of samples, both kinds
python scripts/quality.py seasons --fields 200 --samples 60

Fields are those of the zone checks (their head describes them); three zones are drawn from the
first season's samples. The second season takes samples again, at the same sites or at new ones,
with new laboratory error: once from the same soil, once from soil whose lowest true class gained
0.1 mg/kg (the standard deviation within a zone). Printed: unchanged pairs with a zone called real
(aim: at most 5 %, with the 95 % Clopper-Pearson interval), unchanged pairs with a cell called
real, zones and cells called real wrongly among all called real on changed fields, and the share
of zones that hold mostly changed ground that were found.
"""

from __future__ import annotations

import argparse
from dataclasses import replace
from datetime import date

import numpy as np
from scipy.stats import beta

from quality_checks.zone_simulation import (
    LABORATORY,
    SEPARATIONS,
    UNIT,
    Simulated,
    cell_need,
    outcome_of,
    sample_need,
    settings,
    simulate,
)
from schorl.model.change import SeasonPack, SeasonZone
from schorl.model.samples import Measured, SampleSet
from schorl.steps.comparing import compare
from schorl.steps.mapping import map_surfaces
from schorl.steps.zoning import draw_zones

KINDS = ("Z2", "Z3", "Z4", "N1", "N2")
GAIN_MG_KG = 0.10
HELD = 0.05


def main(argv: list[str]) -> int:
    """Print a table for each number of samples."""
    parser = argparse.ArgumentParser(prog="quality.py seasons", description=__doc__)
    parser.add_argument("--fields", type=int, default=100)
    parser.add_argument("--samples", type=int, action="append")
    parser.add_argument("--seed", type=int, default=2026)
    asked = parser.parse_args(argv)
    for count in asked.samples or [30, 60, 120]:
        report(count, asked.fields, asked.seed)
    return 0


def report(count: int, fields: int, seed: int) -> None:
    """Judge one number of samples."""
    cases = [(kind, separation) for kind in KINDS for separation in SEPARATIONS]
    print(f"\n{count} samples asked for, {fields} fields")
    for again in ("same sites", "new sites"):
        rows = [
            judged(*cases[place % len(cases)], count, seed=[seed, count, place],
                   new_sites=again == "new sites")
            for place in range(fields)
        ]  # fmt: skip
        _print(again, np.array(rows, dtype=float))


def _print(again: str, rows: np.ndarray) -> None:
    zones, cells, real, wrong, found, there, real_cells, wrong_cells, power = rows.T
    flagged, count = int(zones.sum()), len(zones)
    low = beta.ppf(0.025, flagged, count - flagged + 1) if flagged else 0.0
    high = beta.ppf(0.975, flagged + 1, count - flagged) if flagged < count else 1.0
    print(
        f"{again:<11} unchanged: a zone called real in {flagged / count:.3f} of the pairs "
        f"({low:.3f} to {high:.3f}, aim <= {HELD:g}), a cell in {cells.mean():.3f}"
    )
    cell_share = wrong_cells.sum() / real_cells.sum() if real_cells.sum() else 0.0
    print(
        f"{'':<11} changed:   wrong among zones called real {wrong.sum() / max(real.sum(), 1):.3f}, "
        f"among cells {cell_share:.3f}; zones found {found.sum() / max(there.sum(), 1):.2f}, "
        f"changed cells found {np.nanmean(power):.2f}",
        flush=True,
    )


def judged(
    kind: str, separation: float, count: int, *, seed: list[int], new_sites: bool
) -> tuple[float, ...]:
    """One field, sampled again unchanged and changed."""
    one = simulate(kind, separation, count, seed=seed)
    random = np.random.default_rng([*seed, 1])
    before = first_season(one)
    still = compare(before, later(before, one, one.truth["boron"], random, new_sites), draws=0)
    gained = gained_cells(one)
    boron = one.truth["boron"] + GAIN_MG_KG * gained
    moved = compare(before, later(before, one, boron, random, new_sites), draws=0)
    share = {
        zone.number: gained[one.grid.cell_of(_inside(one, zone))].mean() for zone in before.zones
    }
    real = [zone for zone in moved.zones if zone.real]
    there = [zone for zone in moved.zones if share[zone.zone] > 0.5]
    called = moved.change_map.real if moved.change_map is not None else np.zeros(len(gained), bool)
    still_cells = still.change_map is not None and bool(still.change_map.real.any())
    return (
        any(zone.real for zone in still.zones),
        still_cells,
        len(real),
        sum(share[zone.zone] < 0.05 or zone.change < 0 for zone in real),
        sum(zone.real for zone in there),
        len(there),
        called.sum(),
        (called & ~gained).sum(),
        called[gained].mean() if gained.any() else np.nan,
    )


def _inside(one: Simulated, zone: SeasonZone) -> np.ndarray:
    import shapely

    points = one.grid.centres_m
    return points[shapely.contains_xy(zone.area, points[:, 0], points[:, 1])]


def gained_cells(one: Simulated) -> np.ndarray:
    """The true class with least boron; the western half of a field without classes."""
    if one.classes.max() > 0:
        means = [one.truth["boron"][one.classes == k].mean() for k in range(one.classes.max() + 1)]
        return one.classes == int(np.argmin(means))
    east = one.grid.centres_m[:, 0]
    return east < np.median(east)


def first_season(one: Simulated) -> SeasonPack:
    """The first season's pack: three zones drawn from its samples."""
    surfaces = dict(map_surfaces(one.samples, one.grid, seed=0).surfaces)
    need = cell_need(surfaces)
    zoned = draw_zones(
        one.field, one.grid, one.samples, surfaces, need,
        sample_need_kg_ha=sample_need(one.samples),
        outcome=outcome_of(need, one.field.area_ha / one.grid.n_cells), settings=settings(count=3),
        seed=0,
    ).zone_map  # fmt: skip
    zones = tuple(
        SeasonZone(
            number=zone.number, kind=str(zone.kind), area=zone.geometry, area_ha=zone.area_ha,
            boron_mg_kg=np.nan, boron_kg_ha=1.0, product_rate=10.0, product_unit="kg/ha",
        )
        for zone in zoned.zones
    )  # fmt: skip
    dated = replace(one.samples.campaign, sampled_on=date(2025, 9, 1))
    return SeasonPack(
        field_name=one.field.name, season="first", crs=one.field.crs, boundary=one.field.boundary,
        grid=one.grid, samples=replace(one.samples, campaign=dated),
        surfaces={name: surface.estimate for name, surface in surfaces.items()}, zones=zones,
        origin=zoned.origin, heading_deg=90.0, working_width_m=24.0, crop="sugar beet",
        identity="first",
    )  # fmt: skip


def later(
    before: SeasonPack, one: Simulated, boron: np.ndarray, random: np.random.Generator, new: bool
) -> SeasonPack:
    """The second season: boron of the cells measured again."""
    places = before.samples.east_north_m
    if new:
        places = one.grid.centres_m[random.choice(one.grid.n_cells, len(places), replace=False)]
    told = boron[one.grid.cell_of(places)] + random.normal(
        0.0, np.sqrt(LABORATORY) * UNIT["boron"], len(places)
    )
    samples = SampleSet(
        ids=before.samples.ids, east_north_m=places,
        properties={
            "boron": Measured(values=np.maximum(told, 0.02), below_limit=np.zeros(len(told), bool))
        },
        kind=before.samples.kind, cores=before.samples.cores,
        campaign=replace(before.samples.campaign, sampled_on=date(2026, 9, 1)),
    )  # fmt: skip
    return replace(before, season="second", identity="second", samples=samples)

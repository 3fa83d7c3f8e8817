"""The decision between one flat rate and zones, beside other rules on the same fields."""

from __future__ import annotations

import time
from dataclasses import dataclass

import numpy as np

from quality_checks.zone_simulation import (
    KINDS,
    SEPARATIONS,
    cell_need,
    outcome_of,
    sample_need,
    settings,
    simulate,
    true_loss,
)
from schorl.model.zones import ZoneMap
from schorl.steps.mapping import map_surfaces
from schorl.steps.zoning import draw_zones
from schorl.zoning.drawing import ClusterMap, cluster_maps
from schorl.zoning.features import build_features
from schorl.zoning.indices import index_table
from schorl.zoning.structure import structure_p
from schorl.zoning.zone_count import GATE_SAVING, choose_count, enough_zones

COUNTS = (2, 3, 4, 5)
WORTH = 0.05  # a true saving from which zones are the right answer
NEED_P = 0.10  # the test of the need alone, as trials began with it
WORSE = -0.01  # a true saving below which a field was made worse
OUR_RULE = "this program"
TARGETS = {30: 0.79, 60: 0.82, 120: 0.88}
#: Name of the rule, part of the index's name, and whether it is to be low.
INDEX_RULES = (
    ("fuzziness performance", "fuzziness", True),
    ("normalised entropy", "normalised", True),
    ("modified entropy", "modified partition entropy", True),
    ("silhouette", "silhouette", False),
    ("Calinski-Harabasz", "Calinski", False),
)


@dataclass(frozen=True, kw_only=True)
class Judged:
    """One field: true saving of each number of zones, and what each rule chose."""

    kind: str
    separation: float
    true_saving: dict[int, float]  # cluster maps as they are
    chosen: dict[str, int]
    real: dict[str, float]  # true saving of what each rule chose
    predicted: float | None  # this program's predicted saving, where it zoned
    classes: int | None
    ungated: tuple[float, float]  # predicted and true saving of the three-zone map

    @property
    def worth_zones(self) -> bool:
        return max(self.true_saving.values()) >= WORTH


def judge_field(kind: str, separation: float, count: int, *, seed: list[int]) -> Judged:
    """Simulate a field, let every rule choose, and score the choices against the truth."""
    one = simulate(kind, separation, count, seed=seed)
    surfaces = dict(map_surfaces(one.samples, one.grid, seed=0).surfaces)
    need = cell_need(surfaces)
    outcome = outcome_of(need, one.field.area_ha / one.grid.n_cells)
    zoned = draw_zones(
        one.field,
        one.grid,
        one.samples,
        surfaces,
        need,
        sample_need_kg_ha=sample_need(one.samples),
        outcome=outcome,
        settings=settings(),
        seed=0,
    ).zone_map
    everywhere = np.ones(one.grid.n_cells, bool)
    table = build_features(one.grid, surfaces, need).table
    maps = cluster_maps(table, everywhere, COUNTS, seed=0)
    nothing = np.zeros(one.grid.n_cells, np.intp)
    flat = true_loss(nothing, need, one.true_need)

    def saved(labels: np.ndarray) -> float:
        return 1.0 - true_loss(labels, need, one.true_need) / flat

    true_saving = {1: 0.0} | {k: saved(found.labels) for k, found in maps.items()}
    places = one.samples.east_north_m
    need_p = structure_p(places, sample_need(one.samples), seed=0)
    chosen = _choices(zoned, table, maps, need_p=need_p)
    real = {rule: true_saving.get(k, 0.0) for rule, k in chosen.items()}
    real[OUR_RULE] = saved(zoned.labels) if zoned.count > 1 else 0.0
    predicted = {row.count: row.saving for row in zoned.table}
    return Judged(
        kind=kind,
        separation=separation,
        true_saving=true_saving,
        chosen=chosen,
        real=real,
        predicted=predicted.get(zoned.count) if zoned.count > 1 else None,
        classes=zoned.classes_found,
        ungated=(predicted.get(3, 0.0), true_saving.get(3, 0.0)),
    )


def _choices(
    zoned: ZoneMap, table: np.ndarray, maps: dict[int, ClusterMap], *, need_p: float
) -> dict[str, int]:
    savings = {row.count: row.saving for row in zoned.table}
    chosen = {
        OUR_RULE: zoned.count,
        "need alone patterned": choose_count(savings, zoned.classes_found)
        if need_p <= NEED_P and max(savings.values()) >= GATE_SAVING
        else 1,
        "without the gate": enough_zones(savings),
        "always flat": 1,
        "always 3": 3 if 3 in maps else 1,
    }
    indices = {k: index_table(table, found.centres, seed=0) for k, found in maps.items()}
    for rule, part, low in INDEX_RULES:
        figures = {
            k: next(value for name, value in row.items() if part in name)
            for k, row in indices.items()
            if any(part in name for name in row)
        }
        sign = 1.0 if low else -1.0
        chosen[rule] = min(figures, key=lambda k: sign * figures[k]) if figures else 1
    return chosen


def decisions_report(count: int, fields: int, *, seed: int, minutes: float = 1e9) -> list[Judged]:
    """Judge fields of all kinds and separations in equal shares, and print the table."""
    cases = [(kind, sep) for kind in KINDS for sep in SEPARATIONS]
    started, judged = time.perf_counter(), []
    for place in range(fields):
        kind, separation = cases[place % len(cases)]
        judged.append(judge_field(kind, separation, count, seed=[seed, count, place]))
        if time.perf_counter() - started > 60.0 * minutes:
            break
    seconds = time.perf_counter() - started
    print(f"\n{count} samples asked for, {len(judged)} fields, {seconds:.0f} s")
    _print_rules(judged, count)
    _print_ours(judged)
    return judged


def _print_rules(judged: list[Judged], count: int) -> None:
    attainable = float(np.mean([max(one.true_saving.values()) for one in judged]))
    worth = np.array([one.worth_zones for one in judged])
    noise = np.array([one.kind == "N1" for one in judged])
    print(f"attainable saving {attainable:.3f}; zones worth it in {worth.mean():.3f} of the fields")
    print(f"{'rule':<30}{'right':>7}{'noise zoned':>13}{'worse':>8}{'saving':>8}{'of attain.':>12}")
    for rule in judged[0].chosen:
        zoned = np.array([one.chosen[rule] > 1 for one in judged])
        real = np.array([one.real[rule] for one in judged])
        print(
            f"{rule:<30}{(zoned == worth).mean():>7.3f}{np.mean(zoned[noise]) if noise.any() else np.nan:>13.3f}"
            f"{(real < WORSE).mean():>8.3f}{real.mean():>8.3f}{real.mean() / attainable:>12.3f}"
        )
    print(
        f"targets for this program: right >= {TARGETS[count]:.2f} and above all, noise <= 0.04, "
        "worse <= 0.01, of attainable >= 0.85"
    )


def _print_ours(judged: list[Judged]) -> None:
    zoned = np.array([one.chosen[OUR_RULE] > 1 for one in judged])
    worth = np.array([one.worth_zones for one in judged])
    if worth.any() and (~worth).any():
        print(
            f"sensitivity {zoned[worth].mean():.3f}, specificity {(~zoned[~worth]).mean():.3f}; "
            f"noise fields {sum(one.kind == 'N1' for one in judged)}"
        )
    for separation in SEPARATIONS:
        real = [one for one in judged if one.kind[0] == "Z" and one.separation == separation]
        if real:
            found = np.mean([one.classes == int(one.kind[1]) for one in real])
            used = np.mean([one.chosen[OUR_RULE] == int(one.kind[1]) for one in real])
            print(f"separation {separation:g}: classes right {found:.2f}, zones exact {used:.2f}")
    by_kind = {
        kind: np.mean([one.chosen[OUR_RULE] > 1 for one in judged if one.kind == kind] or [np.nan])
        for kind in KINDS
    }
    print("zoned by kind:", ", ".join(f"{kind} {share:.2f}" for kind, share in by_kind.items()))
    error = np.array([one.predicted - one.real[OUR_RULE] for one in judged if one.predicted])
    if len(error):
        print(
            f"predicted less real saving where zoned: mean {error.mean():+.3f}, "
            f"root mean square {np.sqrt((error**2).mean()):.3f}, fields {len(error)}"
        )
    pairs = np.array([one.ungated for one in judged])
    error = pairs[:, 0] - pairs[:, 1]
    print(
        f"three zones on every field: mean {error.mean():+.3f}, root mean square "
        f"{np.sqrt((error**2).mean()):.3f}, correlation {np.corrcoef(pairs.T)[0, 1]:.2f}"
    )

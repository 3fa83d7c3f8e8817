"""Zones from clusters of the surfaces: the gate, the number, the shape."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from schorl.findings import Finding, finding
from schorl.model.arrays import Flags, Floats
from schorl.model.zones import CountFigure
from schorl.steps.zone_land import Drawn, Land, count_figures, need_structure_p, varying_soil
from schorl.zoning import reasons
from schorl.zoning.cover import SMALL_M2
from schorl.zoning.drawing import (
    ClusterMap,
    Shaped,
    cluster_maps,
    shape_clusters,
    shares_of,
    tolerance_of,
)
from schorl.zoning.features import Features, build_features
from schorl.zoning.indices import index_table
from schorl.zoning.loss import saving_range
from schorl.zoning.plans import compact, savings_of
from schorl.zoning.structure import GATE_P
from schorl.zoning.zone_count import (
    GATE_SAVING,
    MOST_ZONES,
    choose_count,
    discrete_classes,
    gate_open,
    sample_table,
)

#: Of a property's values, so many may lie below the reporting limit for classes to be sought in it.
MOST_BELOW = 0.20


@dataclass(frozen=True, eq=False, kw_only=True)
class _Case:
    """Everything that speaks for or against zones, before one map is chosen."""

    features: Features
    maps: dict[int, ClusterMap]
    savings: dict[int, float]
    p: float
    classes: int | None
    table: tuple[CountFigure, ...]
    findings: tuple[Finding, ...]


def clustered_zones(land: Land) -> Drawn:
    """Zones from clusters if the gate opens or a number was asked for, else one flat rate."""
    case = _case(land)
    asked = land.zoning.count
    open_ = gate_open(case.savings, case.p)
    wanted = asked or (choose_count(case.savings, case.classes) if open_ else 1)
    if wanted not in case.maps:
        return _flat(land, case, best=max(case.savings.values()))
    shares = shares_of(case.features.table, case.maps[wanted].centres, land.use)
    shaped = shape_clusters(shares, land.use, land.travel, land.ground, cells_m=land.grid.centres_m)
    # The gate once more, now for zones that a machine can follow.
    saving, left = (
        land.judge.saving(compact(shaped.labels)),
        len(np.unique(shaped.labels[land.use])),
    )
    if not asked and (saving < GATE_SAVING or left < 2):
        return _flat(land, case, best=saving)
    return _zoned(
        land, case, shaped, np.asarray(shares, dtype=np.float64), saving=saving, left=left
    )


def _case(land: Land) -> _Case:
    zoning = land.zoning
    features = build_features(
        land.grid,
        land.surfaces,
        land.need,
        zoning.extras,
        use=land.use,
        soil_only=zoning.soil_only,
    )
    counts = sorted({*range(2, MOST_ZONES + 1), *([zoning.count] if zoning.count else [])})
    maps = cluster_maps(features.table, land.use, counts, seed=land.seed)
    savings = savings_of(land.judge, {count: one.labels for count, one in maps.items()})
    rows = features.table[land.use]
    indices = {k: index_table(rows, one.centres, seed=land.seed) for k, one in maps.items()}
    return _Case(
        features=features,
        maps=maps,
        savings=savings,
        p=need_structure_p(land),
        classes=sample_classes(land),
        table=count_figures(land, savings, indices),
        findings=tuple(
            finding("ZONE-EXTRA", where=layer.name, what=features.left_out[layer.name])
            for layer in zoning.extras
            if layer.name in features.left_out
        ),
    )


def sample_classes(land: Land) -> int | None:
    """Discrete classes among the samples in use; None where they cannot say."""
    free = land.samples_in_use()
    columns: list[Floats] = []
    for _, measured in varying_soil(land):
        if _mostly_told(measured.below_limit[free]):
            columns.append(measured.values[free])
    return discrete_classes(sample_table(columns, seed=land.seed), seed=land.seed)


def _mostly_told(below: Flags) -> bool:
    return bool(len(below)) and float(below.mean()) <= MOST_BELOW


def _flat(land: Land, case: _Case, *, best: float) -> Drawn:
    asked = land.zoning.count
    found = case.findings
    if asked:
        said = f"{asked} zones were asked for; surfaces and need do not differ enough to draw them"
        found += (finding("ZONE-FEWER", where=land.field.name, what=said),)
    return Drawn(
        origin="one flat rate",
        reason=reasons.flat_reason(
            p=case.p,
            differs=case.p <= GATE_P,
            best=best,
            samples=int(land.samples_in_use().sum()),
            test="pattern",
        ),
        structure_p=case.p,
        classes=case.classes,
        table=case.table,
        findings=found,
    )


def _zoned(
    land: Land, case: _Case, shaped: Shaped, shares: Floats, *, saving: float, left: int
) -> Drawn:
    low, high = saving_range(saving, len(land.samples))
    facts = {"saving": saving, "low": low, "high": high}
    asked = land.zoning.count
    if asked:
        reason = reasons.own_count_reason(left, p=case.p, **facts)
    else:
        reason = reasons.cluster_reason(left, p=case.p, classes=case.classes, **facts)
    return Drawn(
        origin="clusters",
        reason=reason,
        lines=shaped.lines,
        label_of=shaped.label_of,
        tolerance_m=tolerance_of(land.grid.cell_m, land.ground),
        small_m2=min(SMALL_M2, 0.5 * land.ground.least_m2),
        shares=shares,
        structure_p=case.p,
        classes=case.classes,
        table=case.table,
        findings=case.findings + _count_findings(land, case, saving=saving, left=left),
    )


def _count_findings(land: Land, case: _Case, *, saving: float, left: int) -> tuple[Finding, ...]:
    asked, where = land.zoning.count, land.field.name
    found = []
    if asked and left < asked:
        said = f"{asked} zones were asked for, {left} remain that the machine can follow"
        found.append(finding("ZONE-FEWER", where=where, what=said))
    if asked and (case.p > GATE_P or saving < GATE_SAVING):
        said = (
            f"{asked} zones were asked for: pattern of need and soil p = {case.p:.3f}, expected saving "
            f"{reasons.percent(saving)}"
        )
        found.append(finding("ZONE-COUNT", where=where, what=said))
    return tuple(found)

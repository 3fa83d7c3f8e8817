"""A comparison as plain numbers and words: the ``--json`` result and its ``summary.json``."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from schorl.model.change import SeasonChange, SeasonPack
from schorl.model.summary import SCHEMA, finding_row, plain, plain_fields


def change_summary(change: SeasonChange) -> dict[str, Any]:
    """Everything a comparison found, JSON-ready; an unknown figure is None."""
    return {
        "schema": SCHEMA,
        "same": change.same,
        "text": change.text,
        "seasons": [_season(change.before), _season(change.after)],
        "common_ha": change.common_ha,
        "sites_in_both": len(change.pairs),
        "refused": change.refused,
        "shift": None if change.shift is None else plain_fields(change.shift),
        "least_detectable_mg_kg": plain(change.least_detectable_mg_kg),
        "zones": [plain_fields(one) for one in change.zones],
        "change_map": _map(change),
        "moved_ha": change.moved.moved_ha,
        "zones_matched": _matched(change),
        "rates": [plain_fields(one) for one in change.rates],
        "balance": [plain_fields(one) for one in change.balance],
        "check_strips": [
            {
                "kind": one.kind, "zones": list(one.zones), "boron_kg_ha": list(one.rates_kg_ha),
                "said": one.said,
            }
            for one in change.strips
        ],
        "revisit": [plain_fields(one) for one in change.revisit],
        "findings": [finding_row(one) for one in change.findings],
    }  # fmt: skip


def _season(pack: SeasonPack) -> dict[str, Any]:
    on = pack.samples.campaign.sampled_on
    return {
        "field": pack.field_name,
        "season": pack.season,
        "sampled_on": on.isoformat() if on else None,
        "samples": len(pack.samples),
        "zones": len(pack.zones),
        "manifest_sha256": pack.identity,
        "applied_from": pack.applied.source if pack.applied else None,
    }


def _map(change: SeasonChange) -> dict[str, Any]:
    mapped = change.change_map
    if mapped is None:
        return {"made": False, "reason": change.no_map}
    return {
        "made": True,
        "pattern": mapped.pattern,
        "real_ha": mapped.real_ha,
        "lowest_mg_kg": float(mapped.change_mg_kg.min()),
        "highest_mg_kg": float(mapped.change_mg_kg.max()),
    }


def _matched(change: SeasonChange) -> dict[str, Any]:
    moved = change.moved
    return {
        "before": list(moved.before),
        "after": list(moved.after),
        "transition_ha": moved.transition_ha.tolist(),
        "numbers_carried_on": {str(key): value for key, value in moved.kept.items()},
        "retired_numbers": list(moved.retired),
        "adjusted_rand": plain(moved.adjusted_rand),
        "kappa": plain(moved.kappa),
        "quantity_disagreement": plain(moved.quantity),
        "allocation_disagreement": plain(moved.allocation),
        "kappa_by_sampling_alone": plain(moved.by_chance[0]),
        "adjusted_rand_by_sampling_alone": plain(moved.by_chance[1]),
    }


def several(changes: Sequence[SeasonChange]) -> dict[str, Any]:
    """The result of comparing seasons in a row: the last pair's figures, and each pair's."""
    rows = [change_summary(one) for one in changes]
    return rows[-1] if len(rows) == 1 else rows[-1] | {"pairs": rows}

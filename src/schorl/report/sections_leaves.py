"""The report's part on leaf checks: what was measured in each zone, and what follows."""

from __future__ import annotations

import math

from schorl.model.record import RunRecord
from schorl.report.markup import Safe, table, tag
from schorl.report.sections_answer import section
from schorl.report.shown import UNKNOWN, figure


def leaf_section(record: RunRecord) -> Safe:
    """One row a zone: leaf boron, gap of young leaves, brix overnight, verdict, dose."""
    rows = []
    for one in record.leaf_checks:
        leaf = UNKNOWN
        if math.isfinite(one.leaf):
            leaf = f"{figure(one.leaf, 0)} ± {figure(one.leaf_error, 0)}"
        gap = UNKNOWN if math.isnan(one.gap) else f"{100 * one.gap:.0f} %"
        rows.append(
            [
                str(one.zone), str(one.samples), leaf, gap, figure(one.brix_fall, 1),
                figure(one.dose_kg_ha, 2), tag("span", one.why),
            ]
        )  # fmt: skip
    head = ["Zone", "Checks", "Leaf boron, mg/kg", "Young below old", "Brix fell by", "Boron, kg/ha",
            "Why"]  # fmt: skip
    return section(
        "leaves", "Leaves", table(head, rows, caption="Leaf checks of each zone"),
        tag(
            "p",
            "Leaf boron against the range decides. The gap between young and old leaves and brix "
            "overnight are common practice without a source: they tip what is marginal and decide "
            "nothing alone. The pass feeds the leaves it hits; the soil still needs mending.",
            class_="soft",
        ),
    )  # fmt: skip

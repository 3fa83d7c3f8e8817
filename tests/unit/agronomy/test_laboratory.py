"""Repeatability: what was said holds for boron, what was not is the table's."""

from __future__ import annotations

from schorl.agronomy.laboratory import lab_relative_sd
from schorl.model.samples import Campaign


def test_what_was_said_holds_for_boron_and_the_table_for_all_else():
    said = Campaign(method="hot water", depth_cm=20.0, lab_relative_sd=0.08)
    silent = Campaign(method="hot water", depth_cm=20.0)
    assert lab_relative_sd(said) == 0.08
    assert lab_relative_sd(silent) == 0.15
    assert lab_relative_sd(said, "clay") == lab_relative_sd(silent, "clay") == 0.05

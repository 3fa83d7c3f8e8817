"""How far a laboratory's figures repeat."""

from __future__ import annotations

from schorl.agronomy.tables import limit
from schorl.model.samples import Campaign


def lab_relative_sd(campaign: Campaign, name: str = "boron") -> float:
    """Repeatability of a property's figures as a share of the value.

    What was said of the laboratory holds for boron; what nobody said is taken from the table of
    limits (rows ``lab-sd`` and ``lab-sd-other``).
    """
    if name != "boron":
        return limit("lab-sd-other") / 100.0
    if campaign.lab_relative_sd is None:
        return limit("lab-sd") / 100.0
    return campaign.lab_relative_sd

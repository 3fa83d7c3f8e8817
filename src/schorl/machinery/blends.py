"""Boron granules thinned with a carrier, so that a machine can spread little boron evenly."""

from __future__ import annotations

from dataclasses import dataclass

from schorl.errors import UsageProblem
from schorl.findings import finding
from schorl.machinery.tables import machine_limit
from schorl.model.settings import Form, Machine, Product


@dataclass(frozen=True, slots=True, kw_only=True)
class ShareRange:
    """Shares of boron product in a blend at which a plan's rates suit the machine."""

    least: float
    most: float

    @property
    def possible(self) -> bool:
        """Whether there is such a share."""
        return self.least <= self.most


def is_blended(product: Product, machine: Machine) -> bool:
    """Whether boron leaves the machine thinned with a carrier whose rate may vary.

    A carrier with a rate of its own (a fertiliser) cannot carry varied boron: then the boron
    product is taken as spread by itself.

    Raises
    ------
    UsageProblem
        A carrier is named and it is not said whether its rate may vary (exit 2).
    """
    if product.form is not Form.GRANULE or not machine.carrier:
        return False
    if machine.carrier_may_vary is None:
        what = f"it is not said whether the rate of the carrier, {machine.carrier}, may vary"
        raise UsageProblem([finding("MACHINE-CARRIER", where="machine", what=what)])
    return machine.carrier_may_vary


def blend_share(product: Product, machine: Machine) -> float:
    """Kilograms of boron product in a kilogram of what leaves the machine.

    The job's own share (``blend_pct``), else from the carrier beside the least dose worth giving
    (``carrier_rate_kg_ha``), else such that this dose comes at the machine's least rate; 1 without
    a carrier.
    """
    if not is_blended(product, machine):
        return 1.0
    if machine.blend_pct is not None:
        return machine.blend_pct / 100.0
    least_kg_ha = machine_limit("blend-least-dose") / ((product.boron_pct or 0.0) / 100.0)
    if machine.carrier_rate_kg_ha:
        return least_kg_ha / (least_kg_ha + machine.carrier_rate_kg_ha)
    if machine.least_rate:
        return min(1.0, least_kg_ha / machine.least_rate)
    return 1.0


def share_range(
    lowest_boron_kg_ha: float, highest_boron_kg_ha: float, product: Product, machine: Machine
) -> ShareRange:
    """Shares that put the lowest rate at or above the least and the highest at or below the most."""
    boron = (product.boron_pct or 0.0) / 100.0
    most = 1.0
    if machine.least_rate:
        most = min(1.0, lowest_boron_kg_ha / boron / machine.least_rate)
    least = highest_boron_kg_ha / boron / machine.most_rate if machine.most_rate else 0.0
    return ShareRange(least=least, most=most)

"""What the contractor sets, loads and buys, for granules and sprays."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from schorl.findings import Finding, finding
from schorl.machinery.rates import boron_per_unit
from schorl.model.prescription import MachinePlan, MachinePoint
from schorl.model.settings import Form, Machine, Product

SPARE = 1.03  # product to order beyond the sum, for residues in the machine (a proposal)
CATCH_M = 100.0  # calibration distance
MOST_CV_PCT = 20.0
LEAST_GRANULES_M2 = 20.0  # below it placement is spotty (a proposal)
FOLIAR_WARN_G_L, FOLIAR_MOST_G_L = 2.5, 4.5  # leaf burn (proposals)


@dataclass(frozen=True, kw_only=True)
class MachineOutcome:
    """Product rates of the zones in their order, and the plan around them."""

    product_rates: tuple[float, ...]
    plan: MachinePlan
    findings: tuple[Finding, ...]
    unit: str
    boron_pct: float | None
    boron_g_l: float | None


def machine_plan(
    rates: Sequence[tuple[float, float]], product: Product, machine: Machine, *, foliar: bool
) -> MachineOutcome:
    """Machine figures for zones given as (area ha, boron kg/ha), boron already on the machine's steps.

    Feed kg/min = rate x speed x width / 600 and nozzle L/min = rate x speed x spacing / 600 are
    arithmetic (10,000 m² x 60 min / 1,000 m); pressure follows the square of the flow.
    """
    share = boron_per_unit(product, machine)
    product_rates = tuple(boron / share for _, boron in rates)
    treated = [(area, rate) for (area, _), rate in zip(rates, product_rates, strict=True) if rate]
    total = sum(area * rate for area, rate in treated)
    granule = product.form is Form.GRANULE
    size = machine.hopper_kg if granule else machine.tank_l
    points = _points(treated, total, product, machine)
    plan = MachinePlan(
        points=points,
        loads=total / size if size else 0.0,
        per_load=size or 0.0,
        order=_order(total, product),
        facts=_facts(total, product, machine),
        advice=_advice(product, machine),
    )
    return MachineOutcome(
        product_rates=product_rates,
        plan=plan,
        findings=tuple(_findings(points, rates, product, machine, foliar=foliar)),
        unit="kg" if granule else "L",
        boron_pct=product.boron_pct if granule else None,
        boron_g_l=None if granule else share * 1000.0,
    )


def _points(
    treated: list[tuple[float, float]], total: float, product: Product, machine: Machine
) -> tuple[MachinePoint, ...]:
    if not treated:
        return ()
    area = sum(one for one, _ in treated)
    named = [
        ("lowest", min(rate for _, rate in treated)),
        ("mean", total / area),
        ("highest", max(rate for _, rate in treated)),
    ]
    return tuple(
        MachinePoint(name=name, product_rate=rate, figures=_figures(rate, product, machine))
        for name, rate in named
    )


def _figures(rate: float, product: Product, machine: Machine) -> dict[str, float]:
    flow = rate * machine.speed_km_h * machine.working_width_m / 600.0
    catch = rate * machine.working_width_m * CATCH_M / 10_000.0
    if product.form is Form.SPRAY:
        nozzle = rate * machine.speed_km_h * machine.nozzle_spacing_m / 600.0
        return {"flow_l_min": flow, "nozzle_l_min": nozzle, "catch_l": catch}
    figures = {"feed_kg_min": flow, "catch_kg": catch}
    if product.bulk_density_kg_l:
        figures["catch_l"] = catch / product.bulk_density_kg_l
    granules = granules_per_m2(rate, product)
    if granules is not None:
        figures["granules_m2"] = granules
    return figures


def granules_per_m2(rate_kg_ha: float, product: Product) -> float | None:
    """Granules on a square metre, spheres of the stated size; None where size is not stated."""
    if not product.granule_mm or not product.granule_density_g_cm3:
        return None
    volume_cm3 = math.pi / 6.0 * (product.granule_mm / 10.0) ** 3
    return rate_kg_ha * 1000.0 / 10_000.0 / (volume_cm3 * product.granule_density_g_cm3)


def _order(total: float, product: Product) -> float:
    with_spare = total * SPARE
    if product.bag_kg:
        return math.ceil(with_spare / product.bag_kg - 1e-9) * product.bag_kg
    return with_spare


def _facts(total: float, product: Product, machine: Machine) -> dict[str, float | str]:
    facts: dict[str, float | str] = {"calibration_m": CATCH_M}
    if machine.delay_s:
        facts["look_ahead_m"] = machine.speed_km_h / 3.6 * machine.delay_s
    facts["rate_change_m"] = machine.speed_km_h / 3.6 * machine.rate_change_s
    if product.bag_kg:
        facts["bags"] = math.ceil(total * SPARE / product.bag_kg - 1e-9)
    return facts


def _advice(product: Product, machine: Machine) -> tuple[str, ...]:
    said = []
    if product.form is Form.GRANULE:
        said.append("Calibrate at the lowest and the highest rate, with the product itself.")
    else:
        said.append("One mix for the whole field: the volume changes, the concentration does not.")
    if machine.headland_m:
        said.append("Shut off on point rows and headland turns: boron must not be doubled.")
    return tuple(said)


def _findings(
    points: Sequence[MachinePoint],
    rates: Sequence[tuple[float, float]],
    product: Product,
    machine: Machine,
    *,
    foliar: bool,
) -> list[Finding]:
    found = []
    if not machine.can_do_zero and any(boron == 0 for _, boron in rates):
        what = "some areas must stay untreated, and the machine cannot shut off inside a field"
        found.append(finding("MACHINE-ZERO", where="machine", what=what))
    lowest = points[0].figures.get("granules_m2") if points else None
    if lowest is not None and lowest < LEAST_GRANULES_M2:
        what = f"{lowest:.0f} granules a square metre at the lowest rate"
        found.append(finding("MACHINE-GRANULES", where="product", what=what))
    if foliar and points:
        grams = boron_per_unit(product, machine) * 1000.0
        code = "MACHINE-BURN" if grams > FOLIAR_MOST_G_L else "MACHINE-BURN-WARN"
        if grams > FOLIAR_WARN_G_L:
            found.append(finding(code, where="mix", what=f"{grams:.1f} g B/L on leaves"))
    return found

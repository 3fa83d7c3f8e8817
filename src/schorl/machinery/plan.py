"""What the contractor sets, loads and buys, for granules and sprays."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from schorl.findings import Finding
from schorl.machinery.boom import boom_figures, injection_figures
from schorl.machinery.checks import Spread, notice
from schorl.machinery.loads import load_facts, loads_of, order_of, product_part
from schorl.machinery.mixes import mix_density_kg_l
from schorl.machinery.nozzles import nozzle_colour, nozzle_size
from schorl.machinery.rates import boron_per_unit, machine_rate, rate_band
from schorl.machinery.saying import Saying
from schorl.machinery.solids import most_boron_g_l, saturation_rows, water_temperature_c
from schorl.machinery.sprayer import settled_machine
from schorl.machinery.spreader import calibration_run_s, spreader_figures
from schorl.machinery.tables import machine_limit, trace
from schorl.machinery.ways_out import ways_out, ways_words
from schorl.model.prescription import MachinePlan, MachinePoint
from schorl.model.settings import Form, Machine, Placement, Product
from schorl.units import UnitSystem


@dataclass(frozen=True, kw_only=True)
class MachineOutcome:
    """Product and boron rates of the zones in their order, and the plan around them.

    ``machine`` has mix and nozzle filled in; ``boron_pct`` or ``boron_g_l`` is of what leaves it.
    """

    product_rates: tuple[float, ...]
    boron_kg_ha: tuple[float, ...]
    machine: Machine
    plan: MachinePlan
    findings: tuple[Finding, ...]
    unit: str
    boron_pct: float | None
    boron_g_l: float | None
    sources: tuple[Mapping[str, str], ...] = ()


def machine_plan(
    rates: Sequence[tuple[float, float]],
    product: Product,
    machine: Machine,
    *,
    placement: Placement = Placement.BROADCAST,
    wanted: Sequence[float] | None = None,
    units: UnitSystem = UnitSystem.METRIC,
) -> MachineOutcome:
    """Machine figures for zones given as (area ha, boron kg/ha).

    Parameters
    ----------
    rates
        Of every zone in order, untreated ones with rate 0. They are held to the machine's steps
        once more, which leaves rates that are on them as they are.
    wanted
        Boron before the machine, kg/ha, in the same order: what it could not give is then said
        with its cost. ``rates`` where left out.
    units
        Of sentences; figures stay metric.

    Raises
    ------
    UsageProblem
        The product's boron is not stated as a dose, or the machine in a way that cannot be (exit 2).
    """
    asked = [rate for _, rate in rates] if wanted is None else list(wanted)
    areas = [area for area, _ in rates]
    settled = settled_machine(list(zip(areas, asked, strict=True)), product, machine, placement)
    share = boron_per_unit(product, settled)
    given = machine_rate(np.array([rate for _, rate in rates], dtype=float), product, settled)
    spread = Spread(
        area_ha=tuple(areas),
        wanted_kg_ha=tuple(asked),
        given_kg_ha=tuple(float(one) for one in given),
        product=product,
        job=machine,
        machine=settled,
        placement=placement,
        saying=Saying(system=units, form=product.form),
    )
    plan = _plan(spread, share)
    granule = product.form is Form.GRANULE
    return MachineOutcome(
        product_rates=tuple(one / share for one in spread.given_kg_ha),
        boron_kg_ha=spread.given_kg_ha,
        machine=settled,
        plan=plan,
        findings=notice(spread, plan.points),
        unit="kg" if granule else "L",
        boron_pct=_boron_pct(share, product) if granule else None,
        boron_g_l=None if granule else share * 1000.0,
        sources=_sources(spread),
    )


def _boron_pct(share: float, product: Product) -> float | None:
    """The label's own figure where nothing thins it."""
    pct = product.boron_pct or 0.0
    return pct if abs(100.0 * share - pct) < 1e-9 else round(100.0 * share, 12)


def _plan(spread: Spread, share: float) -> MachinePlan:
    product, machine = spread.product, spread.machine
    total = spread.boron_kg / share
    size = machine.hopper_kg if product.form is Form.GRANULE else machine.tank_l
    part, unit = product_part(product, machine)
    return MachinePlan(
        points=_points(spread, share, part),
        loads=loads_of(total, size).count,
        per_load=size or 0.0,
        order=order_of(total * part, unit, product).amount,
        facts=_facts(spread, total),
        advice=_advice(spread),
    )


def _points(spread: Spread, share: float, part: float) -> tuple[MachinePoint, ...]:
    """Figures at the lowest, the area's mean and the highest treated rate."""
    if not spread.treated:
        return ()
    rates = [rate / share for _, rate in spread.treated]
    area = sum(one for one, _ in spread.treated)
    named = {
        "lowest": min(rates),
        "mean": spread.boron_kg / share / area,
        "highest": max(rates),
    }
    return tuple(
        MachinePoint(name=name, product_rate=rate, figures=_figures(rate, spread, part))
        for name, rate in named.items()
    )


def _figures(rate: float, spread: Spread, part: float) -> dict[str, float]:
    product, machine = spread.product, spread.machine
    if product.form is Form.GRANULE:
        return spreader_figures(rate, product, machine, share=part)
    if spread.placement is Placement.FERTIGATION:
        return injection_figures(rate, machine)
    return boom_figures(rate, product, machine)


def _facts(spread: Spread, total: float) -> dict[str, float | str]:
    product, machine = spread.product, spread.machine
    facts: dict[str, float | str] = {}
    if spread.placement is Placement.FERTIGATION:
        facts["events"] = machine.events
    else:
        metres_s = machine.speed_km_h / 3.6
        facts["calibration_m"] = machine_limit("calibration-run")
        facts["calibration_s"] = calibration_run_s(machine)
        if machine.delay_s:
            facts["look_ahead_m"] = metres_s * machine.delay_s
        facts["rate_change_m"] = metres_s * machine.rate_change_s
    if product.form is Form.SPRAY:
        facts |= _mix_facts(spread)
    return facts | load_facts(total, product, machine)


def _mix_facts(spread: Spread) -> dict[str, float | str]:
    product, machine = spread.product, spread.machine
    mix = machine.mix_g_b_l or 0.0
    facts: dict[str, float | str] = {"mix_g_b_l": mix}
    density = mix_density_kg_l(product, mix)
    if abs(density - 1.0) > 5e-4:
        facts["mix_density_kg_l"] = density
    most = most_boron_g_l(product, machine.water_temperature_c)
    if most is not None:
        facts["dissolves_g_b_l"] = most
    if machine.nozzle_size:
        size = nozzle_size(machine.nozzle_size)
        facts["nozzle_size"] = size
        facts["nozzle_colour"] = nozzle_colour(size)
        least, most_l = rate_band(product, machine)
        facts["least_l_ha"], facts["most_l_ha"] = least, most_l
    return facts


def _advice(spread: Spread) -> tuple[str, ...]:
    said = []
    if spread.product.form is Form.GRANULE:
        said.append("Calibrate at the lowest and the highest rate, with the product itself.")
        if spread.blended:
            said.append(
                "Blend and carrier differ in size and weight: keep the grain sizes close, mix "
                "shortly before spreading, and do not let the load part on the way."
            )
    elif spread.placement is Placement.FERTIGATION:
        said.append(
            f"Each zone is a block: rate x its area goes in, in {spread.machine.events} equal "
            "part(s); then flush the lines, and guard the source against backflow."
        )
    else:
        said.append("One mix for the whole field: the volume changes, the concentration does not.")
    if spread.machine.headland_m:
        said.append("Shut off on point rows and headland turns: boron must not be doubled.")
    ways = ways_out(spread.doses_wanted, spread.turndown)
    return (*said, *ways_words(ways, spread.saying)) if spread.sprayed else tuple(said)


def _sources(spread: Spread) -> tuple[Mapping[str, str], ...]:
    """Rows behind the figures of this plan."""
    rows = [trace("machine_limits", "order-spare")]
    if spread.blended:
        rows.append(trace("machine_limits", "blend-least-dose"))
    if spread.product.granule_mm and spread.product.granule_density_g_cm3:
        rows.append(trace("machine_limits", "granules-least"))
    if spread.placement is Placement.FOLIAR:
        rows += [trace("machine_limits", name) for name in ("foliar-warn", "foliar-most")]
    if spread.sprayed and spread.machine.nozzle_size:
        rows.append(trace("nozzles", nozzle_size(spread.machine.nozzle_size)))
    if spread.solid is not None:
        celsius = water_temperature_c(spread.machine.water_temperature_c)
        rows += [trace("solubility", name) for name in saturation_rows(spread.solid, celsius)]
        rows += [trace("solids", spread.solid.name), trace("machine_limits", "solubility-margin")]
    return tuple(rows)

"""Choosing what a spray leaves open: strength of the mix and size of the nozzle."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from schorl.machinery.mixes import strength_g_l
from schorl.machinery.nozzles import nozzle_flow_l_min, nozzle_sizes, pressure_bar, volume_band_l_ha
from schorl.machinery.rates import machine_rate
from schorl.machinery.solids import most_boron_g_l
from schorl.machinery.tables import machine_limit
from schorl.model.settings import Form, Machine, Placement, Product

Doses = Sequence[tuple[float, float]]  # (area ha, boron kg/ha) a zone
INSIDE = 0.99  # a chosen mix stays this far inside the nozzle's band


def settled_machine(
    doses: Doses, product: Product, machine: Machine, placement: Placement
) -> Machine:
    """The machine with mix and nozzle size filled in where the job leaves them open.

    One mix for the whole field: the volume varies, the strength does not. Of all sizes, and of
    volumes near the wanted one (``water_l_ha`` at the highest rate, else 200 L/ha), the pair that
    leaves the least boron ungiven is taken, then the one whose pressure is nearest to 3 bar and
    whose volume is nearest to the wanted one. Granules come back as they are.

    Parameters
    ----------
    doses
        (area ha, wanted boron kg/ha) of each zone, before the machine.
    """
    if product.form is not Form.SPRAY:
        return machine
    if placement is Placement.FERTIGATION:
        return replace(machine, mix_g_b_l=machine.mix_g_b_l or _stock_g_l(product, machine))
    if machine.mix_g_b_l is not None and machine.nozzle_size:
        return machine
    treated = [(area, rate) for area, rate in doses if rate > 0]
    if not treated:
        treated = [(1.0, 1.0)]  # any valid mix: nothing is sprayed
    choices = list(_choices(treated, product, machine, placement))
    return min(choices, key=lambda one: _badness(one, treated, product, machine))


def _stock_g_l(product: Product, machine: Machine) -> float:
    """Strength of what is injected: the liquid itself, or what cold water safely holds."""
    strength = strength_g_l(product)
    most = most_boron_g_l(product, machine.water_temperature_c)
    return strength if strength is not None else _rounded_down(most or 0.0)


def strongest_mix_g_l(product: Product, machine: Machine, placement: Placement) -> float:
    """The strongest mix that product, cold water and leaves allow, g B/L."""
    limits = [strength_g_l(product), most_boron_g_l(product, machine.water_temperature_c)]
    if placement is Placement.FOLIAR:
        limits.append(machine_limit("foliar-warn"))
    return min(one for one in limits if one is not None)


def _choices(
    treated: Doses, product: Product, machine: Machine, placement: Placement
) -> Iterator[Machine]:
    sizes = (machine.nozzle_size,) if machine.nozzle_size else nozzle_sizes()
    for size in sizes:
        fitted = replace(machine, nozzle_size=size)
        if machine.mix_g_b_l is not None:
            yield fitted
            continue
        mix = _mix_for(treated, product, fitted, placement)
        yield replace(fitted, mix_g_b_l=mix)


def _mix_for(treated: Doses, product: Product, machine: Machine, placement: Placement) -> float:
    """A mix at which this nozzle reaches the highest rate, and the lowest too if it can.

    The density of the mix is left out here; rates are held to the band with it.
    """
    rates = [rate for _, rate in treated]
    highest, ratio = max(rates), max(rates) / min(rates)
    low, high = volume_band_l_ha(machine)
    low, high = max(low, machine.least_rate or 0.0), min(high, machine.most_rate or math.inf)
    volume = _wanted_l_ha(machine)
    if not machine.water_l_ha:
        volume = min(max(volume, low * ratio / INSIDE), high * INSIDE)
    mix = min(1000.0 * highest / volume, strongest_mix_g_l(product, machine, placement))
    plain = _rounded_down(mix)
    # A rounder figure must not push the highest rate over what the machine can do.
    return plain if 1000.0 * highest / plain <= high else mix


def _wanted_l_ha(machine: Machine) -> float:
    return machine.water_l_ha or machine_limit("spray-volume")


def _rounded_down(value: float) -> float:
    """Three figures, so that what is printed is what is meant."""
    if value <= 0.0:
        return value
    step = 10.0 ** (math.floor(math.log10(value)) - 2)
    return float(f"{math.floor(value / step + 1e-9) * step:.3g}")


def _badness(
    one: Machine, treated: Doses, product: Product, machine: Machine
) -> tuple[float, float, str]:
    """Boron not given, then distance from 3 bar and from the wanted volume, then the size."""
    area, wanted = np.array([ha for ha, _ in treated]), np.array([rate for _, rate in treated])
    given = machine_rate(wanted, product, one)
    short = float((area * (wanted - given)).sum())
    mix = one.mix_g_b_l or 1.0
    mean_l_ha = 1000.0 * float((area * wanted).sum() / area.sum()) / mix
    bar = pressure_bar(one.nozzle_size, nozzle_flow_l_min(mean_l_ha, one))
    off = abs(math.log(bar / machine_limit("nozzle-reference-pressure")))
    top_l_ha = 1000.0 * float(wanted.max()) / mix
    off += abs(math.log(top_l_ha / _wanted_l_ha(machine)))
    return round(short / max(float((area * wanted).sum()), 1e-12), 3), off, one.nozzle_size

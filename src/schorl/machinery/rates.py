"""Between boron and product, and what a machine can really do with a rate."""

from __future__ import annotations

import math

import numpy as np

from schorl.errors import UsageProblem
from schorl.machinery.blends import blend_share
from schorl.machinery.mixes import missing_share, mix_density_kg_l, product_per_litre, strength_g_l
from schorl.machinery.nozzles import volume_band_l_ha
from schorl.model.arrays import Floats
from schorl.model.settings import Form, Machine, Product

#: A rate this far under a step, kg/ha or L/ha, still counts as that step.
STEP_TOLERANCE = 1e-6
EDGE = 1e-9  # relative, at the least and most rate


def volume_known(product: Product, machine: Machine) -> bool:
    """Whether boron fixes what leaves the machine: not for a spray whose mix is still to choose."""
    return product.form is Form.GRANULE or machine.mix_g_b_l is not None


def boron_per_unit(product: Product, machine: Machine | None = None) -> float:
    """Kilograms of boron in one kg (granule, blend) or one litre (mix) of what leaves the machine.

    A liquid whose mix is not chosen counts undiluted.

    Raises
    ------
    UsageProblem
        A liquid given by a bare % without density, a mix stronger than its product, a carrier
        that may or may not vary, or nothing given at all (exit 2).
    """
    if product.form is Form.SPRAY:
        if machine is not None and machine.mix_g_b_l is not None:
            product_per_litre(product, machine.mix_g_b_l)
            return machine.mix_g_b_l / 1000.0
        strength = strength_g_l(product)
        if strength is None:
            what = "a powder that is dissolved has no dose before its mix is chosen"
            raise UsageProblem([missing_share(what)])
        return strength / 1000.0
    if product.boron_pct is None:
        raise UsageProblem([missing_share("the share of boron of a granule is not given in %")])
    share = 1.0 if machine is None else blend_share(product, machine)
    return product.boron_pct / 100.0 * share


def rate_band(product: Product, machine: Machine) -> tuple[float, float]:
    """Least and most kg/ha or L/ha that machine and nozzle can do (0 and infinity where free)."""
    least, most = machine.least_rate or 0.0, machine.most_rate or math.inf
    if product.form is Form.SPRAY and machine.nozzle_size and machine.mix_g_b_l is not None:
        density = mix_density_kg_l(product, machine.mix_g_b_l)
        low, high = volume_band_l_ha(machine, density)
        least, most = max(least, low), min(most, high)
    return least, most


def step_boron_kg_ha(product: Product, machine: Machine) -> float:
    """Boron in one step of the rate; 0 without steps or before the mix is chosen."""
    if not machine.step or not volume_known(product, machine):
        return 0.0
    return machine.step * boron_per_unit(product, machine)


def machine_rate(boron_kg_ha: Floats | float, product: Product, machine: Machine) -> Floats:
    """Boron rate a machine really gives for a wanted one, kg/ha, elementwise.

    Down to its most, down to its step (a rate within a millionth of a step counts as that step),
    to 0 below its least rate; nozzles have a least and a most of their own. Never above what was
    wanted. A spray whose mix is still to choose gives what is wanted: its mix is chosen to suit.
    """
    wanted_boron = np.asarray(boron_kg_ha, dtype=np.float64)
    if not volume_known(product, machine):
        strength_g_l(product)
        return wanted_boron.copy()
    share = boron_per_unit(product, machine)
    wanted = wanted_boron / share
    least, most = rate_band(product, machine)
    rate = np.minimum(wanted, most)
    if machine.step:
        rate = np.floor((rate + STEP_TOLERANCE) / machine.step) * machine.step
    rate = np.where(rate < least * (1.0 - EDGE), 0.0, rate)
    # Neither a step found within the tolerance nor the way through product may add boron.
    return np.asarray(np.minimum(rate * share, wanted_boron))

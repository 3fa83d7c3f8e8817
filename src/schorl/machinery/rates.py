"""Between boron and product, and what a machine can really do with a rate."""

from __future__ import annotations

import numpy as np

from schorl.errors import UsageProblem
from schorl.findings import Finding, finding
from schorl.model.arrays import Floats
from schorl.model.settings import Form, Machine, Product


def boron_per_unit(product: Product, machine: Machine | None = None) -> float:
    """Kilograms of boron in one kg (granule) or one litre (spray mix) of what leaves the machine.

    Raises
    ------
    UsageProblem
        A liquid given by a bare % without density, or nothing given at all (exit 2).
    """
    if product.form is Form.SPRAY:
        if machine is not None and machine.mix_g_b_l is not None:
            return machine.mix_g_b_l / 1000.0
        return _liquid(product)
    if product.boron_pct is None:
        raise UsageProblem([_missing("the share of boron of a granule is not given in %")])
    return product.boron_pct / 100.0


def _liquid(product: Product) -> float:
    if product.boron_g_l is not None:
        return product.boron_g_l / 1000.0
    if product.boron_pct is not None and product.density_kg_l is not None:
        return product.boron_pct / 100.0 * product.density_kg_l
    raise UsageProblem(
        [
            _missing(
                f"{product.boron_pct:g} % of a liquid without its density is not a dose"
                if product.boron_pct is not None
                else "the boron of a liquid is not given"
            )
        ]
    )


def _missing(what: str) -> Finding:
    return finding(
        "MACHINE-SHARE",
        where="product",
        what=what,
        hint="give `--boron-pct` for a granule; `--boron-g-l`, or `--boron-pct` with "
        "`--density-kg-l`, for a liquid",
    )


def machine_rate(boron_kg_ha: Floats | float, product: Product, machine: Machine) -> Floats:
    """Boron rate a machine really gives for a wanted one, kg/ha, elementwise.

    Down to its step (a rate within a millionth of a step counts as that step), to 0 below its
    least rate, down to its most. Never above what was wanted.
    """
    share = boron_per_unit(product, machine)
    wanted = np.asarray(boron_kg_ha, dtype=np.float64) / share
    rate = wanted
    if machine.most_rate is not None:
        rate = np.minimum(rate, machine.most_rate)
    if machine.step:
        rate = np.floor((rate + 1e-6) / machine.step) * machine.step
        # A step found within the tolerance must still not exceed what was wanted.
        rate = np.minimum(rate, wanted)
    if machine.least_rate:
        rate = np.where(rate + 1e-9 < machine.least_rate, 0.0, rate)
    return np.asarray(rate * share)

"""Figures of a spreader at one rate: feed, calibration catch, granules on the ground."""

from __future__ import annotations

import math

from schorl.machinery.blends import is_blended
from schorl.machinery.tables import machine_limit
from schorl.model.settings import Machine, Product


def feed_per_min(rate_per_ha: float, speed_km_h: float, width_m: float) -> float:
    """Kilograms or litres a minute from a rate, speed and width.

    Arithmetic: 10,000 m² x 60 min / 1,000 m = 600.
    """
    return rate_per_ha * speed_km_h * width_m / 600.0


def calibration_run_s(machine: Machine) -> float:
    """Seconds that the calibration run takes at the machine's speed."""
    return machine_limit("calibration-run") / (machine.speed_km_h / 3.6)


def catch_per_run(rate_per_ha: float, machine: Machine) -> float:
    """Kilograms or litres that leave the whole machine over the calibration run."""
    return rate_per_ha * machine.working_width_m * machine_limit("calibration-run") / 10_000.0


def granule_mg(product: Product) -> float | None:
    """Mass of one granule, a sphere of the stated size; None where it is not stated."""
    if not product.granule_mm or not product.granule_density_g_cm3:
        return None
    volume_mm3 = math.pi / 6.0 * product.granule_mm**3
    return volume_mm3 * product.granule_density_g_cm3


def granules_per_m2(boron_product_kg_ha: float, product: Product) -> float | None:
    """Granules of boron product on a square metre: kg/ha x 100 / mg."""
    mass_mg = granule_mg(product)
    return None if mass_mg is None else 100.0 * boron_product_kg_ha / mass_mg


def spreader_figures(
    rate_kg_ha: float, product: Product, machine: Machine, *, share: float
) -> dict[str, float]:
    """What is set and caught at one rate; ``share`` is the boron product's part in it.

    The catch by volume needs the loose density of what leaves the machine: that of a blend is not
    the product's.
    """
    figures = {
        "feed_kg_min": feed_per_min(rate_kg_ha, machine.speed_km_h, machine.working_width_m),
        "catch_kg": catch_per_run(rate_kg_ha, machine),
    }
    if product.bulk_density_kg_l and not is_blended(product, machine):
        figures["catch_l"] = figures["catch_kg"] / product.bulk_density_kg_l
    granules = granules_per_m2(rate_kg_ha * share, product)
    if granules is not None:
        figures["granules_m2"] = granules
    return figures

"""How much boron changes the soil test: mass of the soil a figure stands for."""

from __future__ import annotations

import numpy as np

from schorl.agronomy.tables import limit
from schorl.model.arrays import Floats


def bulk_density_g_cm3(
    sand_pct: Floats | float, clay_pct: Floats | float, organic_matter_pct: Floats | float
) -> Floats:
    """Bulk density from texture and organic matter, g/cm³.

    Saxton & Rawls 2006, Soil Sci. Soc. Am. J. 70:1569-1578, equations for saturated moisture and
    normal density; organic matter is held to 0.5 to 5 % and the result to 0.9 to 1.7 g/cm³.
    """
    om = np.clip(organic_matter_pct, limit("density-om-least"), limit("density-om-most"))
    sand = np.asarray(sand_pct, dtype=np.float64) / 100.0
    clay = np.asarray(clay_pct, dtype=np.float64) / 100.0
    third = -0.251 * sand + 0.195 * clay + 0.011 * om + 0.006 * sand * om
    third = third - 0.027 * clay * om + 0.452 * sand * clay + 0.299
    moisture_33 = third + 1.283 * third**2 - 0.374 * third - 0.015
    gap = 0.278 * sand + 0.034 * clay + 0.022 * om - 0.018 * sand * om
    gap = gap - 0.027 * clay * om - 0.584 * sand * clay + 0.078
    moisture_gap = gap + 0.636 * gap - 0.107
    saturated = moisture_33 + moisture_gap - 0.097 * sand + 0.043
    density = 2.65 * (1.0 - saturated)
    return np.asarray(np.clip(density, limit("density-least"), limit("density-most")))


def kg_ha_per_mg_kg(
    density_g_cm3: Floats | float, depth_cm: float, *, stones_pct: float = 0.0
) -> Floats:
    """Kilograms of boron a hectare that change the test by 1 mg/kg: 0.1 x density x depth.

    Mass balance; stones by volume carry no fine earth. A test per volume (mg/L of soil) uses a
    density of 1.
    """
    return np.asarray(0.1 * np.asarray(density_g_cm3) * depth_cm * (1.0 - stones_pct / 100.0))


def need_depth_cm(sampling_depth_cm: float) -> float:
    """Depth of the need: the sampling depth, at most 20 cm."""
    return min(sampling_depth_cm, limit("need-depth-most"))


def ceiling_depth_cm(incorporation_cm: float | None) -> float:
    """Depth of the soil ceiling: that of incorporation, 10 cm where boron stays on top."""
    return limit("ceiling-depth") if incorporation_cm is None else incorporation_cm

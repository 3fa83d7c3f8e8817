"""Exact factors between units; arithmetic only, no agronomy.

International pound and acre: 1 lb = 0.45359237 kg, 1 acre = 4046.8564224 m² (1959 agreement).
"""

from __future__ import annotations

from enum import StrEnum

KG_PER_LB = 0.45359237
HA_PER_ACRE = 0.40468564224
KG_HA_PER_LB_ACRE = KG_PER_LB / HA_PER_ACRE
L_PER_US_GAL = 3.785411784
L_HA_PER_US_GAL_ACRE = L_PER_US_GAL / HA_PER_ACRE
G_L_PER_LB_100_GAL = 1000.0 * KG_PER_LB / (100.0 * L_PER_US_GAL)
M_PER_FT = 0.3048
KM_PER_MILE = 1.609344
CM_PER_INCH = 2.54
BAR_PER_PSI = 0.0689475729316836


class UnitSystem(StrEnum):
    """Units shown to people; files always state their own."""

    METRIC = "metric"
    US = "us"

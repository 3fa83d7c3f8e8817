"""Figures as people see them: rounding, metric or US units, and the words for units."""

from __future__ import annotations

import math
from dataclasses import dataclass

from schorl import units
from schorl.units import UnitSystem

UNKNOWN = "–"


def figure(value: float | None, decimals: int) -> str:
    """A number with fixed decimals and thin groups; a dash where there is none.

    >>> figure(1234.5, 1)
    '1,234.5'
    """
    if value is None or not math.isfinite(value):
        return UNKNOWN
    said = f"{value:,.{decimals}f}"
    return said[1:] if said.startswith("-") and not said.strip("-0.,") else said


def percent(share: float | None) -> str:
    """A share as a whole per cent; small ones are not called nothing.

    >>> percent(0.004), percent(0.0), percent(0.997)
    ('under 1 %', '0 %', 'over 99 %')
    """
    if share is None or not math.isfinite(share):
        return UNKNOWN
    if 0 < share < 0.005:
        return "under 1 %"
    if 0.995 <= share < 1:
        return "over 99 %"
    return f"{100 * share:.0f} %"


def total_decimals(value: float) -> int:
    """Decimals for a sum: whole numbers from 100 on."""
    return 0 if abs(value) >= 100 else 1


@dataclass(frozen=True, slots=True)
class Shown:
    """Words and factors of one unit system; ``product`` is "kg" or "L" of what leaves the machine."""

    system: UnitSystem
    product: str

    @property
    def us(self) -> bool:
        """Whether US units are shown."""
        return self.system is UnitSystem.US

    @property
    def area_unit(self) -> str:
        """Unit of areas."""
        return "ac" if self.us else "ha"

    @property
    def boron_unit(self) -> str:
        """Unit of masses of boron."""
        return "lb" if self.us else "kg"

    @property
    def product_unit(self) -> str:
        """Unit of amounts of product."""
        if not self.us:
            return self.product
        return "lb" if self.product == "kg" else "gal"

    @property
    def rate_unit(self) -> str:
        """Unit of rates of product."""
        return f"{self.product_unit}/{self.area_unit}"

    @property
    def boron_rate_unit(self) -> str:
        """Unit of rates of boron."""
        return f"{self.boron_unit}/{self.area_unit}"

    @property
    def length_unit(self) -> str:
        """Unit of distances."""
        return "ft" if self.us else "m"

    def area_figure(self, ha: float) -> str:
        """An area without its unit."""
        return figure(ha / units.HA_PER_ACRE if self.us else ha, 2)

    def area(self, ha: float) -> str:
        """An area with its unit."""
        return f"{self.area_figure(ha)} {self.area_unit}"

    def rate_value(self, per_ha: float) -> float:
        """A rate of product in the units shown."""
        if not self.us:
            return per_ha
        factor = units.KG_HA_PER_LB_ACRE if self.product == "kg" else units.L_HA_PER_US_GAL_ACRE
        return per_ha / factor

    def rate_figure(self, per_ha: float) -> str:
        """A rate of product without its unit: as exact as the files, two decimals where needed."""
        value = self.rate_value(per_ha)
        return figure(value, 2 if self.us or abs(round(value, 1) - value) >= 0.005 else 1)

    def rate(self, per_ha: float) -> str:
        """A rate of product with its unit."""
        return f"{self.rate_figure(per_ha)} {self.rate_unit}"

    def boron_rate_figure(self, kg_ha: float | None) -> str:
        """A rate of boron without its unit."""
        if kg_ha is None:
            return UNKNOWN
        return figure(kg_ha / units.KG_HA_PER_LB_ACRE if self.us else kg_ha, 2)

    def boron_rate(self, kg_ha: float) -> str:
        """A rate of boron with its unit."""
        return f"{self.boron_rate_figure(kg_ha)} {self.boron_unit} B/{self.area_unit}"

    def boron(self, kg: float) -> str:
        """A mass of boron with its unit."""
        value = kg / units.KG_PER_LB if self.us else kg
        return f"{figure(value, total_decimals(value))} {self.boron_unit}"

    def amount(self, kg_or_l: float) -> str:
        """An amount of product with its unit."""
        factor = 1.0
        if self.us:
            factor = units.KG_PER_LB if self.product == "kg" else units.L_PER_US_GAL
        value = kg_or_l / factor
        return f"{figure(value, total_decimals(value))} {self.product_unit}"

    def length(self, metres: float, decimals: int = 0) -> str:
        """A distance with its unit."""
        return (
            f"{figure(metres / units.M_PER_FT if self.us else metres, decimals)} {self.length_unit}"
        )

    def speed(self, km_h: float) -> str:
        """A speed with its unit."""
        return f"{km_h / units.KM_PER_MILE:.1f} mph" if self.us else f"{km_h:g} km/h"

    def depth(self, cm: float) -> str:
        """A soil depth with its unit."""
        return f"{cm / units.CM_PER_INCH:.1f} in" if self.us else f"{cm:g} cm"

"""Amounts in the words of one unit system, for sentences that people read."""

from __future__ import annotations

from dataclasses import dataclass

from schorl import units
from schorl.model.settings import Form
from schorl.units import UnitSystem


@dataclass(frozen=True, slots=True, kw_only=True)
class Saying:
    """Words for amounts of product (kg or L of what leaves the machine), boron and land."""

    system: UnitSystem = UnitSystem.METRIC
    form: Form = Form.GRANULE

    @property
    def us(self) -> bool:
        """Whether US units are said."""
        return self.system is UnitSystem.US

    def product(self, amount: float) -> str:
        """Kilograms or litres of what leaves the machine."""
        return self.kilograms(amount) if self.form is Form.GRANULE else self.litres(amount)

    def kilograms(self, kg: float) -> str:
        """A mass."""
        return _said(kg / units.KG_PER_LB, "lb") if self.us else _said(kg, "kg")

    def litres(self, litres: float) -> str:
        """A volume."""
        return _said(litres / units.L_PER_US_GAL, "gal") if self.us else _said(litres, "L")

    def rate(self, per_ha: float) -> str:
        """A rate of what leaves the machine."""
        if not self.us:
            return _said(per_ha, "kg/ha" if self.form is Form.GRANULE else "L/ha")
        if self.form is Form.GRANULE:
            return _said(per_ha / units.KG_HA_PER_LB_ACRE, "lb/ac")
        return _said(per_ha / units.L_HA_PER_US_GAL_ACRE, "gal/ac")

    def boron(self, kg: float) -> str:
        """A mass of boron."""
        value, unit = (kg / units.KG_PER_LB, "lb") if self.us else (kg, "kg")
        return f"{value:.2f} {unit} B"

    def boron_rate(self, kg_ha: float) -> str:
        """A rate of boron."""
        value, unit = (kg_ha / units.KG_HA_PER_LB_ACRE, "lb") if self.us else (kg_ha, "kg")
        return f"{value:.2f} {unit} B/{'ac' if self.us else 'ha'}"

    def area(self, ha: float) -> str:
        """An area."""
        return f"{ha / units.HA_PER_ACRE:.2f} ac" if self.us else f"{ha:.2f} ha"

    def length(self, metres: float) -> str:
        """A distance."""
        return f"{metres / units.M_PER_FT:.0f} ft" if self.us else f"{metres:.0f} m"

    def pressure(self, bar: float) -> str:
        """A pressure."""
        return f"{bar / units.BAR_PER_PSI:.0f} psi" if self.us else f"{bar:.1f} bar"

    def strength(self, grams_l: float) -> str:
        """Boron in a liquid; pounds in 100 gallons are usual beside grams a litre."""
        if not self.us:
            return f"{grams_l:.3g} g B/L"
        return f"{grams_l / units.G_L_PER_LB_100_GAL:.3g} lb B/100 gal ({grams_l:.3g} g B/L)"

    def temperature(self, celsius: float) -> str:
        """A temperature."""
        return f"{celsius * 1.8 + 32.0:.0f} °F" if self.us else f"{celsius:.0f} °C"


def _said(value: float, unit: str) -> str:
    decimals = 0 if abs(value) >= 1000 else 1 if abs(value) >= 10 else 2
    return f"{value:,.{decimals}f} {unit}"

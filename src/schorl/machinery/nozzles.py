"""Nozzles by their ISO 10625 size: flow, pressure, and the volumes that a band of pressure gives.

Flow goes with the square root of pressure (orifice law) and with one over the square root of
density; L/min = L/ha x km/h x m / 600 is arithmetic (10,000 m² x 60 min / 1,000 m).
"""

from __future__ import annotations

import math

from schorl.errors import UsageProblem
from schorl.findings import finding
from schorl.machinery.tables import machine_limit, table
from schorl.model.settings import Machine


def nozzle_sizes() -> tuple[str, ...]:
    """All sizes of the table, the smallest first."""
    return tuple(table("nozzles"))


def nozzle_size(text: str) -> str:
    """A size as the standard writes it ("4", "04" and "110-04" are 04; "2.5" is 025).

    Raises
    ------
    UsageProblem
        No such size (exit 2).
    """
    last = text.strip().split("-")[-1].strip()
    known = table("nozzles")
    tries = [last, last.zfill(2), f"0{last.replace('.', '')}", last.replace(".", "")]
    for size in tries:
        if size in known:
            return size
    what = f"there is no nozzle size `{text}`"
    hint = f"one of {', '.join(known)}"
    raise UsageProblem([finding("MACHINE-NOZZLE", where="machine", what=what, hint=hint)])


def nozzle_colour(size: str) -> str:
    """The standard's colour of a size."""
    return table("nozzles")[size]["colour"]


def water_flow_l_min(size: str, pressure_bar: float) -> float:
    """Flow of water through one nozzle."""
    nominal = float(table("nozzles")[size]["value"])
    return nominal * math.sqrt(pressure_bar / machine_limit("nozzle-reference-pressure"))


def pressure_bar(size: str, flow_l_min: float, density_kg_l: float = 1.0) -> float:
    """Pressure at which a nozzle lets a flow of that density through."""
    reference = machine_limit("nozzle-reference-pressure")
    nominal = float(table("nozzles")[size]["value"])
    return reference * density_kg_l * (flow_l_min / nominal) ** 2


def nozzle_flow_l_min(volume_l_ha: float, machine: Machine) -> float:
    """Flow of one nozzle at a volume, the machine's speed and its nozzle spacing."""
    return volume_l_ha * machine.speed_km_h * machine.nozzle_spacing_m / 600.0


def volume_l_ha(flow_l_min: float, machine: Machine) -> float:
    """Volume on the ground from the flow of one nozzle."""
    return 600.0 * flow_l_min / (machine.speed_km_h * machine.nozzle_spacing_m)


def volume_band_l_ha(machine: Machine, density_kg_l: float = 1.0) -> tuple[float, float]:
    """Least and most L/ha that the machine's nozzle gives inside its band of pressure.

    Pulsed nozzles run at one pressure, taken as the band's upper end, and go down from there by
    their ratio.
    """
    size = nozzle_size(machine.nozzle_size)
    thin = 1.0 / math.sqrt(density_kg_l)
    most = volume_l_ha(thin * water_flow_l_min(size, machine.pressure_high_bar), machine)
    if machine.pulse_width_ratio:
        return most / machine.pulse_width_ratio, most
    return volume_l_ha(thin * water_flow_l_min(size, machine.pressure_low_bar), machine), most

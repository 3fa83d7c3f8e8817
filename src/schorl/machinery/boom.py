"""Figures of a sprayer at one rate: flow, nozzle, pressure; and of injection into irrigation."""

from __future__ import annotations

from schorl.machinery.mixes import mix_density_kg_l
from schorl.machinery.nozzles import nozzle_flow_l_min, pressure_bar, water_flow_l_min
from schorl.machinery.spreader import catch_per_run, feed_per_min
from schorl.model.settings import Machine, Product


def boom_figures(volume_l_ha: float, product: Product, machine: Machine) -> dict[str, float]:
    """Flow of boom and nozzle, and the pressure that gives it with this nozzle and density.

    Pulsed nozzles keep the upper end of their band of pressure; what varies is the share of time
    they are open.
    """
    flow = nozzle_flow_l_min(volume_l_ha, machine)
    figures = {
        "flow_l_min": feed_per_min(volume_l_ha, machine.speed_km_h, machine.working_width_m),
        "nozzle_l_min": flow,
        "catch_l": catch_per_run(volume_l_ha, machine),
    }
    if not machine.nozzle_size:
        return figures
    density = mix_density_kg_l(product, machine.mix_g_b_l) if machine.mix_g_b_l else 1.0
    if machine.pulse_width_ratio:
        full = water_flow_l_min(machine.nozzle_size, machine.pressure_high_bar) / density**0.5
        figures["pressure_bar"] = machine.pressure_high_bar
        figures["open_pct"] = 100.0 * flow / full
    else:
        figures["pressure_bar"] = pressure_bar(machine.nozzle_size, flow, density)
    return figures


def injection_figures(dose_l_ha: float, machine: Machine) -> dict[str, float]:
    """Litres a hectare in each event, and boron in the irrigation water where its depth is given.

    1 L/ha of water carries the dose's grams of boron: g/L x 1,000 = mg/L.
    """
    figures = {"dose_l_ha_event": dose_l_ha / machine.events}
    if machine.water_l_ha and machine.mix_g_b_l:
        grams = dose_l_ha * machine.mix_g_b_l / machine.events
        figures["boron_in_water_mg_l"] = 1000.0 * grams / machine.water_l_ha
    return figures

"""Machine figures in words and units, shared by page and job sheet."""

from __future__ import annotations

from schorl import units
from schorl.model.record import RunRecord
from schorl.model.settings import Form
from schorl.report.shown import Shown, figure

#: Figure of the plan -> what it is, metric unit, US unit, metric over US.
FIGURES: dict[str, tuple[str, str, str, float]] = {
    "feed_kg_min": ("Feed of the whole machine", "kg/min", "lb/min", units.KG_PER_LB),
    "catch_kg": ("Catch over the calibration run", "kg", "lb", units.KG_PER_LB),
    "catch_g": ("Catch over the calibration run", "g", "oz", 28.349523125),
    "catch_l": ("Catch over the calibration run", "L", "gal", units.L_PER_US_GAL),
    "catch_ml": ("Catch over the calibration run", "mL", "fl oz", 29.5735295625),
    "granules_m2": ("Granules on the ground", "per m²", "per sq ft", 1 / units.M_PER_FT**2),
    "flow_l_min": ("Flow of the whole boom", "L/min", "gal/min", units.L_PER_US_GAL),
    "nozzle_l_min": ("Flow of one nozzle", "L/min", "gal/min", units.L_PER_US_GAL),
    "pressure_bar": ("Pressure", "bar", "psi", units.BAR_PER_PSI),
    "open_pct": ("Time the nozzle is open", "%", "%", 1.0),
    "dose_l_ha_event": ("Dose of one event", "L/ha", "gal/ac", units.L_HA_PER_US_GAL_ACRE),
    "boron_in_water_mg_l": ("Boron in the irrigation water", "mg/L", "ppm", 1.0),
}

#: Fact of the plan -> what it is; its unit is the end of its name.
FACTS = {
    "look_ahead_m": "Look ahead",
    "rate_change_m": "Way until a new rate holds",
    "calibration_s": "Time of the calibration run",
    "mix_density_kg_l": "Density of the mix",
    "dissolves_g_b_l": "Most boron the water safely holds",
    "nozzle_colour": "Colour of the nozzle",
    "least_l_ha": "Least the nozzle gives",
    "most_l_ha": "Most the nozzle gives",
    "product_in_all_kg": "Boron product in all",
    "product_in_all_l": "Liquid product in all",
    "product_full_load_kg": "Boron product in a full load",
    "product_full_load_l": "Liquid product in a full load",
    "product_last_load_kg": "Boron product in the last load",
    "product_last_load_l": "Liquid product in the last load",
    "carrier_in_all_kg": "Carrier in all",
    "carrier_full_load_kg": "Carrier in a full load",
    "carrier_last_load_kg": "Carrier in the last load",
    "water_in_all_l": "Water in all",
    "water_full_load_l": "Water in a full load",
    "water_last_load_l": "Water in the last load",
}
#: End of a fact's name -> metric unit, US unit, metric over US.
ENDS = {
    "_l_ha": ("L/ha", "gal/ac", units.L_HA_PER_US_GAL_ACRE),
    "_kg_l": ("kg/L", "lb/gal", units.KG_PER_LB / units.L_PER_US_GAL),
    "_g_b_l": ("g B/L", "g B/L", 1.0),
    "_kg": ("kg", "lb", units.KG_PER_LB),
    "_l": ("L", "gal", units.L_PER_US_GAL),
    "_s": ("s", "s", 1.0),
    "_m": ("m", "ft", units.M_PER_FT),
}
#: Facts of what is loaded start with one of these.
LOADED = ("product_", "carrier_", "water_")
#: Facts that are said elsewhere.
ELSEWHERE = ("bags", "calibration_m", "order_unit", "mix_g_b_l", "nozzle_size")


def point_rows(record: RunRecord, shown: Shown) -> list[list[str]]:
    """Rows "figure, lowest, mean, highest" for the rates of the plan; empty without a rate."""
    plan = record.prescription.machine
    points = plan.points
    if not points:
        return []
    rows = [[f"Rate, {shown.rate_unit}", *(shown.rate_figure(p.product_rate) for p in points)]]
    names = dict.fromkeys(name for point in points for name in point.figures)
    for name in names:
        label, metric, us, factor = FIGURES.get(name, (name.replace("_", " "), "", "", 1.0))
        run = plan.facts.get("calibration_m")
        if name.startswith("catch") and isinstance(run, float | int):
            label = f"Catch over {shown.length(run)}"
        unit, by = (us, factor) if shown.us else (metric, 1.0)
        values = [point.figures.get(name) for point in points]
        said = [figure(None if v is None else v / by, _decimals(v)) for v in values]
        rows.append([f"{label}, {unit}" if unit else label, *said])
    return rows


def _decimals(value: float | None) -> int:
    size = abs(value or 0.0)
    return 0 if size >= 100 else 1 if size >= 10 else 2


def setting_rows(record: RunRecord, shown: Shown) -> list[tuple[str, str]]:
    """What is set on the machine, as name and value."""
    machine, plan = record.settings.machine, record.prescription.machine
    rows = [
        ("Working width", shown.length(machine.working_width_m, 1)),
        ("Speed", shown.speed(machine.speed_km_h)),
        ("Placement", str(record.settings.placement)),
    ]
    if machine.sections > 1:
        rows.append(("Sections", str(machine.sections)))
    if machine.headland_m:
        rows.append(("Headland", shown.length(machine.headland_m, 1)))
    if machine.first_pass:
        rows.append(("First pass", machine.first_pass))
    if not machine.can_do_zero:
        rows.append(("Rate 0", "by hand: the machine cannot shut off by itself"))
    if machine.step:
        rows.append(("Step of the rate", shown.rate(machine.step)))
    if machine.least_rate:
        rows.append(("Lowest rate the machine holds", shown.rate(machine.least_rate)))
    if machine.most_rate:
        rows.append(("Highest rate the machine holds", shown.rate(machine.most_rate)))
    if record.settings.product.form is Form.SPRAY:
        rows += _spray_rows(record, shown)
    for name, value in plan.facts.items():
        if name not in ELSEWHERE and not name.startswith(LOADED):
            rows.append(_fact(name, value, shown))
    return rows


def _spray_rows(record: RunRecord, shown: Shown) -> list[tuple[str, str]]:
    machine, rows = record.settings.machine, []
    rows.append(("Nozzle spacing", shown.length(machine.nozzle_spacing_m, 2)))
    if record.prescription.boron_g_l is not None:
        rows.append(("Boron in the tank mix", f"{record.prescription.boron_g_l:.3g} g/L"))
    if machine.nozzle_size:
        rows.append(("Nozzle size", machine.nozzle_size))
    return rows


def _fact(name: str, value: float | str, shown: Shown) -> tuple[str, str]:
    label = FACTS.get(name, name.replace("_", " ").capitalize())
    if isinstance(value, str):
        return label, value
    for end, (metric, us, factor) in ENDS.items():
        if name.endswith(end):
            amount = value / factor if shown.us else value
            return label, f"{figure(amount, _decimals(amount))} {us if shown.us else metric}"
    return label, f"{value:.4g}"


def load_rows(record: RunRecord, shown: Shown) -> list[tuple[str, str]]:
    """What is loaded and ordered, as name and value."""
    prescription, plan = record.prescription, record.prescription.machine
    rows = [("Product in all", shown.amount(prescription.product_total))]
    if plan.order > 0:
        bags = plan.facts.get("bags")
        said = f", {bags:g} bags" if isinstance(bags, float | int) else ""
        bought = Shown(shown.system, str(plan.facts.get("order_unit", prescription.unit)))
        rows.append(("Boron product to order, spare included", bought.amount(plan.order) + said))
    if plan.per_load > 0:
        rows.append(("One load holds", shown.amount(plan.per_load)))
        rows.append(("Loads", loads_words(plan.loads)))
    rows.append(("Boron in all", shown.boron(prescription.boron_kg)))
    rows += [
        _fact(name, value, shown) for name, value in plan.facts.items() if name.startswith(LOADED)
    ]
    return rows


def loads_words(loads: float) -> str:
    """Loads as a person counts them.

    >>> loads_words(2.3), loads_words(0.4), loads_words(3.0)
    ('2 full and 1 of 0.30', '1 of 0.40', '3 full')
    """
    full = int(loads + 1e-9)
    rest = loads - full
    said = [f"{full} full"] if full else []
    if rest > 0.005:
        said.append(f"1 of {rest:.2f}")
    return " and ".join(said) or "none"

"""What the map can show, cell by cell: values, colours, legend and how to say a value."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from schorl.agronomy.chances import chance_over_ceiling, chance_short_of_target
from schorl.model.arrays import Counts, Floats
from schorl.model.record import RunRecord
from schorl.report import scales
from schorl.report.scales import Scale

NINETY = 1.6448536269514722  # standard normal quantile of 0.95: 9 times in 10 between both sides


@dataclass(frozen=True, kw_only=True)
class Layer:
    """One map: ``values`` and ``classes`` per cell; ``note`` says what it shows in a sentence."""

    key: str
    group: str
    name: str
    unit: str
    scale: Scale
    values: Floats
    classes: Counts
    note: str = ""


@dataclass(frozen=True, kw_only=True)
class Readings:
    """Whole numbers that the page shows under the pointer: value x 10^decimals per cell."""

    name: str
    decimals: int
    values: Floats


def rate_per_cell(record: RunRecord) -> Floats:
    """Boron of each cell's zone, kg/ha."""
    rates = np.array([rate.boron_kg_ha for rate in record.prescription.rates] or [0.0])
    return np.asarray(rates[record.prescription.zone_map.labels], dtype=np.float64)


def short_before(record: RunRecord) -> Floats:
    """Chance of each cell being below its target as it is."""
    need = record.cell_need
    return chance_short_of_target(need, np.zeros(record.grid.n_cells), stays=0.0)


def over_after(record: RunRecord) -> Floats:
    """Chance of each cell being over its ceiling after the prescription, all boron staying."""
    return chance_over_ceiling(record.cell_need, rate_per_cell(record))


def boron_range(record: RunRecord) -> tuple[Floats, Floats]:
    """Between which values boron lies 9 times in 10, mg/kg per cell."""
    need = record.cell_need
    low = need.boron_location - NINETY * need.boron_sd
    high = need.boron_location + NINETY * need.boron_sd
    if need.boron_log:
        return np.exp(low), np.exp(high)
    return np.maximum(low, 0.0), high


def layers_of(record: RunRecord) -> tuple[Layer, ...]:
    """All cell layers of a record, in the order they are offered; absent ones are left out."""
    made = [_boron(record), _supporting(record, "organic_matter"), _supporting(record, "clay")]
    made += [_spread(record), _short(record), _over(record), _doubt(record)]
    return tuple(layer for layer in made if layer is not None)


def _boron(record: RunRecord) -> Layer | None:
    surface, need = record.surfaces.get("boron"), record.cell_need
    if surface is None:
        return None
    scale = scales.boron_scale(need.target_mg_kg, need.ceiling_mg_kg)
    classes = scales.boron_classes(surface.estimate, need.target_mg_kg, need.ceiling_mg_kg)
    return Layer(
        key="boron",
        group="The soil",
        name="Boron",
        unit=surface.unit,
        scale=scale,
        values=surface.estimate,
        classes=classes,
        note="Available boron about the target: blue is short, brown is more than the target.",
    )


def _supporting(record: RunRecord, name: str) -> Layer | None:
    surface = record.surfaces.get(name)
    if surface is None or surface.constant:
        return None
    return _even(
        surface.estimate,
        scales.SUPPORTING,
        key=name.replace("_", "-"),
        name=name.replace("_", " ").capitalize(),
        unit=surface.unit,
        group="The soil",
    )


def _spread(record: RunRecord) -> Layer | None:
    surface = record.surfaces.get("boron")
    if surface is None:
        return None
    note = "Standard deviation of the boron surface: how far the map itself may be off."
    return _even(
        surface.map_sd_in_unit,
        scales.UNSURE,
        key="boron-sd",
        name="SD of boron",
        unit=surface.unit,
        group="How sure",
        note=note,
    )


def _even(
    values: Floats,
    colours: tuple[str, ...],
    *,
    key: str,
    name: str,
    unit: str,
    group: str,
    note: str = "",
) -> Layer:
    """A layer whose classes come from its own values."""
    scale = scales.even_scale(values, colours)
    return Layer(
        key=key,
        group=group,
        name=name,
        unit=unit,
        scale=scale,
        values=values,
        classes=scale.classes(values),
        note=note,
    )


def _chance(key: str, name: str, chances: Floats, breaks: tuple[float, ...], note: str) -> Layer:
    scale = scales.fixed_scale(breaks, scales.UNSURE, decimals=0)
    return Layer(
        key=key,
        group="How sure",
        name=name,
        unit="%",
        scale=scale,
        values=100 * chances,
        classes=scale.classes(100 * chances),
        note=note,
    )


def _short(record: RunRecord) -> Layer:
    note = "Chance that boron is below the target as the field is now."
    return _chance("short", "Chance short now", short_before(record), (10, 30, 70, 90), note)


def _over(record: RunRecord) -> Layer:
    note = "Chance that boron is over the soil ceiling after spreading, if all of it stays."
    return _chance("over", "Chance over after", over_after(record), (1, 2, 5, 20), note)


def _doubt(record: RunRecord) -> Layer | None:
    doubt = record.prescription.zone_map.doubt
    if doubt.size != record.grid.n_cells:
        return None
    note = "Where a cell could as well belong to the next zone."
    return _chance("doubt", "Doubt of zones", doubt, (20, 40, 60, 80), note)


def readings_of(record: RunRecord) -> tuple[Readings, ...]:
    """Everything the page says about a place, rounded as it is said."""
    low, high = boron_range(record)
    need = record.cell_need
    made = [
        Readings(name="low", decimals=2, values=low),
        Readings(name="high", decimals=2, values=high),
        Readings(name="target", decimals=2, values=need.target_mg_kg),
        Readings(name="ceiling", decimals=2, values=need.ceiling_mg_kg),
        Readings(name="short", decimals=0, values=100 * short_before(record)),
        Readings(name="over", decimals=0, values=100 * over_after(record)),
        Readings(name="zone", decimals=0, values=record.prescription.zone_map.labels.astype(float)),
    ]
    decimals = {"boron": 2, "organic_matter": 2, "clay": 1}
    for name, places in decimals.items():
        if name in record.surfaces:
            values = record.surfaces[name].estimate
            made.append(Readings(name=name, decimals=places, values=values))
    if "boron" in record.surfaces:
        sd = record.surfaces["boron"].map_sd_in_unit
        made.append(Readings(name="boron_sd", decimals=3, values=sd))
    return tuple(made)


@dataclass(frozen=True, kw_only=True)
class Doubtful:
    """Cells whose treatment is more likely wrong than right, ``(n_cells,)`` and hectares."""

    fed: Counts  # 1 where treated though likely not short
    left: Counts  # 1 where untreated though likely short
    fed_ha: float
    left_ha: float


LIKELY = 2 / 3


def doubtful_places(record: RunRecord) -> Doubtful:
    """Where the zone's rate goes against the cell's own chances, two times in three.

    Keep-off areas and hot spots are untreated on purpose and never counted as left short. A pass
    that leaves asked for goes by them, not by the soil: nothing is doubtful by the soil then.
    """
    zone_map = record.prescription.zone_map
    on_purpose = np.array([zone.kind != "zone" for zone in zone_map.zones])[zone_map.labels]
    chance, treated = short_before(record), rate_per_cell(record) > 0
    fed = treated & (chance < 1 - LIKELY)
    left = ~treated & ~on_purpose & (chance > LIKELY)
    if record.leaf_checks:
        fed, left = np.zeros_like(fed), np.zeros_like(left)
    cell_ha = record.field.area_ha / record.grid.n_cells
    return Doubtful(
        fed=fed.astype(np.intp),
        left=left.astype(np.intp),
        fed_ha=float(fed.sum()) * cell_ha,
        left_ha=float(left.sum()) * cell_ha,
    )

"""What other ways of reading the soil test would give, where they decide a zone differently."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from schorl.agronomy.tables import limit
from schorl.errors import SchorlError
from schorl.findings import Finding, finding
from schorl.model.field import CellGrid
from schorl.model.samples import SampleSet
from schorl.model.settings import Interpretation, RunSettings
from schorl.model.surface import Surface
from schorl.model.zones import ZoneKind, ZoneMap
from schorl.steps.assessing import assess_cells
from schorl.steps.zone_rates import part_of, ruled_rate

OTHERS = (Interpretation.CROP_NEED, Interpretation.TEXTURE_LINE, Interpretation.CLASS_TABLE)


def other_readings(
    zone_map: ZoneMap,
    given_kg_ha: Mapping[int, float],
    samples: SampleSet,
    surfaces: Mapping[str, Surface],
    grid: CellGrid,
    settings: RunSettings,
) -> tuple[Finding, ...]:
    """One note for each other interpretation that would treat a zone clearly otherwise.

    The zones stay as they are. An interpretation that cannot be used here (its method, region or
    figures do not fit) is left out.
    """
    found = []
    for other in OTHERS:
        if other is settings.crop.interpretation:
            continue
        rates = _rates_by(other, zone_map, samples, surfaces, grid, settings)
        apart = [
            f"zone {number}: {rate:.2f} instead of {given_kg_ha[number]:.2f}"
            for number, rate in rates.items()
            if _decides(rate, given_kg_ha[number])
        ]
        if apart:
            what = f"by {_named(other, settings)} kg B/ha would be " + "; ".join(apart)
            found.append(finding("RATE-READING", where="interpretation", what=what))
    return tuple(found)


def _named(other: Interpretation, settings: RunSettings) -> str:
    if other is not Interpretation.CLASS_TABLE:
        return f"the {other}"
    return f"the class table of {settings.crop.region or 'this program'}"


def _decides(one: float, other: float) -> bool:
    """Rates a table's figure apart decide a zone differently; treating or not always does."""
    return abs(one - other) >= limit("reading-apart") or (one > 0) != (other > 0)


def _rates_by(
    other: Interpretation,
    zone_map: ZoneMap,
    samples: SampleSet,
    surfaces: Mapping[str, Surface],
    grid: CellGrid,
    settings: RunSettings,
) -> dict[int, float]:
    """Rate of each treated kind of zone by another interpretation; empty where it cannot be used."""
    crop = replace(
        settings.crop, interpretation=other, target_mg_kg=None, ceiling_mg_kg=None, own_targets=()
    )
    changed = replace(settings, crop=crop)
    try:
        need = assess_cells(samples, surfaces, grid, changed).need
    except SchorlError:
        return {}
    rates = {}
    for place, zone in enumerate(zone_map.zones):
        cells = zone_map.labels == place
        if zone.kind is ZoneKind.ZONE and cells.any():
            own = part_of(need, cells)
            rates[zone.number] = 0.0 if own.hot.any() else ruled_rate(own, changed).boron_kg_ha
    return rates

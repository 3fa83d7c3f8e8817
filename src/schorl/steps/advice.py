"""Advice beside the rates: leaching, splitting, carriers, pH, lime, drought, calcium."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from schorl.agronomy.tables import limit
from schorl.model.arrays import Counts, Floats
from schorl.model.prescription import ZoneRate
from schorl.model.samples import SampleSet
from schorl.model.settings import RunSettings


def leached_share(drainage_mm: float, clay_pct: float) -> float:
    """Share of the applied boron lost with drainage, 0 to 1.

    Loss (mg/kg of 0.5 applied) = 0.001 drainage - 0.01 clay + 0.14, 30 cm columns (Dhassi et al.
    2019, Commun. Soil Sci. Plant Anal.): a guide; nothing is lost without drainage.
    """
    if drainage_mm <= 0:
        return 0.0
    lost = (
        limit("leach-drainage") * drainage_mm
        + limit("leach-clay") * clay_pct
        + limit("leach-constant")
    )
    return float(np.clip(lost / limit("leach-applied"), 0.0, 1.0))


def advice_for(
    samples: SampleSet,
    zone_of_sample: Counts,
    rates: tuple[ZoneRate, ...],
    settings: RunSettings,
) -> tuple[str, ...]:
    """Plain sentences, most pressing first; none of them changes a rate.

    ``zone_of_sample`` ``(n,)`` holds each sample's zone number, 0 where it lies in none.
    """
    said: list[str] = []
    treated = [rate for rate in rates if rate.boron_kg_ha > 0]
    said.extend(_leaching(treated, settings))
    said.extend(_sandy(treated))
    said.extend(_reaction(_means("ph", samples, zone_of_sample)))
    if settings.crop.lime_last_year:
        said.append("Lime within the last year ties boron up for a time: judge by leaf tests.")
    if settings.crop.drought:
        said.append("Without soil water no boron moves to the root, whatever the soil test says.")
    said.extend(_total(_means("total_boron", samples, zone_of_sample)))
    if "calcium" in samples.properties:
        said.append(
            "Calcium was measured: what looks like too much boron may be too little calcium "
            "(common practice, no source). It changes no rate here; ask an adviser."
        )
    return tuple(said)


def _means(name: str, samples: SampleSet, zone_of_sample: Counts) -> dict[int, float]:
    """Mean of a measured property in every zone that has a value of it, by zone number."""
    if name not in samples.properties:
        return {}
    values: Floats = samples.properties[name].values
    known = np.isfinite(values) & (zone_of_sample > 0)
    return {
        int(zone): float(values[known & (zone_of_sample == zone)].mean())
        for zone in np.unique(zone_of_sample[known])
    }


def _zones(numbers: Iterable[int]) -> str:
    named = [str(number) for number in numbers]
    return f"Zone{'s' if len(named) > 1 else ''} {', '.join(named)}"


def _span(values: Iterable[float]) -> str:
    shown = sorted({f"{value:.1f}" for value in values}, key=float)
    return shown[0] if len(shown) == 1 else f"{shown[0]} to {shown[-1]}"


def _leaching(treated: list[ZoneRate], settings: RunSettings) -> list[str]:
    drainage = settings.crop.drainage_mm
    if drainage is None:
        return []
    worst = [
        rate
        for rate in treated
        if leached_share(drainage, rate.clay_pct) > limit("leach-split-share")
    ]
    return [
        f"Zone {rate.zone}: about {100 * leached_share(drainage, rate.clay_pct):.0f} % of the "
        f"boron may leave with {drainage:g} mm of drainage (a guide). Give it in two passes, or "
        "on a carrier that holds boron."
        for rate in worst
    ]


def _sandy(treated: list[ZoneRate]) -> list[str]:
    sandy = [
        rate.zone
        for rate in treated
        if rate.clay_pct < limit("sandy-clay-most")
        and rate.organic_matter_pct < limit("sandy-om-most")
    ]
    if not sandy:
        return []
    return [
        f"{_zones(sandy)}: sand low in organic matter. A humate-carried granule, or humic "
        "or fulvic acid in the mix, is said to hold boron longer (common practice, no source); "
        "raising organic matter is the lasting remedy."
    ]


def _reaction(ph: dict[int, float]) -> list[str]:
    flag, strong_from = limit("ph-flag"), limit("ph-strong")
    strong = {zone: mean for zone, mean in ph.items() if mean > strong_from}
    raised = {zone: mean for zone, mean in ph.items() if flag < mean <= strong_from}
    said = []
    if strong:
        said.append(
            f"{_zones(strong)}: pH {_span(strong.values())}, boron is held strongly; expect less "
            "uptake than the test says."
        )
    if raised:
        said.append(
            f"{_zones(raised)}: pH {_span(raised.values())}, uptake of boron falls above {flag:g}."
        )
    return said


def _total(total: dict[int, float]) -> list[str]:
    low = {zone: mean for zone, mean in total.items() if mean < limit("total-boron-low")}
    if not low:
        return []
    return [
        f"{_zones(low)}: total boron {_span(low.values())} mg/kg is low (common practice, no "
        "source); it is not an index of what plants can take up."
    ]

"""Advice beside the rates: leaching, splitting, carriers, pH, lime, drought, calcium."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from schorl.agronomy.tables import limit
from schorl.model.prescription import ZoneRate
from schorl.model.samples import SampleSet
from schorl.model.settings import RunSettings
from schorl.model.surface import Surface


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
    surfaces: Mapping[str, Surface],
    rates: tuple[ZoneRate, ...],
    settings: RunSettings,
) -> tuple[str, ...]:
    """Plain sentences, most pressing first; none of them changes a rate."""
    said: list[str] = []
    treated = [rate for rate in rates if rate.boron_kg_ha > 0]
    said.extend(_leaching(treated, settings))
    said.extend(_sandy(treated))
    said.extend(_reaction(samples))
    if settings.crop.lime_last_year:
        said.append("Lime within the last year ties boron up for a time: judge by leaf tests.")
    if settings.crop.drought:
        said.append("Without soil water no boron moves to the root, whatever the soil test says.")
    said.extend(_total_and_calcium(samples))
    return tuple(said)


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
        str(rate.zone)
        for rate in treated
        if rate.clay_pct < limit("sandy-clay-most")
        and rate.organic_matter_pct < limit("sandy-om-most")
    ]
    if not sandy:
        return []
    return [
        f"Zone {', '.join(sandy)}: sand low in organic matter. A humate-carried granule, or humic "
        "or fulvic acid in the mix, is said to hold boron longer (common practice, no source); "
        "raising organic matter is the lasting remedy."
    ]


def _reaction(samples: SampleSet) -> list[str]:
    if "ph" not in samples.properties:
        return []
    ph = float(np.nanmean(samples.properties["ph"].values))
    if ph > limit("ph-strong"):
        return [f"pH {ph:.1f}: boron is held strongly; expect less uptake than the test says."]
    if ph > limit("ph-flag"):
        return [f"pH {ph:.1f}: uptake of boron falls above 6.5."]
    return []


def _total_and_calcium(samples: SampleSet) -> list[str]:
    said = []
    if "total_boron" in samples.properties:
        total = float(np.nanmean(samples.properties["total_boron"].values))
        if total < limit("total-boron-low"):
            said.append(
                f"Total boron {total:.1f} mg/kg is low (common practice, no source); it is not an "
                "index of what plants can take up."
            )
    if "calcium" in samples.properties:
        said.append(
            "Calcium was measured: what looks like too much boron may be too little calcium "
            "(common practice, no source). It changes no rate here; ask an adviser."
        )
    return said

"""How much boron may be given: rate caps by crop and placement, and the absolute limit.

The absolute limit stands in code, not in a table or setting: no option can raise it.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from schorl.agronomy.crops import Crop
from schorl.agronomy.tables import limit
from schorl.model.settings import Override, Placement

#: Elemental boron, kg/ha a season, all placements together. 3 lb/acre; crops were injured at 4.
ABSOLUTE_SEASON_KG_HA = 3.36
#: Alfalfa on serious deficiency, only by a named person: 4 lb/acre, the highest figure read.
ABSOLUTE_ALFALFA_KG_HA = 4.48
#: One pass never gives more than this.
ABSOLUTE_PASS_KG_HA = 3.36
ALFALFA = "alfalfa (lucerne)"
ALFALFA_LIMIT, BAND_CAP, RATE_CAP = "alfalfa season limit", "band cap", "rate cap"


@dataclass(frozen=True, slots=True, kw_only=True)
class Cap:
    """A cap with the row it comes from."""

    kg_ha: float
    row: str
    table: str
    overridden_by: str = ""


def absolute_limit_kg_ha(crop: Crop, overrides: Iterable[Override] = ()) -> float:
    """Season limit of elemental boron, kg/ha; alfalfa's by a named person up to 4.48."""
    for one in overrides:
        if one.what == ALFALFA_LIMIT and one.person.strip() and crop.name == ALFALFA:
            return min(max(one.value, ABSOLUTE_SEASON_KG_HA), ABSOLUTE_ALFALFA_KG_HA)
    return ABSOLUTE_SEASON_KG_HA


def rate_cap(crop: Crop, placement: Placement, overrides: Iterable[Override] = ()) -> Cap:
    """Most boron a crop may get with a placement, kg/ha, before the absolute limit.

    A named person may raise a broadcast cap up to the absolute limit, and a band's from 0 to 0.28
    for a crop that is not sensitive; seed row stays 0, foliar keeps its limit a pass.
    """
    cap = _built_in(crop, placement)
    for one in overrides:
        if not one.person.strip():
            continue
        if one.what == RATE_CAP and placement in (Placement.BROADCAST, Placement.INCORPORATED):
            most = absolute_limit_kg_ha(crop, overrides)
            return Cap(
                kg_ha=min(one.value, most), row=cap.row, table=cap.table, overridden_by=one.person
            )
        if one.what == BAND_CAP and placement is Placement.BAND and crop.ceiling_class == "texture":
            most = min(one.value, limit("cap-band-override"))
            return Cap(
                kg_ha=most, row="cap-band-override", table="limits", overridden_by=one.person
            )
    return cap


def _built_in(crop: Crop, placement: Placement) -> Cap:
    if placement is Placement.SEED_ROW:
        return Cap(kg_ha=limit("cap-seed-row"), row="cap-seed-row", table="limits")
    if placement is Placement.BAND:
        return Cap(kg_ha=limit("cap-band"), row="cap-band", table="limits")
    if placement is Placement.FOLIAR:
        row = "cap-foliar-sunflower" if crop.name == "sunflower" else "cap-foliar"
        return Cap(kg_ha=min(limit(row), crop.rate_cap_kg_ha), row=row, table="limits")
    return Cap(kg_ha=crop.rate_cap_kg_ha, row=crop.name, table="crops")

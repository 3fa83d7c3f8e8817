"""The plain-text note beside the files: units, product, totals, cautions."""

from __future__ import annotations

from schorl.agronomy.cautions import cautions
from schorl.model.record import RunRecord
from schorl.model.settings import Placement
from schorl.model.sourced import STATUSES


def note_bytes(record: RunRecord) -> bytes:
    """What a person needs to know who has only the files."""
    prescription, settings = record.prescription, record.settings
    unit = f"{prescription.unit}/ha"
    share = (
        f"{prescription.boron_pct:g} % B"
        if prescription.boron_pct is not None
        else f"{prescription.boron_g_l or 0:g} g B/L"
    )
    lines = [
        f"Boron prescription: {settings.field_name}, season {settings.season}",
        f"Crop: {settings.crop.crop}; placement: {settings.placement}",
        f"Product: {settings.product.name or 'boron product'}, {share}",
        f"Rates in the files are {unit} of PRODUCT, not of boron.",
        "",
    ]
    lines += [
        f"zone {rate.zone}: {rate.product_rate:.2f} {unit} ({rate.boron_kg_ha:.2f} kg B/ha) on "
        f"{rate.area_ha:.2f} ha; ruled by {rate.ruled_by}"
        f"{f' [{rate.rests_on}]' if rate.rests_on else ''}"
        for rate in prescription.rates
    ]
    lines += [
        "",
        f"Total: {prescription.product_total:.1f} {prescription.unit} of product, "
        f"{prescription.boron_kg:.2f} kg B",
        "",
        *(f"Set by a named person: {one.what} {one.value:g} {one.unit}, {one.person}"
          for one in settings.overrides),
        *cautions(foliar=settings.placement is Placement.FOLIAR),
        "",
        "In brackets: the rows of the tables of figures behind each rate (`schorl tables NAME`),",
        "and how far each was checked:",
        *(f"  {name}: {STATUSES[name]}" for name in STATUSES
          if any(f"({name})" in rate.rests_on for rate in prescription.rates)),
    ]  # fmt: skip
    return ("\n".join(lines) + "\n").encode("utf-8")

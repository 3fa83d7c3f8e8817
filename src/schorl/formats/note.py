"""The plain-text note beside the files: units, product, totals, cautions."""

from __future__ import annotations

from schorl.agronomy.cautions import cautions
from schorl.formats.shapes import TASK_DECIMALS, zone_shapes
from schorl.formats.task_grid import grid_product, lay_task_grid
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
        *_profile_lines(record),
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


def _profile_lines(record: RunRecord) -> list[str]:
    """What a controller's profile makes of the rates: unit, decimals, sums of a grid's cells."""
    profile, prescription = record.settings.profile, record.prescription
    if profile is None:
        return []
    unit = profile.rate_unit(prescription.unit)
    lines = [
        f"Made for a controller: {profile.title or 'own profile'}. Rate columns are in {unit} of "
        f"product with {profile.rate_decimals} decimals, rounded down.",
    ]
    if "task data" in profile.formats and profile.task_data_layout != "zones":
        shapes = zone_shapes(record, decimals=TASK_DECIMALS)
        total = grid_product(
            lay_task_grid(record, shapes), [shape.rate.product_rate for shape in shapes]
        )
        lines.append(
            f"The grid's cells add up to {total:.1f} {prescription.unit} of product; cells at the "
            "edge of a zone belong to one zone whole, and those that touch ground shut off get none."
        )
    return [*lines, ""]

"""The job sheet: at most two A4 pages for the cab, readable in black and white."""

from __future__ import annotations

import json
from collections.abc import Sequence
from importlib.resources import as_file, files
from typing import Any

from schorl.agronomy.cautions import cautions
from schorl.findings import Severity
from schorl.model.prescription import ZoneRate
from schorl.model.record import RunRecord
from schorl.model.settings import Placement
from schorl.report.figures import engrave, template
from schorl.report.machine_words import load_rows, point_rows, setting_rows
from schorl.report.shown import Shown, figure
from schorl.report.words import areas_ha, product_words, shortened, shown_of, treated, what_to_do
from schorl.report.zones_svg import rate_colours, rate_map_svg

TEMPLATE = "job_sheet.typ"
#: Letter size in points and height of the map in millimetres, from roomy to tight.
DENSITIES = (
    (10.5, 138),
    (10.0, 122),
    (9.5, 108),
    (9.0, 96),
    (8.5, 84),
    (8.0, 70),
    (7.5, 56),
    (7.0, 48),
)
MOST_PAGES = 2
MOST_WARNINGS = 6
MOST_RATES = 16

CHECKS = (
    "The field, the season and the file named here are the ones the controller shows.",
    "The map in the controller looks like the map on this sheet; its rates carry the same unit.",
    "The rate outside the zones and at lost signal is set to 0, not to a standing rate.",
    "The product's label shows the same boron content as this sheet.",
    "The machine is calibrated with this product at the lowest and at the highest rate.",
    "Sections or spreading discs shut off at the boundary, on headlands and on ground already done.",
)


def job_sheet(record: RunRecord, *, files: Sequence[str]) -> bytes:
    """The job sheet as a tagged PDF (PDF/UA-1); the same bytes from the same record.

    Parameters
    ----------
    record
        The run.
    files
        Names of the files for the controller, as they stand in the pack.
    """
    facts = sheet_facts(record, files)
    for size, map_mm in DENSITIES:
        facts |= {"size": size, "map_mm": map_mm, "tight": size < 9}
        if _pages(facts) <= MOST_PAGES:
            break
    return engrave(TEMPLATE, facts, kind="pdf")


def _pages(facts: dict[str, Any]) -> int:
    import typst

    said = json.dumps(facts, ensure_ascii=False, allow_nan=False, sort_keys=True)
    with as_file(files("schorl.report") / "fonts") as fonts:
        found = typst.query(  # type: ignore[misc]
            template(TEMPLATE),
            "<pages>",
            field="value",
            one=True,
            font_paths=[str(fonts)],
            ignore_system_fonts=True,
            sys_inputs={"facts": said},
        )
    return int(json.loads(found))


def sheet_facts(record: RunRecord, names: Sequence[str]) -> dict[str, Any]:
    """Everything on the sheet, as words; nothing is worked out in the template."""
    shown, settings = shown_of(record), record.settings
    made = "" if settings.made_on is None else settings.made_on.isoformat()
    fed_ha, left_ha = areas_ha(record)
    return {
        "field": shortened(settings.field_name, 70),
        "season": settings.season,
        "crop": settings.crop.crop,
        "area": shown.area(record.field.area_ha),
        "made": made,
        "by": settings.prepared_by,
        "product": product_words(record),
        "words": what_to_do(record, shown),
        "figures": [
            ["Product in all", shown.amount(record.prescription.product_total)],
            ["Treated", shown.area(fed_ha)],
            ["Untreated", shown.area(left_ha)],
            ["Boron in all", shown.boron(record.prescription.boron_kg)],
        ],
        "map": rate_map_svg(record, shown),
        "alt": f"Map of {settings.field_name} with the rate of product in each zone",
        "rates": rate_rows(record, shown),
        "rate_unit": shown.rate_unit,
        "boron_unit": shown.boron_rate_unit,
        "area_unit": shown.area_unit,
        "points": point_rows(record, shown),
        "settings": [list(row) for row in setting_rows(record, shown)],
        "loads": [list(row) for row in load_rows(record, shown)],
        "files": list(names),
        "in_files": f"{record.prescription.unit}/ha" if shown.us else "",
        "file_unit": f"Rates in the files are in {record.prescription.unit}/ha.",
        "checks": list(CHECKS),
        "care": _care(record),
        "cautions": list(cautions(foliar=settings.placement is Placement.FOLIAR)),
        "notes": [
            *(shortened(one, 200) for one in record.prescription.machine.advice[:5]),
            *_rests_on(record),
        ],
        "overrides": [
            f"{one.what} set to {one.value:g} {one.unit} by {one.person}"
            for one in settings.overrides
        ],
        "adapted": record.adapted_from,
    }


def rate_rows(record: RunRecord, shown: Shown) -> list[list[str]]:
    """Zones melted into rates: colour, rate, boron, zones, area, amount, rate in the files.

    Highest first. Beyond a page's worth, the rates of the smallest areas share one row, so that
    the sums still hold; all of them stand on the map.
    """
    colours = rate_colours(record.prescription)
    by_rate: dict[float, list[ZoneRate]] = {}
    for one in record.prescription.rates:
        by_rate.setdefault(one.product_rate, []).append(one)
    largest = sorted(by_rate, key=lambda rate: -sum(one.area_ha for one in by_rate[rate]))
    listed, rest = sorted(largest[:MOST_RATES], reverse=True), sorted(largest[MOST_RATES:])
    rows = [_rate_row(colours[rate], [rate], by_rate[rate], shown) for rate in listed]
    if rest:
        together = [one for rate in rest for one in by_rate[rate]]
        rows.append(_rate_row("#ffffff", rest, together, shown))
    return rows


def _rate_row(colour: str, rates: list[float], zones: list[ZoneRate], shown: Shown) -> list[str]:
    area = sum(one.area_ha for one in zones)
    boron = sum(one.area_ha * one.boron_kg_ha for one in zones) / area if area else 0.0
    amount = sum(one.area_ha * one.product_rate for one in zones)
    low, high = rates[0], rates[-1]
    said = shown.rate_figure(low) if low else "0"
    return [
        colour,
        said if low == high else f"{said} to {shown.rate_figure(high)}",
        shown.boron_rate_figure(boron),
        ", ".join(str(one.zone) for one in zones),
        shown.area_figure(area),
        shown.amount(amount) if amount else "shut off",
        figure(low, 2) if low == high else f"{figure(low, 2)} to {figure(high, 2)}",
    ]


def _rests_on(record: RunRecord) -> list[str]:
    """One line: the rows of the tables behind the rates, with how far each was checked."""
    rows = dict.fromkeys(
        one for rate in record.prescription.rates for one in rate.rests_on.split("; ") if one
    )
    if not rows:
        return []
    return [shortened(f"The rates rest on {'; '.join(rows)}. The report has the sources.", 400)]


def _care(record: RunRecord) -> list[str]:
    """The warnings of the run, the first few in full."""
    warned = [one for one in record.findings if one.severity is not Severity.NOTE]
    said = [shortened(f"{one.where}: {one.what}", 160) for one in warned[:MOST_WARNINGS]]
    if len(warned) > MOST_WARNINGS:
        said.append(f"{len(warned) - MOST_WARNINGS} more in the report")
    if not treated(record):
        said.insert(0, "Nothing is to be spread on this field.")
    return said

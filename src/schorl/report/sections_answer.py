"""Sections of the page that say what to do: answer, care, machine, cautions."""

from __future__ import annotations

from schorl.agronomy.cautions import cautions
from schorl.findings import Severity
from schorl.model.record import RunRecord
from schorl.model.settings import Placement
from schorl.report.layers import doubtful_places
from schorl.report.machine_words import load_rows, point_rows, setting_rows
from schorl.report.markup import Safe, join, table, tag
from schorl.report.shown import UNKNOWN, Shown, percent
from schorl.report.words import areas_ha, what_to_do


def section(anchor: str, title: str, *children: object) -> Safe:
    """A part of the page under its heading."""
    head = tag("h2", title, id=f"{anchor}-head")
    return tag("section", head, *children, id=anchor, aria_labelledby=f"{anchor}-head")


def answer(record: RunRecord, shown: Shown) -> Safe:
    """Four figures and the paragraph of what to do."""
    prescription, look = record.prescription, record.prescription.field_outlook
    fed_ha, left_ha = areas_ha(record)
    doubtful = doubtful_places(record)
    doubt_ha = doubtful.fed_ha + doubtful.left_ha
    boron = f"{shown.boron(prescription.boron_kg)} boron in it"
    cards = [
        ("Take to the field", shown.amount(prescription.product_total), boron),
        ("Treated", shown.area(fed_ha), _rate_span(record, shown)),
        ("Untreated", shown.area(left_ha), "shut off there"),
        (
            "Likely short",
            f"{percent(look.short_before)} → {percent(look.short_after)}",
            f"of the area, now and by the next soil test; {shown.area(doubt_ha)} doubtful",
        ),
    ]
    boxes = [
        tag("div", tag("dt", name), tag("dd", tag("b", value), tag("span", more)))
        for name, value, more in cards
    ]
    paragraph = tag("p", what_to_do(record, shown), class_="lead")
    return join([tag("dl", *boxes, class_="answer"), paragraph])


def _rate_span(record: RunRecord, shown: Shown) -> str:
    rates = [one.product_rate for one in record.prescription.rates if one.product_rate > 0]
    if not rates:
        return "nothing anywhere"
    low, high = shown.rate_figure(min(rates)), shown.rate_figure(max(rates))
    return f"{low} {shown.rate_unit}" if low == high else f"{low} to {high} {shown.rate_unit}"


def take_care(record: RunRecord, shown: Shown) -> Safe:
    """Warnings of this run, limits that a person set, doubtful places, advice, first cautions."""
    warned = [one for one in record.findings if one.severity is not Severity.NOTE]
    items = [
        tag("li", tag("b", f"{one.where}: "), one.what, tag("span", f" {one.hint}", class_="soft"))
        for one in warned
    ]
    items += [
        tag(
            "li",
            tag("b", f"{one.what} set to {one.value:g} {one.unit} by {one.person}."),
            f" {one.reason}",
        )
        for one in record.settings.overrides
    ]
    items += [tag("li", said) for said in _doubt_words(record, shown)]
    items += [tag("li", said) for said in record.prescription.advice]
    usual = cautions()[:2]
    items += [tag("li", said) for said in usual]
    items.append(tag("li", tag("a", "All cautions", href="#cautions")))
    return tag("div", tag("h2", "Before spreading"), tag("ul", *items), class_="care")


def _doubt_words(record: RunRecord, shown: Shown) -> list[str]:
    doubtful, said = doubtful_places(record), []
    if doubtful.fed_ha > 0:
        said.append(
            f"{shown.area(doubtful.fed_ha)} are treated though two times in three they need none "
            "(hatched on the map)."
        )
    if doubtful.left_ha > 0:
        said.append(
            f"{shown.area(doubtful.left_ha)} are left untreated though two times in three they are "
            "short, often by too little to be worth a pass (hatched the other way)."
        )
    return said


def caution_section(record: RunRecord) -> Safe:
    """The usual cautions."""
    said = cautions(foliar=record.settings.placement is Placement.FOLIAR)
    return section("cautions", "Cautions", tag("ul", *(tag("li", one) for one in said)))


def machine_section(record: RunRecord, shown: Shown) -> Safe:
    """What the machine is set to, calibrated with and loaded."""
    points = point_rows(record, shown)
    count = len(points[0]) - 1 if points else 0
    head = ["Figure", *("Lowest", "Mean", "Highest")[:count]]
    settings = [[name, tag("span", value)] for name, value in setting_rows(record, shown)]
    loads = [[name, tag("span", value)] for name, value in load_rows(record, shown)]
    return section(
        "machine", "Machine",
        table(head, points, caption="Calibration figures") if points else tag("p", UNKNOWN),
        tag(
            "div",
            table(["Load", "Amount"], loads, caption="What to load"),
            table(["Set", "To"], settings, caption="What to set"),
            class_="pair",
        ),
        tag("ul", *(tag("li", one) for one in record.prescription.machine.advice)),
    )  # fmt: skip

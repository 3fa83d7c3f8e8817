"""Sections of the page about the rates: answer, zones, what ruled, before and after, worth."""

from __future__ import annotations

from schorl.model.prescription import Limit, Outlook, ZoneRate
from schorl.model.record import RunRecord
from schorl.report import charts, zones_svg
from schorl.report.markup import Safe, join, scrolled, table, tag
from schorl.report.sections_answer import section
from schorl.report.shown import Shown, figure, percent
from schorl.report.words import RULED, kind_words, why_words


def zone_section(record: RunRecord, shown: Shown) -> Safe:
    """Two rows a zone: rate, boron on a shared axis, chances and soil; beneath them why."""
    axis = charts.boron_axis(record)
    head = [
        "Zone", f"Rate, {shown.rate_unit}", f"Boron, {shown.boron_rate_unit}",
        f"Area, {shown.area_unit}", join([f"Boron, {_unit(record)}", charts.ladder_scale(axis)]),
        "Mean ± SD", "Target", "Short now → after", "Over after", "Clay, %", "Organic matter, %",
        "Samples",
    ]  # fmt: skip
    heads = [tag("th", tag("span", cell), scope="col") for cell in head]
    rows = [
        row
        for place in range(len(record.prescription.rates))
        for row in _zone_rows(record, shown, place, axis)
    ]
    caption = "Zones and their rates"
    made = tag(
        "table", tag("caption", caption), tag("thead", tag("tr", *heads)), tag("tbody", *rows)
    )
    key = (
        "Thick bar: where the mean of the zone lies, 9 times in 10. Thin line: where single places "
        "lie, 9 times in 10. Ticks: samples. Blue line: target. Dashed line: soil ceiling."
    )
    return section("zones", caption, scrolled(made, caption), tag("p", key, class_="soft"))


def _zone_rows(record: RunRecord, shown: Shown, place: int, axis: charts.Axis) -> tuple[Safe, Safe]:
    rate, zone = record.prescription.rates[place], record.prescription.zone_map.zones[place]
    look, fills = rate.outlook, zones_svg.rate_colours(record.prescription)
    kind = tag("span", kind_words(zone.kind), class_="soft") if zone.kind != "zone" else ""
    cells = [
        _rate_cell(zones_svg.rate_labels(record, shown)[place], fills[rate.product_rate]),
        shown.boron_rate_figure(rate.boron_kg_ha),
        shown.area_figure(rate.area_ha),
        charts.ladder(record, place, axis),
        f"{figure(rate.boron_mean_mg_kg, 2)} ± {figure(rate.boron_sd_mg_kg, 2)}",
        figure(rate.target_mg_kg, 2),
        f"{100 * look.short_before:.0f} → {percent(look.short_after)}",
        percent(look.over_after),
        figure(rate.clay_pct, 0),
        figure(rate.organic_matter_pct, 1),
        str(rate.samples),
    ]
    first = tag("th", tag("b", rate.zone), " ", kind, scope="row", rowspan="2")
    upper = tag("tr", first, *(tag("td", cell) for cell in cells), class_="upper")
    lower = tag(
        "tr", tag("td", tag("span", why_words(rate, shown)), colspan=str(len(cells)), class_="why")
    )
    return upper, lower


def _rate_cell(said: str, fill: str) -> Safe:
    return join([charts.swatch(fill), tag("b", said)])


def _unit(record: RunRecord) -> str:
    return record.surfaces["boron"].unit if "boron" in record.surfaces else "mg/kg"


def ruled_section(record: RunRecord, shown: Shown) -> Safe:
    """Every limit that was tried for every zone; the one that ruled is marked."""
    rates = record.prescription.rates
    names = list(dict.fromkeys(name for rate in rates for name in rate.limits_kg_ha))
    names = [name for name in names if name != str(Limit.NEED)]
    head = ["Zone", "Asked for", *names, "Given", "Held by"]
    rows = []
    for rate in rates:
        ruled = str(rate.ruled_by)
        asked = _limit(shown.boron_rate_figure(rate.need_kg_ha), ruled == str(Limit.NEED))
        cells = [
            _limit(shown.boron_rate_figure(rate.limits_kg_ha.get(name)), ruled == name)
            for name in names
        ]
        given = shown.boron_rate_figure(rate.boron_kg_ha)
        held = join([RULED[rate.ruled_by], *rests_words(rate)])
        rows.append([str(rate.zone), asked, *cells, given, tag("span", held)])
    note = (
        f"Boron in {shown.boron_rate_unit}. The lowest figure of a row wins; it is marked ◂. The "
        "machine then rounds down to what it can hold."
    )
    doubled = [
        f"zone {rate.zone} {figure(rate.doubled_pass_mg_kg, 2)}"
        for rate in rates
        if rate.boron_kg_ha > 0
    ]
    twice = ""
    if doubled:
        twice = (
            f"A pass given twice would lift the soil ({_unit(record)}) to: {', '.join(doubled)}."
        )
    return section(
        "ruled", "What ruled the rates", table(head, rows, caption="Limits of each zone"),
        tag("p", note, class_="soft"), tag("p", twice) if twice else "",
    )  # fmt: skip


def rests_words(rate: ZoneRate) -> tuple[Safe, ...]:
    """The rows of the tables behind what ruled, so that a reader can look them up."""
    return (tag("br"), tag("small", rate.rests_on, class_="soft")) if rate.rests_on else ()


def _limit(said: str, ruled: bool) -> object:
    return tag("b", f"{said} ◂", class_="ruler") if ruled else said


def outlook_section(record: RunRecord, shown: Shown) -> Safe:
    """Chance and area short and over, before and after, for the field and every zone."""
    head = [
        "Where", "Short before", "Short after", f"Short, {shown.area_unit} before → after",
        "Over before", "Over after", f"Over, {shown.area_unit} before → after",
    ]  # fmt: skip
    rows = [_outlook_row("Whole field", record.prescription.field_outlook, shown)]
    rows += [
        _outlook_row(f"Zone {rate.zone}", rate.outlook, shown) for rate in record.prescription.rates
    ]
    note = (
        "Short: available boron below the target. Over: above the soil ceiling. After, for short: "
        "as if 30 % of the boron given shows in the next soil test; for over: as if all of it "
        "stays. Chances come from the spread of the map and of the soil within a cell."
    )
    return section(
        "outlook", "Before and after", table(head, rows, caption="Chances before and after"),
        tag("p", note, class_="soft"),
    )  # fmt: skip


def _outlook_row(name: str, look: Outlook, shown: Shown) -> list[object]:
    def bar(share: float) -> Safe:
        return join([charts.share_bar(share, percent(share)), " ", percent(share)])

    short = f"{shown.area_figure(look.short_before_ha)} → {shown.area_figure(look.short_after_ha)}"
    over = f"{shown.area_figure(look.over_before_ha)} → {shown.area_figure(look.over_after_ha)}"
    return [
        name, bar(look.short_before), bar(look.short_after), short,
        bar(look.over_before), bar(look.over_after), over,
    ]  # fmt: skip


def value_section(record: RunRecord, shown: Shown) -> Safe:
    """What zoning is worth against one rate, and why this number of zones."""
    prescription, zone_map = record.prescription, record.prescription.zone_map
    head = [
        "Plan", "Boron", f"Loss, {shown.boron_unit} boron", f"Short, {shown.area_unit}",
        f"Over, {shown.area_unit}",
    ]  # fmt: skip
    priced = any(plan.cost is not None for plan in prescription.value)
    currency = record.settings.crop.currency or "money"
    head += [f"Boron and loss, {currency}"] if priced else []
    rows = [
        [
            plan.plan.capitalize(),
            shown.boron(plan.boron_kg),
            shown.boron(plan.loss_kg).split()[0],
            shown.area_figure(plan.short_ha),
            shown.area_figure(plan.over_ha),
            *([figure(plan.cost, 0)] if priced else []),
        ]
        for plan in prescription.value
    ]
    note = (
        "Loss: boron expected to be missing where the soil is short, plus boron given where it is "
        "not needed, summed over the field."
    )
    parts: list[object] = [
        tag("p", _saving_words(record)),
        table(head, rows, caption="Three plans on the same soil") if rows else "",
        tag("p", note, class_="soft"),
    ]
    if zone_map.table:
        bars = [(row.count, row.saving, row.saving_low, row.saving_high) for row in zone_map.table]
        words = (
            "Share of the loss of one flat rate that each number of zones saves; line: its range."
        )
        figure_ = tag("figure", charts.saving_bars(bars, zone_map.count), tag("figcaption", words))
        parts.append(tag("div", figure_, _index_words(record), class_="pair"))
    return section("value", "What zoning is worth", *parts)


def _saving_words(record: RunRecord) -> str:
    saving = record.prescription.saving
    if saving is None:
        return "The saving against one flat rate was not worked out."
    low, middle, high = saving
    return (
        f"Against the best flat rate, these zones save about {percent(max(middle, 0.0))} of the expected "
        f"loss (range {_signed(low)} to {_signed(high)}). {_sentence(record.prescription.zone_map.reason)}"
    )


def _sentence(said: str) -> str:
    return said[:1].upper() + said[1:] + ("" if said.endswith(".") else ".") if said else ""


def _signed(share: float) -> str:
    return f"−{percent(-share)}" if share < 0 else percent(share)


def _index_words(record: RunRecord) -> Safe:
    zone_map = record.prescription.zone_map
    said = [f"Origin of the zones: {zone_map.origin}."]
    if zone_map.structure_p is not None:
        said.append(
            f"Chance that the pattern of need and soil is accident: p = {zone_map.structure_p:.3g}."
        )
    if zone_map.classes_found is not None:
        said.append(f"Groups found among the samples alone: {zone_map.classes_found}.")
    if zone_map.too_narrow_ha > 0.005:
        said.append(f"Too narrow for the machine to follow: {zone_map.too_narrow_ha:.2f} ha.")
    for row in zone_map.table:
        if row.count == zone_map.count and row.indices:
            pairs = ", ".join(f"{name} {value:.3g}" for name, value in row.indices.items())
            said.append(f"For information only: {pairs}.")
    return tag("ul", *(tag("li", one) for one in said), class_="plainlist")

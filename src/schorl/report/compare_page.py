"""The page of a comparison: the same design as the report, and no script."""

from __future__ import annotations

import math
from collections.abc import Sequence

from schorl.agronomy.cautions import cautions
from schorl.findings import Severity
from schorl.model.change import SeasonChange
from schorl.report.change_map import change_map_part
from schorl.report.change_words import balance_rows, interval, rate_rows, signed, zone_rows
from schorl.report.markup import Safe, join, table, tag
from schorl.report.page import document
from schorl.report.sections_answer import section
from schorl.report.shown import figure, percent

CONTENTS = (
    ("map-head", "Map"),
    ("changes", "Zones"),
    ("shift", "Whole field"),
    ("moved", "Moved ground"),
    ("rates", "Rates"),
    ("balance", "What the boron did"),
    ("next", "Next season"),
    ("how", "How it was told"),
    ("findings", "Findings"),
    ("cautions", "Cautions"),
)
HOW = (
    "Changes are tested at the sites sampled in both seasons (paired t), or between old and new "
    "sites (Welch's t); with several zones the p-values are Holm's.",
    "Zones drawn from a season's boron hold samples that came out low or high by chance, and those "
    "go back by themselves. Each sample therefore counts in the zone that the other samples "
    "predict for it.",
    "The map is the kriged difference at the same sites, never the difference of two maps; its "
    "nugget is at least twice the laboratory's variance, and false discoveries are held to 10 % "
    "(Benjamini and Hochberg 1995).",
    "Zones are matched by the ground they share. Kappa and the adjusted Rand index stand beside "
    "what sampling the same soil again would give, since that alone moves borders.",
)


def compare_page(changes: Sequence[SeasonChange]) -> bytes:
    """One page for comparisons in a row, the last in full; the same bytes from the same values."""
    change = changes[-1]
    map_part, rules = change_map_part(change)
    body = [
        _answer(change),
        *[_earlier(one) for one in changes[:-1]],
        _care(change),
        tag("section", tag("h2", "Map", id="map-head"), map_part, class_="mapsection",
            aria_labelledby="map-head"),
        _zones(change),
        _shift(change),
        _moved(change),
        section("rates", "Rates", table(
            ["Zone then", "Zone now", "Then, kg B/ha", "Now, kg B/ha", "Difference"],
            rate_rows(change), caption="Boron rates of matched zones",
        )),
        _balance(change),
        _next(change),
        section("how", "How it was told", tag("ul", *(tag("li", one) for one in HOW))),
        _findings(change),
        section("cautions", "Cautions", tag("ul", *(tag("li", one) for one in cautions()))),
    ]  # fmt: skip
    seasons = f"{change.before.season} to {change.after.season}"
    title = f"{change.after.field_name}, {seasons}: what changed"
    return document(title, _header(change), CONTENTS, body, rules=rules)


def _header(change: SeasonChange) -> Safe:
    said = (
        f"{change.common_ha:.2f} ha · {len(change.before.samples)} and "
        f"{len(change.after.samples)} samples · {len(change.pairs)} sites in both seasons"
    )
    name = f"{change.after.field_name}, {change.before.season} to {change.after.season}"
    return join(
        [tag("p", "What changed", class_="kicker"), tag("h1", name), tag("p", said, class_="soft")]
    )


def _answer(change: SeasonChange) -> Safe:
    shift = change.shift
    tested = [one for one in change.zones if math.isfinite(one.p_adjusted)]
    real, least = [one for one in tested if one.real], change.least_detectable_mg_kg
    cards = [
        ("Whole field", "not told" if shift is None else f"{signed(shift.mean)} mg/kg",
         change.refused if shift is None else f"95 %: {interval(shift.low, shift.high)}"),
        ("Zones that changed", f"{len(real)} of {len(tested)}" if tested else "not told",
         "beyond noise, out of those tested" if tested else "no zone could be tested"),
        ("Would show", f"{figure(least, 2)} mg/kg" if math.isfinite(least) else "not told",
         "least change of one zone found four times in five"),
        ("Moved", f"{figure(change.moved.moved_ha, 1)} ha",
         f"of {figure(change.common_ha, 1)} ha lie in another zone"),
    ]  # fmt: skip
    boxes = [
        tag("div", tag("dt", name), tag("dd", tag("b", value), tag("span", more)))
        for name, value, more in cards
    ]
    return join([tag("dl", *boxes, class_="answer"), tag("p", change.text, class_="lead")])


def _earlier(change: SeasonChange) -> Safe:
    head = f"{change.before.season} to {change.after.season}"
    return join([tag("h3", head), tag("p", change.text)])


def _care(change: SeasonChange) -> Safe:
    warned = [one for one in change.findings if one.severity is not Severity.NOTE]
    items = [
        tag("li", tag("b", f"{one.where}: "), one.what, tag("span", f" {one.hint}", class_="soft"))
        for one in warned
    ]
    items.append(tag("li", "A change that is real need not be the boron's doing: without untreated "
                           "ground the season, the crop and the laboratory are in it too."))  # fmt: skip
    return tag("div", tag("h2", "Before acting on it"), tag("ul", *items), class_="care")


def _zones(change: SeasonChange) -> Safe:
    if not change.zones:
        return section("changes", "Zones", tag("p", _why_not(change)))
    head = ["Zone", "Then, mg/kg", "Now, mg/kg", "Change", "It is", "95 %", "p", "Would show",
            "Samples"]  # fmt: skip
    said = (
        f"Zones of {_drawn_in(change)}. Real: the adjusted p is 0.05 or less. Would show: the "
        "least change of this zone that the test finds four times in five."
    )
    return section(
        "changes", "Zones", table(head, zone_rows(change), caption="Change of each zone"),
        tag("p", said, class_="soft"),
    )  # fmt: skip


def _why_not(change: SeasonChange) -> str:
    """Why the soil tests of both seasons are not compared."""
    return f"Not tested: {change.refused or 'too few samples in both seasons'}."


def _drawn_in(change: SeasonChange) -> str:
    return min(change.before, change.after, key=lambda one: one.when).season


def _shift(change: SeasonChange) -> Safe:
    shift = change.shift
    if shift is None:
        return section("shift", "Whole field", tag("p", _why_not(change)))
    rows = [
        ["Change of the mean", f"{signed(shift.mean, 3)} mg/kg"],
        ["Its 95 % interval", f"{interval(shift.low, shift.high, 3)} mg/kg"],
        ["Against the earlier mean", f"{100 * shift.relative:+.0f} %"],
        ["Against the earlier samples' spread", f"{shift.in_sd:+.1f} standard deviations"],
        ["Correlation of the two seasons", figure(shift.correlation, 2)],
        ["Lin's concordance", figure(shift.concordance, 2)],
    ]
    note = shift.warning or (
        "Within what soil can do: a shift of the whole campaign is called out above 20 % of the "
        "mean and one standard deviation."
    )
    told = [tag("div", tag("dt", name), tag("dd", value)) for name, value in rows]
    return section(
        "shift", "Whole field", tag("dl", *told, class_="settings"), tag("p", note)
    )  # fmt: skip


def _moved(change: SeasonChange) -> Safe:
    moved = change.moved
    head = [f"{change.before.season} \\ {change.after.season}, ha", *map(str, moved.after)]
    rows = [
        [str(zone), *(figure(value, 2) if value > 0.004 else "·" for value in row)]
        for zone, row in zip(moved.before, moved.transition_ha.tolist(), strict=True)
    ]
    kappa, rand = moved.by_chance
    beside = (
        f" Sampling the same soil again would give about {figure(kappa, 2)} and {figure(rand, 2)}."
        if math.isfinite(kappa)
        else ""
    )
    said = (
        f"Agreement by area: kappa {figure(moved.kappa, 2)}, adjusted Rand index "
        f"{figure(moved.adjusted_rand, 2)}; disagreement {percent(moved.quantity)} by size and "
        f"{percent(moved.allocation)} by place.{beside}"
    )
    carried = [
        f"zone {now} carries on zone {old}" if old in moved.before or old in moved.after else
        f"zone {now} is new (number {old} is free for it)"
        for now, old in sorted(moved.kept.items()) if now != old
    ]  # fmt: skip
    return section(
        "moved", "Moved ground",
        table(head, rows, caption="Hectares of each earlier zone in each later one"),
        tag("p", said), tag("p", "; ".join(carried).capitalize() + "." if carried else ""),
    )  # fmt: skip


def _balance(change: SeasonChange) -> Safe:
    head = ["Zone", "Prescribed, kg/ha", "Given", "Taken away", "Change in the soil", "95 %", "Shown again",
            "95 %"]  # fmt: skip
    said = (
        "Shown again: change in the test times the mass of soil, with what the crop took away, over "
        "what was given. What leached, was fixed or came up from below is in it. It may serve as "
        "the field's own figure next season; nothing takes it over by itself."
    )
    return section(
        "balance", "What the boron did", tag("p", _given(change)),
        table(head, balance_rows(change), caption="Boron balance of each zone"),
        tag("p", said, class_="soft"),
    )  # fmt: skip


def _given(change: SeasonChange) -> str:
    """Where the boron that counts as given is known from."""
    earlier = min((change.before, change.after), key=lambda one: one.when)
    if earlier.applied is None:
        return f"Boron of {earlier.season} counts as given as it was prescribed."
    source = earlier.applied.source or "the figure given"
    return f"Boron given in {earlier.season} is that of {source}, not that prescribed."


def _next(change: SeasonChange) -> Safe:
    strips = [tag("li", tag("b", f"{one.kind.capitalize()}: "), one.said) for one in change.strips]
    if not strips:
        strips = [tag("li", "There is no room for check strips across two treated zones.")]
    return section(
        "next", "Next season",
        tag("h3", "Check strips"), tag("ul", *strips),
        tag("p", "The label, local codes and the crop's own limits hold in a strip as elsewhere.",
            class_="soft"),
        tag("h3", f"{len(change.revisit)} sites to sample again"),
        tag("p", "The first of each zone is the one nearest its middle, each next the one farthest "
                 "from those before it: take them in this order. Their places are in "
                 "revisit_sites.csv and .geojson."),
        tag("ul", *_sites(change)),
    )  # fmt: skip


def _sites(change: SeasonChange) -> list[Safe]:
    """One item a zone: its sites in the order they were chosen."""
    of_zone: dict[int, list[str]] = {}
    for one in change.revisit:
        of_zone.setdefault(one.zone, []).append(one.name)
    return [
        tag("li", tag("b", f"Zone {zone}: "), ", ".join(names)) for zone, names in of_zone.items()
    ]


def _findings(change: SeasonChange) -> Safe:
    items = [
        tag("li", tag("span", str(one.severity), class_=f"grade {one.severity}"), " ",
            tag("code", one.code), f" {one.where}: {one.what} ", tag("span", one.hint, class_="soft"))
        for one in change.findings
    ]  # fmt: skip
    return section("findings", "Findings", tag("ul", *items) if items else tag("p", "None."))

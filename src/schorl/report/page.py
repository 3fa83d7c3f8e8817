"""The report: one HTML file that opens from disk, asks for nothing and prints well."""

from __future__ import annotations

import base64
import hashlib

from schorl.model.record import RunRecord
from schorl.report import sections_answer as answer
from schorl.report import sections_leaves as leaves
from schorl.report import sections_rates as rates
from schorl.report import sections_trust as trust
from schorl.report.field_map import field_map
from schorl.report.figures import template
from schorl.report.markup import Safe, join, tag
from schorl.report.readings import facts_script
from schorl.report.words import shown_of

CONTENTS: tuple[tuple[str, str], ...] = (
    ("map-head", "Map"),
    ("zones", "Zones"),
    ("ruled", "What ruled"),
    ("outlook", "Before and after"),
    ("value", "Worth of zoning"),
    ("trust", "Trust"),
    ("machine", "Machine"),
    ("inputs", "Inputs"),
    ("findings", "Findings"),
    ("sources", "Sources"),
    ("cautions", "Cautions"),
)


def report_page(record: RunRecord) -> bytes:
    """The whole report of a run as UTF-8 HTML; the same bytes from the same record.

    The page holds its own style and script, known to the browser by their hashes; its policy
    forbids every request. Maps are chosen by style rules and serve without JavaScript.
    """
    shown = shown_of(record)
    map_markup, rules, facts = field_map(record, shown)
    map_part = tag(
        "section",
        tag("h2", "Map", id="map-head"),
        map_markup,
        class_="mapsection",
        aria_labelledby="map-head",
    )
    body = [
        answer.answer(record, shown),
        answer.take_care(record, shown),
        map_part,
        rates.zone_section(record, shown),
        *([leaves.leaf_section(record)] if record.leaf_checks else []),
        rates.ruled_section(record, shown),
        rates.outlook_section(record, shown),
        rates.value_section(record, shown),
        trust.surface_section(record, shown),
        answer.machine_section(record, shown),
        trust.input_section(record, shown),
        trust.finding_section(record),
        trust.source_section(record),
        answer.caution_section(record),
    ]
    title = f"{record.settings.field_name}, {record.settings.season}: boron prescription"
    extra = facts_script(facts)
    contents = CONTENTS
    if record.leaf_checks:
        place = [anchor for anchor, _ in CONTENTS].index("ruled")
        contents = (*CONTENTS[:place], ("leaves", "Leaves"), *CONTENTS[place:])
    return document(title, _header(record), contents, body, rules=rules, facts=extra)


def _header(record: RunRecord) -> Safe:
    settings = record.settings
    shown = shown_of(record)
    said = [
        settings.crop.crop,
        shown.area(record.field.area_ha),
        f"{len(record.samples)} samples",
        f"made on {settings.made_on.isoformat()}" if settings.made_on else "",
        f"by {settings.prepared_by}" if settings.prepared_by else "",
        f"adapted from {record.adapted_from}" if record.adapted_from else "",
    ]
    line = " · ".join(one for one in said if one)
    return join(
        [
            tag("p", "Boron prescription", class_="kicker"),
            tag("h1", f"{settings.field_name}, {settings.season}"),
            tag("p", line, class_="soft"),
        ]
    )


def _hash(said: str) -> str:
    digest = hashlib.sha256(said.encode("utf-8")).digest()
    return f"'sha256-{base64.b64encode(digest).decode('ascii')}'"


def document(
    title: str,
    header: Safe,
    contents: tuple[tuple[str, str], ...],
    body: list[Safe],
    *,
    rules: str = "",
    facts: Safe | None = None,
) -> bytes:
    """A page in our design: header, contents, parts; script only where there are facts for it."""
    style = template("page.css").decode("utf-8") + rules
    script = template("page.js").decode("utf-8") if facts is not None else ""
    policy = (
        f"default-src 'none'; img-src data:; style-src {_hash(style)}; "
        f"script-src {_hash(script) if script else chr(39) + 'none' + chr(39)}; "
        "base-uri 'none'; form-action 'none'"
    )
    head = tag(
        "head",
        tag("meta", charset="utf-8"),
        Safe(f'<meta http-equiv="Content-Security-Policy" content="{policy}">'),
        tag("meta", name="viewport", content="width=device-width, initial-scale=1"),
        tag("meta", name="referrer", content="no-referrer"),
        tag("title", title),
        Safe(f"<style>{style}</style>"),
    )
    links = [tag("li", tag("a", name, href=f"#{anchor}")) for anchor, name in contents]
    inner = [
        tag("a", "To the map", href="#map-head", class_="skip"),
        tag("header", header),
        tag("nav", tag("ul", *links), aria_label="Contents"),
        tag("main", *body),
        tag("footer", tag("p", "The product label, local codes and a licensed adviser decide.")),
        facts or "",
        Safe(f"<script>{script}</script>") if script else "",
    ]
    page = join(["", tag("html", head, tag("body", *inner), lang="en")])
    return ("<!doctype html>\n" + page + "\n").encode("utf-8")

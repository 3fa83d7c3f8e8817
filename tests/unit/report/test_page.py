"""The page as a file: nothing foreign, nothing executable from outside, everything said."""

from __future__ import annotations

import base64
import hashlib
import json
import re
from dataclasses import replace
from html.parser import HTMLParser

import pytest

from schorl.agronomy.cautions import cautions
from schorl.report.figures import rate_map_png
from schorl.report.page import report_page

NASTY = "</script><script>fetch('http://x.example')</script><img src=x onerror=alert(1)>"


class Gathered(HTMLParser):
    """Elements, attributes and visible text of a page."""

    def __init__(self):
        super().__init__(convert_charrefs=True)
        self.elements, self.blocks, self.words, self._open = [], {}, [], ""

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))
        if tag in ("script", "style"):
            self._open = tag if dict(attrs).get("type") is None else "facts"

    def handle_endtag(self, tag):
        if tag in ("script", "style"):
            self._open = ""

    def handle_data(self, data):
        if self._open:
            self.blocks[self._open] = self.blocks.get(self._open, "") + data
        else:
            self.words.append(data)


def gathered(page: bytes) -> Gathered:
    reader = Gathered()
    reader.feed(page.decode("utf-8"))
    return reader


@pytest.fixture(scope="module")
def page(record):
    return report_page(record)


def test_same_record_same_bytes(record, page):
    assert report_page(record) == page
    assert rate_map_png(record) == rate_map_png(record)
    assert rate_map_png(record).startswith(b"\x89PNG")


def test_nothing_is_asked_of_any_other_place(page):
    for tag, attributes in gathered(page).elements:
        for name, value in attributes.items():
            assert not name.startswith("on"), (tag, name)
            assert name != "style", tag
            if name in ("href", "src"):
                assert value.startswith(("#", "data:image/png;base64,")), (tag, value)
    assert b"url(http" not in page
    assert b"@import" not in page


def test_the_policy_allows_only_our_own_style_and_script(page):
    found = gathered(page)
    (policy,) = [
        a["content"] for t, a in found.elements if a.get("http-equiv") == "Content-Security-Policy"
    ]
    assert policy.startswith("default-src 'none'")
    assert "unsafe" not in policy
    for block in ("script", "style"):
        digest = hashlib.sha256(found.blocks[block].encode()).digest()
        assert f"'sha256-{base64.b64encode(digest).decode()}'" in policy


def test_text_from_files_stays_text(record):
    samples = replace(record.samples, ids=(NASTY, *record.samples.ids[1:]))
    rates = (replace(record.prescription.rates[0], why=NASTY), *record.prescription.rates[1:])
    hostile = replace(
        record,
        field=replace(record.field, name=NASTY),
        samples=samples,
        prescription=replace(record.prescription, rates=rates, advice=(NASTY,)),
        settings=replace(record.settings, field_name=NASTY, prepared_by=NASTY),
        assumptions=(NASTY,),
        inputs_sha256={NASTY: "0" * 64},
    )
    found = gathered(report_page(hostile))
    assert [t for t, _ in found.elements].count("script") == 2  # facts and our own
    assert not [t for t, _ in found.elements if t == "img"]
    facts = json.loads(found.blocks["facts"])
    assert facts["samples"][0][0] == NASTY
    assert NASTY in "".join(found.words)


def test_everything_is_said(record, page):
    said = re.sub(r"\s+", " ", " ".join(gathered(page).words))
    prescription = record.prescription
    wanted = [rate.why for rate in prescription.rates]
    wanted += [f"{rate.area_ha:.2f}" for rate in prescription.rates]
    wanted += [one.what for one in record.findings] + [one.code for one in record.findings]
    wanted += list(record.assumptions) + list(record.inputs_sha256.values())
    wanted += [row["source"] for row in prescription.sources]
    wanted += list(cautions())
    wanted += [surface.reason for surface in record.surfaces.values()]
    wanted += [prescription.zone_map.reason[1:]]
    missing = [one for one in wanted if re.sub(r"\s+", " ", one) not in said]
    assert not missing


def test_a_record_with_little_in_it_still_makes_a_page(record):
    """No clay surface, no fit, no doubt, no value, no machine points, no findings."""
    surfaces = {
        name: replace(one, fit=None, quality=None, audit=None)
        for name, one in record.surfaces.items()
        if name != "clay"
    }
    bare = replace(
        record.prescription,
        value=(),
        saving=None,
        machine=replace(record.prescription.machine, points=(), loads=0.0, per_load=0.0),
        sources=(),
        zone_map=replace(record.prescription.zone_map, doubt=[], table=()),
    )
    made = report_page(replace(record, surfaces=surfaces, prescription=bare, findings=()))
    assert not re.search(rb"\bnan\b|\bNone\b", made)

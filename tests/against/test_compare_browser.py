"""The page of a comparison in a real browser; it has no script at all."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from schorl.report.compare_page import compare_page
from schorl.steps.comparing import compare
from support.browser import axe_faults, needs_chromium
from support.seasons import halves, lattice, season

pytestmark = needs_chromium
NASTY = "</style><script>document.title='taken'</script><img src=x onerror=\"document.title='x'\">"


def changed():
    random = np.random.default_rng(4)
    places = lattice(60)
    first = random.uniform(0.4, 0.9, len(places))
    gained = 0.2 * (places[:, 0] < np.median(places[:, 0]))
    second = first + gained + random.normal(0, 0.05, len(places))
    return compare(
        season(first, places=places),
        season(second, places=places, name="2026", zones=halves((0.8, 0.4), split=0.6)),
        draws=0,
    )


@pytest.fixture(scope="module")
def change():
    return changed()


@pytest.fixture(scope="module")
def page_file(change, tmp_path_factory):
    path = tmp_path_factory.mktemp("compare") / "compare.html"
    path.write_bytes(compare_page([change]))
    return path


def test_opens_without_script_request_or_complaint(opened, page_file):
    page = opened(page_file)
    assert "<script" not in page_file.read_text("utf-8")
    assert (page.asked, page.said) == ([page_file.as_uri()], [])


def test_layers_are_chosen_one_at_a_time(opened, page_file):
    page = opened(page_file)
    keys = ["change", "boron-before", "boron-after", "before", "after", "moved"]
    assert [b.get_attribute("value") for b in page.locator("input[name=show]").all()] == keys
    for key in keys:
        page.locator(f"#show-{key}").check(force=True)
        visible = page.evaluate(
            "[...document.querySelectorAll('#map .layer')].filter("
            "g => getComputedStyle(g).display !== 'none').map(g => g.classList[1])"
        )
        assert visible == [f"on-{key}"]
        assert [k for k in keys if page.locator(f".key-{k}").is_visible()] == [key]
    assert not page.locator(".strips").is_visible()
    page.locator("#top-strips").check(force=True)
    assert page.locator(".strips").is_visible()


def test_what_is_read_is_what_was_computed(opened, page_file, change):
    page = opened(page_file)
    rows = page.locator("#changes tbody tr").all()
    assert len(rows) == len(change.zones)
    for row, zone in zip(rows, change.zones, strict=True):
        said = row.inner_text().split("\t")
        assert said[0] == str(zone.zone)
        assert said[3] == f"{zone.change:+.2f}"
        assert said[4] == ("real" if zone.real else "noise")
    assert change.text in page.locator("main").inner_text().replace("\n", " ")
    assert "H360FD" in page.locator("#cautions").inner_text()


def test_phone_and_print(opened, page_file):
    page = opened(page_file, viewport={"width": 390, "height": 844}, is_mobile=True)
    assert page.evaluate("document.documentElement.scrollWidth") <= 390
    page.emulate_media(media="print")
    assert page.locator(".card").count() == 6
    assert not page.locator(".choices").is_visible()


def test_text_from_packs_runs_nothing(opened, change, tmp_path):
    hostile = replace(change, text=NASTY, before=replace(change.before, season=NASTY))
    path = tmp_path / "compare.html"
    path.write_bytes(compare_page([hostile]))
    page = opened(path)
    assert page.title().startswith("Invented")
    assert page.said == []


@pytest.mark.parametrize("width", [1280, 390])
def test_axe_finds_no_fault(opened, page_file, width):
    page = opened(page_file, viewport={"width": width, "height": 900})
    assert axe_faults(page) == []

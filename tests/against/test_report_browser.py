"""The report in a real browser: Debian's Chromium through Playwright, axe-core from npm.

Skipped where the browser is absent; the accessibility check also where axe-core is.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import shapely

from schorl.model.settings import AppliedBoron
from schorl.report.layers import boron_range, layers_of, short_before
from schorl.report.page import report_page
from support.browser import axe_faults, needs_chromium
from support.example_record import example_record

READY = "#map[data-ready=yes]"
NASTY = "</script><script>document.title='taken'</script><img src=x onerror=\"document.title='x'\">"

pytestmark = [
    needs_chromium,
    pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning"),
]


@pytest.fixture(scope="module")
def record():
    """The example, with surfaces that are rough enough to tell cells apart."""
    made = example_record()
    random = np.random.default_rng(11)
    surfaces = {
        name: replace(one, estimate=one.estimate * random.uniform(0.9, 1.1, made.grid.n_cells))
        for name, one in made.surfaces.items()
    }
    return replace(made, surfaces=surfaces)


@pytest.fixture(scope="module")
def page_file(record, tmp_path_factory):
    path = tmp_path_factory.mktemp("report") / "report.html"
    path.write_bytes(report_page(record))
    return path


@pytest.fixture
def opened(opened):
    """Open a report and wait until its script has read the facts."""

    def open_ready(path, **settings):
        return opened(path, ready=READY, **settings)

    return open_ready


def on_screen(page, record, cell: int) -> tuple[float, float]:
    """Where the middle of a cell lies on the screen."""
    east, north = record.grid.centres_m[cell]
    west, _, _, top = record.field.boundary.bounds
    field = page.locator("#field")
    field.scroll_into_view_if_needed()
    return tuple(
        field.evaluate(
            "(svg, at) => { const p = new DOMPoint(...at).matrixTransform(svg.getScreenCTM());"
            " return [p.x, p.y]; }",
            [east - west, top - north],
        )
    )


def reading(page) -> dict[str, str]:
    rows = page.locator("#reading > div").all()
    return {row.locator("dt").inner_text(): row.locator("dd").inner_text() for row in rows}


def some_cells(record, count=12):
    """Cells away from the boundary, whose line would lie on them."""
    away = shapely.distance(shapely.points(record.grid.centres_m), record.field.boundary.boundary)
    return np.random.default_rng(2).choice(np.flatnonzero(away > 10.0), count)


def colour_at(page, x: float, y: float) -> tuple[int, ...]:
    """Colour of one pixel of the screen, read by another library."""
    from rasterio.io import MemoryFile

    shot = page.screenshot(clip={"x": round(x), "y": round(y), "width": 1, "height": 1})
    with MemoryFile(shot) as held, held.open() as picture:
        return tuple(int(band[0, 0]) for band in picture.read([1, 2, 3]))


def test_opens_without_a_request_or_a_complaint(opened, page_file):
    page = opened(page_file)
    for button in page.locator("input[name=show]").all():
        button.check(force=True)
    assert page.asked == [page_file.as_uri()]
    assert page.said == []


def test_every_layer_is_shown_with_its_legend_and_alone(opened, page_file, record):
    page = opened(page_file)
    keys = ["rate", "zones", *(layer.key for layer in layers_of(record))]
    assert [b.get_attribute("value") for b in page.locator("input[name=show]").all()] == keys
    for key in keys:
        page.locator(f"#show-{key}").check(force=True)
        visible = page.evaluate(
            "[...document.querySelectorAll('#field .layer')].filter("
            "g => getComputedStyle(g).display !== 'none').map(g => g.classList[1])"
        )
        assert set(visible) == {f"on-{key}"}
        shown = [k for k in keys if page.locator(f"#key-{k}").is_visible()]
        assert shown == [key]
    for unit in ("kg/ha", "mg/kg", "%"):
        assert page.locator(".key", has_text=unit).count() > 0


@pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning")
def test_colours_on_the_screen_are_those_of_the_legend(opened, page_file, record):
    page = opened(page_file)
    for box in page.locator("#map input[type=checkbox]").all():
        box.uncheck(force=True)
    for layer in layers_of(record):
        if layer.key == "boron":  # its plus and minus signs lie on top
            continue
        page.locator(f"#show-{layer.key}").check(force=True)
        for cell in some_cells(record, 4):
            colour = layer.scale.colours[layer.classes[cell]]
            wanted = tuple(int(colour[at : at + 2], 16) for at in (1, 3, 5))
            assert colour_at(page, *on_screen(page, record, cell)) == wanted, (layer.key, cell)


def test_values_under_the_pointer_are_those_of_the_surfaces(opened, page_file, record):
    page = opened(page_file)
    low, high = boron_range(record)
    need, prescription = record.cell_need, record.prescription
    for cell in some_cells(record):
        page.mouse.move(*on_screen(page, record, cell))
        said = reading(page)
        boron = record.surfaces["boron"]
        rate = prescription.rates[prescription.zone_map.labels[cell]]
        assert said["Boron"] == (
            f"{boron.estimate[cell]:.2f} mg/kg, 9 times in 10 between {low[cell]:.2f} and "
            f"{high[cell]:.2f}"
        )
        assert said["SD of the map"] == f"{boron.map_sd_in_unit[cell]:.3f} mg/kg"
        assert said["Clay"] == f"{record.surfaces['clay'].estimate[cell]:.1f} %"
        assert said["Organic matter"] == f"{record.surfaces['organic_matter'].estimate[cell]:.2f} %"
        assert said["Target"].startswith(f"{need.target_mg_kg[cell]:.2f} mg/kg")
        chance = f"{100 * short_before(record)[cell]:.0f} %"
        chance = {"0 %": "under 1 %", "100 %": "over 99 %"}.get(chance, chance)
        assert said["Chance"].startswith(f"short now {chance}, ")
        assert said["Zone"].startswith(f"{rate.zone} ")
        assert said["Rate"].startswith(f"{rate.product_rate:.1f} kg/ha")
        assert said["Why"] == rate.why


def test_values_under_the_pointer_are_those_of_the_geotiffs(opened, page_file, record, tmp_path):
    import rasterio

    from schorl.formats.rasters import write_surfaces

    write_surfaces(tmp_path, record)
    page = opened(page_file)
    names = {"Boron": "boron", "SD of the map": "boron_sd", "Clay": "clay", "Zone": "zones"}
    names |= {"Organic matter": "organic_matter", "Rate": "rate"}
    for label, name in names.items():
        with rasterio.open(tmp_path / f"{name}.tif") as raster:
            for cell in some_cells(record, 5):
                page.mouse.move(*on_screen(page, record, cell))
                said = reading(page)[label].split()[0].rstrip(",")
                (value,) = next(raster.sample([record.grid.centres_m[cell]]))
                decimals = len(said.partition(".")[2])
                assert float(said) == pytest.approx(float(value), abs=0.5001 * 10.0**-decimals)


def test_outside_the_field_nothing_is_read(opened, page_file):
    page = opened(page_file)
    field = page.locator("#field")
    field.scroll_into_view_if_needed()
    box = field.bounding_box()
    page.mouse.move(box["x"] + 3, box["y"] + 3)
    assert reading(page) == {"Place": "outside the field"}


def test_the_map_is_worked_by_keyboard_alone(opened, page_file):
    page = opened(page_file)
    page.locator("#show-rate").focus()
    page.keyboard.press("ArrowRight")
    assert page.locator("#show-zones").is_checked()
    for _ in range(12):
        page.keyboard.press("Tab")
        if page.evaluate("document.activeElement.id") == "field":
            break
    assert page.evaluate("document.activeElement.id") == "field"
    page.keyboard.press("ArrowLeft")
    first = reading(page)["Place"]
    page.keyboard.press("Shift+ArrowLeft")
    assert reading(page)["Place"] != first
    assert "Zone" in page.locator("#spoken").inner_text()
    whole = page.locator("#field").get_attribute("viewBox")
    page.keyboard.press("+")
    assert page.locator("#field").get_attribute("viewBox") != whole
    page.keyboard.press("0")
    nearly = [float(v) for v in page.locator("#field").get_attribute("viewBox").split()]
    assert nearly == pytest.approx([float(v) for v in whole.split()], abs=0.01)


def test_a_mouse_that_moves_is_not_read_aloud(opened, page_file, record):
    page = opened(page_file)
    page.mouse.move(*on_screen(page, record, 400))
    assert "Boron" in reading(page)
    assert page.locator("#spoken").inner_text() == ""


def test_a_checksum_without_a_break_does_not_widen_a_phones_page(opened, record, tmp_path):
    long = f"Example-2026, manifest {'a1' * 32}"
    given = AppliedBoron(on=None, kg_ha=0.3, this_season=True, source=long)
    crop = replace(record.settings.crop, applied=(given,))
    made = replace(record, adapted_from=long, settings=replace(record.settings, crop=crop))
    path = tmp_path / "report.html"
    path.write_bytes(report_page(made))
    page = opened(path, viewport={"width": 390, "height": 844})
    assert page.evaluate("document.documentElement.scrollWidth") <= 390


def test_phone_width_with_a_finger(opened, page_file, record):
    page = opened(page_file, viewport={"width": 390, "height": 844}, has_touch=True, is_mobile=True)
    assert page.evaluate("document.documentElement.scrollWidth") <= 390
    page.touchscreen.tap(*on_screen(page, record, record.grid.n_cells // 3))
    assert "Boron" in reading(page)
    assert page.locator("#spoken").inner_text() != ""
    for target in page.locator("button:visible, .choice:visible").all():
        box = target.bounding_box()
        assert min(box["width"], box["height"]) >= 24  # WCAG 2.2, 2.5.8


def test_print_view_holds_all_maps_and_no_controls(opened, page_file, record):
    page = opened(page_file)
    page.emulate_media(media="print")
    assert page.locator(".atlas").is_visible()
    assert page.locator(".card").count() == 2 + len(layers_of(record))
    for gone in ("nav", ".choices", ".zoom", ".reading"):
        assert not page.locator(gone).is_visible()
    pypdf = pytest.importorskip("pypdf")
    import io

    pages = pypdf.PdfReader(io.BytesIO(page.pdf(prefer_css_page_size=True))).pages
    assert 3 <= len(pages) <= 14
    said = " ".join(one.extract_text() for one in pages)
    assert "H360FD" in said


def test_without_javascript_maps_can_still_be_chosen(opened, page_file):
    page = opened(page_file, java_script_enabled=False)
    assert page.locator("#field .on-rate").first.is_visible()
    page.locator("label[for=show-clay]").click()
    assert page.locator("#field .on-clay").first.is_visible()
    assert not page.locator("#field .on-rate").first.is_visible()
    assert page.locator("#key-clay").is_visible()
    assert page.locator(".unscripted").is_visible()
    assert not page.locator(".zoom").is_visible()


def test_text_from_files_runs_nothing(opened, record, tmp_path):
    samples = replace(record.samples, ids=(NASTY,) * len(record.samples))
    rates = tuple(replace(rate, why=NASTY) for rate in record.prescription.rates)
    hostile = replace(
        record,
        samples=samples,
        prescription=replace(record.prescription, rates=rates, advice=(NASTY,)),
        settings=replace(record.settings, prepared_by=NASTY, field_name="Field"),
    )
    path = tmp_path / "report.html"
    path.write_bytes(report_page(hostile))
    page = opened(path)
    page.mouse.move(*on_screen(page, record, 500))
    assert reading(page)["Why"] == NASTY
    assert page.title().startswith("Field")
    assert page.said == []


@pytest.mark.parametrize(
    "settings",
    [
        {"viewport": {"width": 1280, "height": 900}},
        {"viewport": {"width": 390, "height": 844}},
        {"viewport": {"width": 1280, "height": 900}, "media": "print"},
    ],
    ids=["desktop", "phone", "print"],
)
def test_axe_finds_no_fault(opened, page_file, record, settings):
    page = opened(page_file, viewport=settings["viewport"])
    media = settings.get("media")
    if media:
        page.emulate_media(media=media)
    else:
        page.mouse.move(*on_screen(page, record, 500))
    assert axe_faults(page) == []

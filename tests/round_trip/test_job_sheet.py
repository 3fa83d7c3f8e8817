"""The job sheet, read back by other programs (pypdf, poppler), says what the summary says."""

from __future__ import annotations

import io
import re
import shutil
import subprocess
from dataclasses import replace

import pytest
from pypdf import PdfReader

from schorl.findings import finding
from schorl.model.prescription import Limit
from schorl.model.summary import summary
from schorl.report.job_sheet import job_sheet
from schorl.units import KG_HA_PER_LB_ACRE, KG_PER_LB, UnitSystem
from support.example_record import example_record

FILES = ("TASKDATA/TASKDATA.XML", "shapefile/BORON01.zip", "prescription.geojson")


@pytest.fixture(scope="module")
def record():
    return example_record()


@pytest.fixture(scope="module")
def sheet(record):
    return job_sheet(record, files=FILES)


def words_of(pdf: bytes) -> str:
    pages = PdfReader(io.BytesIO(pdf)).pages
    return re.sub(r"\s+", " ", " ".join(page.extract_text() for page in pages))


def crowded(record):
    """Many zones with rates of their own, long names, many warnings, many files."""
    rate, zone = record.prescription.rates[0], record.prescription.zone_map.zones[0]
    zones = tuple(replace(zone, number=place) for place in range(1, 41))
    rates = tuple(
        replace(rate, zone=place, product_rate=3.0 + place / 4, ruled_by=Limit.MACHINE)
        for place in range(1, 41)
    )
    many = replace(
        record.prescription,
        rates=rates,
        zone_map=replace(record.prescription.zone_map, zones=zones),
        machine=replace(record.prescription.machine, advice=("Mind the gate. " * 6,) * 8),
    )
    found = tuple(
        finding("RATE-DOUBLED", where=f"zone {n}", what="very long words " * 30) for n in range(30)
    )
    settings = replace(record.settings, field_name="Upper Meadow behind the Long Barn " * 3)
    return replace(record, prescription=many, findings=found, settings=settings)


def test_figures_agree_with_the_summary(record, sheet):
    said, facts = words_of(sheet), summary(record)
    assert facts["field"]["name"] in said
    assert f"{facts['totals']['product']:.0f} {facts['totals']['unit']}" in said
    assert f"{facts['totals']['boron_kg']:.1f} kg" in said
    assert f"{facts['totals']['boron_pct']:g} % boron" in said
    assert facts["season"] in said
    for zone in facts["zones"]:
        assert f"{zone['boron_kg_ha']:.2f}" in said
        if zone["product_rate"]:
            amount = zone["area_ha"] * zone["product_rate"]
            assert f"{zone['area_ha']:.2f}" in said
            assert f"{amount:.0f} kg" in said or f"{amount:.1f} kg" in said
    for point in facts["machine"]["points"]:
        assert f"{point['figures']['feed_kg_min']:.2f}" in said
    for name in FILES:
        assert name in said
    assert f"{facts['machine']['order']:.0f} kg" in said


def test_a_second_reader_finds_the_rates_and_cautions(sheet, tmp_path):
    if shutil.which("pdftotext") is None:
        pytest.skip("pdftotext (poppler) is not installed")
    path = tmp_path / "sheet.pdf"
    path.write_bytes(sheet)
    done = subprocess.run(
        ["pdftotext", "-layout", str(path), "-"], capture_output=True, check=True, encoding="utf-8"
    )
    assert re.search(r"^\s*12\.0\s+1\.20\s+1\b", done.stdout, re.M)
    assert re.search(r"^\s*0\s+0\.00\s+3, 4\b.*shut off", done.stdout, re.M)
    assert "H360FD" in done.stdout
    assert "What was really done" in done.stdout


def test_same_record_same_bytes_and_tagged(record, sheet):
    assert job_sheet(record, files=FILES) == sheet
    catalogue = PdfReader(io.BytesIO(sheet)).trailer["/Root"]
    assert catalogue["/MarkInfo"]["/Marked"]
    assert catalogue["/Lang"] == "en"


def test_all_letters_come_from_the_bundled_font(sheet):
    fonts = {
        str(font.get_object()["/BaseFont"]).split("+")[-1]
        for page in PdfReader(io.BytesIO(sheet)).pages
        for font in page["/Resources"]["/Font"].values()
    }
    # File names are set in the monospaced face that the engraver carries itself.
    assert fonts == {"DejaVuSansCondensed", "DejaVuSansCondensed-Bold", "DejaVuSansMono"}


@pytest.mark.parametrize("change", [lambda r: r, crowded])
def test_never_more_than_two_a4_pages(record, change):
    pages = PdfReader(io.BytesIO(job_sheet(change(record), files=FILES * 4))).pages
    assert len(pages) == 2
    for page in pages:
        assert float(page.mediabox.width) == pytest.approx(210 / 25.4 * 72, abs=0.5)
        assert float(page.mediabox.height) == pytest.approx(297 / 25.4 * 72, abs=0.5)


def test_us_units_stand_beside_the_rates_of_the_files(record):
    us = replace(record, settings=replace(record.settings, units=UnitSystem.US))
    said = words_of(job_sheet(us, files=FILES))
    rate = record.prescription.rates[0].product_rate
    assert f"{rate / KG_HA_PER_LB_ACRE:.2f}" in said
    assert f"{rate:.2f}" in said
    assert f"{record.prescription.product_total / KG_PER_LB:.0f} lb" in said
    assert "In the files, kg/ha" in said


def test_words_from_files_are_no_commands(record):
    hostile = '#import "x"; *bold* _it_ @ref $x$ <label> [a](b) \\ `raw` // -- ~'
    settings = replace(record.settings, field_name=hostile, prepared_by=hostile)
    said = words_of(job_sheet(replace(record, settings=settings), files=(hostile,)))
    assert said.count(re.sub(r"\s+", " ", hostile)[:30]) >= 2

"""Words and units: exact factors, 80 columns, honest sentences."""

from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from schorl import units
from schorl.findings import finding
from schorl.report.machine_words import loads_words, point_rows
from schorl.report.shown import Shown, figure, percent
from schorl.report.words import closing_table, shown_of, what_to_do
from schorl.units import UnitSystem

METRIC, US = Shown(UnitSystem.METRIC, "kg"), Shown(UnitSystem.US, "kg")
US_LIQUID = Shown(UnitSystem.US, "L")


def in_us(record):
    return replace(record, settings=replace(record.settings, units=UnitSystem.US))


def untreated(record):
    rates = tuple(
        replace(rate, boron_kg_ha=0.0, product_rate=0.0) for rate in record.prescription.rates
    )
    none = replace(record.prescription, rates=rates, boron_kg=0.0, product_total=0.0)
    return replace(record, prescription=none)


def test_us_units_use_the_exact_factors():
    # 1 lb/acre = 1.12085 kg/ha; 1 gal/acre = 9.35396 L/ha; 1 acre = 0.404686 ha (NIST SP 811).
    assert US.rate_figure(1.12085 * 10) == "10.00"
    assert US_LIQUID.rate_figure(9.35396 * 12) == "12.00"
    assert METRIC.rate_figure(8.5) == "8.5"
    assert METRIC.rate_figure(8.25) == "8.25"
    assert US.area(0.404686) == "1.00 ac"
    assert US.amount(0.45359237 * 50) == "50.0 lb"
    assert US_LIQUID.amount(3.785411784 * 150) == "150 gal"
    assert US.depth(2.54 * 8) == "8.0 in"
    assert US.speed(1.609344 * 6) == "6.0 mph"


@given(st.floats(0, 1e6))
def test_small_shares_are_never_called_nothing(value):
    share = value / 1e6
    said = percent(share)
    assert (said == "0 %") == (share == 0)
    assert (said == "100 %") == (share == 1)


def test_minus_nought_is_nought():
    assert figure(-0.001, 1) == "0.0"
    assert figure(float("nan"), 1) == "–"


@pytest.mark.parametrize("change", [lambda r: r, in_us, untreated])
def test_the_closing_table_fits_80_columns(record, change):
    said = closing_table(change(record))
    assert max(map(len, said.splitlines())) <= 80
    for rate in record.prescription.rates:
        assert any(line.startswith(f"{rate.zone:>4} ") for line in said.splitlines())


def test_a_long_field_name_and_many_findings_still_fit(record):
    settings = replace(record.settings, field_name="Long " * 30)
    found = tuple(finding("JOB-DEFAULT", where="job", what="x" * 200, hint="") for _ in range(40))
    said = closing_table(replace(record, settings=settings, findings=found))
    assert max(map(len, said.splitlines())) <= 80
    assert "40 notes" in said


def test_nothing_to_spread_is_said_first(record):
    said = what_to_do(untreated(record), METRIC)
    assert said.startswith("Spread nothing")
    assert "after this" not in said


def test_the_paragraph_names_total_treated_and_untreated(record):
    said = what_to_do(record, METRIC)
    prescription = record.prescription
    fed = sum(rate.area_ha for rate in prescription.rates if rate.boron_kg_ha > 0)
    assert f"{prescription.product_total:.0f} kg" in said
    assert f"{fed:.2f} ha" in said
    assert "zones 3 and 4" in said


def test_machine_figures_carry_their_unit_in_both_systems(record):
    metric = {row[0]: row[1:] for row in point_rows(record, METRIC)}
    us = {row[0]: row[1:] for row in point_rows(in_us(record), shown_of(in_us(record)))}
    feed = record.prescription.machine.points[0].figures["feed_kg_min"]
    assert metric["Feed of the whole machine, kg/min"][0] == f"{feed:.2f}"
    assert us["Feed of the whole machine, lb/min"][0] == f"{feed / units.KG_PER_LB:.2f}"


def test_loads_are_counted_as_people_count_them():
    assert loads_words(0.0) == "none"
    assert loads_words(2.0) == "2 full"
    assert loads_words(2.5) == "2 full and 1 of 0.50"

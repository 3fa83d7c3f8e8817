"""Maintenance, other readings of the test and money: what they add and what they leave alone."""

from __future__ import annotations

import pytest

from schorl.agronomy.crops import removal_g_t
from schorl.errors import UsageProblem
from schorl.jobs import check_job, lay_over, load_job
from schorl.run.inputs import read_inputs
from schorl.run.prescribing import survey
from support.command import FIELDS

FIELD = FIELDS / "marl_pit/2026"


def surveyed(**more):
    values = lay_over(load_job(FIELD), {key.replace("__", "."): v for key, v in more.items()})
    return survey(read_inputs(check_job(values, where="job"), FIELD))


@pytest.fixture(scope="module")
def plain():
    return surveyed()


def rates(record):
    return {rate.zone: rate for rate in record.prescription.rates}


def test_maintenance_adds_what_the_harvest_takes_only_below_the_target(plain):
    harvest_t_ha = 12.0
    removed = removal_g_t("alfalfa (lucerne)") * harvest_t_ha / 1000
    kept = surveyed(crop__maintenance_yield_t_ha=harvest_t_ha)
    short = plain.surfaces["boron"].estimate < plain.cell_need.target_mg_kg
    more = kept.cell_need.need_mean_kg_ha - plain.cell_need.need_mean_kg_ha
    assert more[short] == pytest.approx(removed)
    assert not more[~short].any()
    assert kept.prescription.boron_kg > plain.prescription.boron_kg
    for rate in kept.prescription.rates:
        held = [v for k, v in rate.limits_kg_ha.items() if k != "need"]
        assert rate.boron_kg_ha <= min(held) + 1e-9
    assert any(row["key"] == "removal: alfalfa (lucerne)" for row in kept.prescription.sources)


def test_maintenance_without_a_figure_is_refused():
    with pytest.raises(UsageProblem) as refused:
        surveyed(crop__maintenance_yield_t_ha=5.0, crop__name="swede")
    assert refused.value.findings[0].code == "RATE-REMOVAL"


def test_other_readings_are_said_where_they_decide_otherwise(plain):
    said = [one.what for one in plain.findings if one.code == "RATE-READING"]
    line = surveyed(crop__interpretation="texture line")
    by_line = rates(line)
    text = next(one for one in said if "texture line" in one)
    for zone, rate in rates(plain).items():
        apart = abs(by_line[zone].boron_kg_ha - rate.boron_kg_ha) if zone in by_line else 0
        if apart >= 0.30:
            assert f"zone {zone}: " in text
            assert f"instead of {rate.boron_kg_ha:.2f}" in text
    # Seen from the other side, the reading that ruled before is the one that differs.
    other = [one.what for one in line.findings if one.code == "RATE-READING"]
    assert any("crop need" in one for one in other)
    assert not any("texture line" in one for one in other)


def test_money_is_boron_and_expected_loss_and_changes_no_rate(plain):
    priced = surveyed(prices__boron_per_kg=9.0, prices__yield_per_kg_short=400.0,
                      prices__currency="EUR")  # fmt: skip
    for plan, bare in zip(priced.prescription.value, plain.prescription.value, strict=True):
        assert bare.cost is None
        assert plan.cost == pytest.approx(9.0 * plan.boron_kg + 400.0 * plan.loss_kg)
        assert plan.boron_kg == bare.boron_kg
    from schorl.report.page import report_page

    assert b"Boron and loss, EUR" in report_page(priced)

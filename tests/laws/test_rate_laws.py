"""Laws of the dose: no option, soil or machine may cross them.

A thousand cases each; SCHORL_CASES=100000 in the environment asks for more.
"""

from __future__ import annotations

import os
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from schorl.agronomy.caps import (
    ABSOLUTE_ALFALFA_KG_HA,
    ABSOLUTE_PASS_KG_HA,
    ABSOLUTE_SEASON_KG_HA,
    absolute_limit_kg_ha,
    rate_cap,
)
from schorl.agronomy.chances import chance_over_ceiling, expected_loss_kg_ha
from schorl.agronomy.crops import crop_named
from schorl.agronomy.tables import limit, table
from schorl.intake.quantities import FACTORS
from schorl.machinery.plan import machine_plan
from schorl.machinery.rates import boron_per_unit, machine_rate
from schorl.model.prescription import CellNeed
from schorl.model.settings import (
    CropSettings,
    Form,
    Machine,
    Override,
    Placement,
    Product,
    RunSettings,
)
from schorl.steps.zone_rates import best_rate_kg_ha, plan_outcome, ruled_rate, unevenness_of
from support.one_soil import ruled

CROPS = st.sampled_from([row["id"] for row in table("crops")])
ASKED = int(os.environ.get("SCHORL_CASES", "1000"))
#: Many cases are only drawn; a failing one among a thousand is also made small.
PHASES = tuple(Phase) if ASKED <= 1000 else (Phase.explicit, Phase.generate)
CASES = settings(max_examples=ASKED, deadline=None, phases=PHASES)


@st.composite
def soils(draw):
    """Cells of a zone with any boron, target, mass and cap."""
    count = draw(st.integers(1, 6))
    cells = np.ones(count)
    log = draw(st.booleans())
    boron = np.array(draw(st.lists(st.floats(0.02, 4.0), min_size=count, max_size=count)))
    target, ceiling = draw(st.floats(0.2, 1.7)), draw(st.floats(1.4, 3.5))
    mass, top = draw(st.floats(1.0, 3.4)), draw(st.floats(0.8, 1.7))
    spread = draw(st.floats(0.0, 0.6))
    location = np.log(boron) - 0.5 * spread**2 if log else boron
    return CellNeed(
        need_mean_kg_ha=(target - boron) * mass,
        need_sd_kg_ha=spread * mass * cells,
        boron_mg_kg=boron,
        boron_location=location,
        boron_sd=spread * cells,
        boron_log=log,
        target_mg_kg=target * cells,
        ceiling_mg_kg=ceiling * cells,
        mass_need=mass * cells,
        mass_ceiling=top * cells,
        rate_cap_kg_ha=draw(st.floats(0.0, 3.36)) * cells,
        hot=np.zeros(count, bool),
    )


@st.composite
def jobs(draw):
    """Settings with any machine and product."""
    step = draw(st.one_of(st.none(), st.floats(0.1, 5.0)))
    machine = Machine(
        spread_cv_pct=draw(st.floats(0, 20)),
        step=step,
        least_rate=draw(st.one_of(st.none(), st.floats(0.0, 20.0))),
        most_rate=draw(st.one_of(st.none(), st.floats(0.5, 60.0))),
    )
    return RunSettings(
        field_name="f",
        season="s",
        crop=CropSettings(crop="sugar beet", cost_ratio=draw(st.floats(0.2, 4.0))),
        product=Product(form=Form.GRANULE, boron_pct=draw(st.floats(0.5, 21.0))),
        placement=draw(st.sampled_from([Placement.BROADCAST, Placement.FOLIAR])),
        machine=machine,
    )


@given(soils(), jobs())
@CASES
def test_never_above_cap_chance_or_absolute_limit(cells, job):
    rate = ruled_rate(cells, job).boron_kg_ha
    assert 0 <= rate <= ABSOLUTE_PASS_KG_HA + 1e-12
    assert rate <= cells.rate_cap_kg_ha.min() + 1e-12
    if rate > 0:
        over = chance_over_ceiling(cells, rate, unevenness=unevenness_of(job)).mean()
        assert over <= limit("chance-of-excess") + 1e-9


@given(soils(), jobs(), st.floats(0.0, 1.5))
@CASES
def test_more_boron_in_the_soil_never_raises_a_rate(cells, job, more):
    shift = np.log1p(more / cells.boron_mg_kg) if cells.boron_log else more
    richer = replace(
        cells,
        boron_mg_kg=cells.boron_mg_kg + more,
        boron_location=cells.boron_location + shift,
        need_mean_kg_ha=cells.need_mean_kg_ha - more * cells.mass_need,
    )
    assert ruled_rate(richer, job).boron_kg_ha <= ruled_rate(cells, job).boron_kg_ha + 1e-7


@given(soils(), jobs())
@CASES
def test_nothing_at_or_above_the_ceiling(cells, job):
    at = np.full(len(cells.hot), float(cells.ceiling_mg_kg[0]))
    location = np.log(at) - 0.5 * cells.boron_sd**2 if cells.boron_log else at
    full = replace(
        cells, boron_mg_kg=at, boron_location=location,
        need_mean_kg_ha=(cells.target_mg_kg - at) * cells.mass_need,
    )  # fmt: skip
    assert ruled_rate(full, job).boron_kg_ha == 0.0


@given(st.floats(0, 5), jobs())
@CASES
def test_a_machine_never_gives_more_than_was_wanted(wanted, job):
    given_rate = float(machine_rate(wanted, job.product, job.machine))
    assert 0 <= given_rate <= wanted + 1e-12
    if job.machine.most_rate is not None:
        most = job.machine.most_rate * boron_per_unit(job.product)
        assert given_rate <= most + 1e-12
    product = given_rate / boron_per_unit(job.product)
    assert given_rate == 0 or product >= (job.machine.least_rate or 0) - 1e-6


@given(CROPS, st.sampled_from(list(Placement)), st.floats(0, 50), st.sampled_from(["", "A. Name"]))
@CASES
def test_no_override_passes_the_absolute_limit(crop_name, placement, value, person):
    crop = crop_named(crop_name)
    overrides = tuple(
        Override(what=what, value=value, unit="kg/ha", person=person)
        for what in ("rate cap", "band cap", "alfalfa season limit")
    )
    most = absolute_limit_kg_ha(crop, overrides)
    assert most <= ABSOLUTE_ALFALFA_KG_HA
    if crop.name != "alfalfa (lucerne)" or not person:
        assert most == ABSOLUTE_SEASON_KG_HA
    cap = rate_cap(crop, placement, overrides)
    assert cap.kg_ha <= most
    if placement is Placement.SEED_ROW:
        assert cap.kg_ha == 0
    if not person:
        assert cap == rate_cap(crop, placement)


@given(soils(), jobs())
@CASES
def test_a_dearer_shortage_never_lowers_the_need(cells, job):
    low = best_rate_kg_ha(cells, cost_ratio=job.crop.cost_ratio)
    assert best_rate_kg_ha(cells, cost_ratio=job.crop.cost_ratio * 2) >= low - 1e-9


@given(soils(), jobs())
@CASES
def test_the_best_rate_has_the_least_expected_loss(cells, job):
    ratio = job.crop.cost_ratio
    best = best_rate_kg_ha(cells, cost_ratio=ratio)
    least = expected_loss_kg_ha(cells, best, cost_ratio=ratio).sum()
    for other in (0.0, best * 0.8, best * 1.2 + 0.05):
        loss = expected_loss_kg_ha(cells, other, cost_ratio=ratio).sum()
        assert loss >= least - 1e-6 * max(1.0, least)


@given(soils(), jobs())
@CASES
def test_a_plan_is_the_sum_of_its_zones(cells, job):
    """And no zone of it is above the lowest cap."""
    labels = np.arange(len(cells.hot)) % 2
    outcome = plan_outcome(labels, cells, job, cell_ha=0.01)
    ratio = job.crop.cost_ratio
    losses = [
        expected_loss_kg_ha(cells, np.full(len(labels), rate), cost_ratio=ratio)[labels == zone]
        for zone, rate in enumerate(outcome.rates_kg_ha.tolist())
    ]
    total = sum(float(loss.sum()) * 0.01 for loss in losses)
    assert outcome.loss_kg == pytest.approx(total, rel=1e-9, abs=1e-12)
    assert (outcome.rates_kg_ha <= cells.rate_cap_kg_ha.min() + 1e-12).all()


@given(st.floats(0.01, 10))
@CASES
def test_the_same_soil_in_five_units(mg_kg):
    factors = FACTORS["boron"]
    printed = {
        "mg/kg": mg_kg, "ug/kg": mg_kg * 1e3, "g/kg": mg_kg / 1e3, "mg/100g": mg_kg / 10,
        "lb/acre": mg_kg * 2.0, "kg/ha": mg_kg * 2.24,
    }  # fmt: skip
    for unit, value in printed.items():
        assert value * factors[unit] == pytest.approx(mg_kg, rel=1e-9)


TEXTURES = {name: [row["id"] for row in table("crops") if row["ceiling_class"] == name]
            for name in ("texture", "sensitive", "very sensitive")}  # fmt: skip


@given(
    boron=st.floats(0.02, 3.0),
    clay=st.floats(1, 60),
    matter=st.floats(0.3, 9),
    classes=st.lists(st.sampled_from(list(TEXTURES)), min_size=2, max_size=2),
)
@CASES
def test_a_more_sensitive_next_crop_never_raises_a_rate(boron, clay, matter, classes):
    """The same crop on the same soil, before two crops of differing sensitivity."""
    order = list(TEXTURES)
    milder, harder = sorted(classes, key=order.index)
    given_rates = [
        ruled(
            "sugar beet", boron, clay_pct=clay, organic_matter_pct=matter,
            next_crop=TEXTURES[name][0],
        ).boron_kg_ha
        for name in (milder, harder)
    ]  # fmt: skip
    assert given_rates[1] <= given_rates[0] + 1e-9


def _milder_and_harder():
    """Pairs of crops with one need, the second at least as sensitive and its cap no higher."""
    order = list(TEXTURES)
    rows = table("crops")
    return [
        (one["id"], other["id"])
        for one in rows
        for other in rows
        if one["need"] == other["need"]
        and order.index(one["ceiling_class"]) < order.index(other["ceiling_class"])
        and float(one["rate_cap_kg_ha"]) >= float(other["rate_cap_kg_ha"])
    ]


@given(
    boron=st.floats(0.02, 3.0), clay=st.floats(1, 60), matter=st.floats(0.3, 9),
    pair=st.sampled_from(_milder_and_harder()),
    placement=st.sampled_from(["broadcast", "incorporated", "foliar"]),
)  # fmt: skip
@CASES
def test_a_more_sensitive_crop_never_gets_more(boron, clay, matter, pair, placement):
    """Crops of one need on the same soil, each followed by itself."""
    milder, harder = (
        ruled(
            crop, boron, clay_pct=clay, organic_matter_pct=matter, placement=placement
        ).boron_kg_ha
        for crop in pair
    )
    assert harder <= milder + 1e-9


@given(soils(), jobs(), st.lists(st.floats(0.01, 30.0), min_size=2, max_size=2))
@CASES
def test_product_times_its_share_is_boron(cells, job, areas_ha):
    """Zone by zone and in all, whatever the machine did to the rates."""
    boron = plan_outcome(np.arange(len(cells.hot)) % 2, cells, job, cell_ha=0.01).rates_kg_ha
    zones = list(zip(areas_ha, boron.tolist(), strict=False))
    plan = machine_plan(zones, job.product, job.machine, placement=job.placement)
    share = job.product.boron_pct / 100.0
    given_kg_ha = np.array(plan.boron_kg_ha)
    assert np.array(plan.product_rates) * share == pytest.approx(given_kg_ha, rel=1e-12, abs=1e-15)
    product = sum(area * rate for (area, _), rate in zip(zones, plan.product_rates, strict=True))
    total = sum(area * rate for (area, _), rate in zip(zones, plan.boron_kg_ha, strict=True))
    assert product * share == pytest.approx(total, rel=1e-12, abs=1e-15)


@given(
    boron=st.floats(0.02, 3.0), more=st.floats(0.0, 1.0), clay=st.floats(1, 60),
    matter=st.floats(0.3, 9), crop=CROPS, placement=st.sampled_from(["broadcast", "foliar"]),
)  # fmt: skip
@CASES
def test_from_soil_to_rate_more_boron_never_gives_more(boron, more, clay, matter, crop, placement):
    def rate(value):
        return ruled(
            crop, value, clay_pct=clay, organic_matter_pct=matter, placement=placement
        ).boron_kg_ha

    assert rate(boron + more) <= rate(boron) + 1e-7


#: One field in five systems: unit of the test and of the rate, and what they are of mg/kg, kg/ha.
SYSTEMS = {
    "mg/kg": 1.0, "ug/kg": 1e3, "g/kg": 1e-3, "mg/100g": 0.1, "lb/acre": 2.0,
}  # fmt: skip


@given(boron=st.floats(0.02, 3.0), clay=st.floats(1, 60), matter=st.floats(0.3, 9))
@CASES
def test_a_field_in_five_unit_systems_gets_the_same_rates(boron, clay, matter):
    """What a laboratory prints in any unit ends in the same rate, to six figures."""
    rates = [
        ruled(
            "sugar beet", boron * printed * FACTORS["boron"][unit], clay_pct=clay,
            organic_matter_pct=matter,
        ).boron_kg_ha
        for unit, printed in SYSTEMS.items()
    ]  # fmt: skip
    assert rates == pytest.approx([rates[0]] * len(rates), rel=1e-6, abs=1e-9)

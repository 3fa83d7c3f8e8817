"""Adapting: the same boron another way, never more of it anywhere."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from schorl.agronomy.chances import chance_over_ceiling
from schorl.errors import Refusal, UsageProblem
from schorl.machinery.profiles import Profile
from schorl.model.settings import Form, Machine, Placement, Product
from schorl.model.summary import summary
from schorl.model.zones import ZoneKind
from schorl.steps.adapting import Change, adapt
from schorl.steps.zone_rates import part_of, unevenness_of
from schorl.zoning.cover import cover_faults
from support.example_record import example_record

RECORD = example_record()
WEST, SOUTH, EAST, NORTH = RECORD.field.boundary.bounds
SPRAY = Product(form=Form.SPRAY, boron_g_l=150.0)


def by_zone(record):
    return {rate.zone: rate for rate in record.prescription.rates}


def check(adapted):
    """What holds whatever was changed."""
    record, prescription = adapted.record, adapted.record.prescription
    zones = prescription.zone_map.zones
    assert not cover_faults([zone.geometry for zone in zones], record.field.boundary)
    assert sum(zone.area_ha for zone in zones) == pytest.approx(record.field.area_ha, rel=1e-6)
    old = by_zone(RECORD)
    for zone, rate in zip(zones, prescription.rates, strict=True):
        before = old[zone.number].boron_kg_ha if zone.number in old else 0.0
        assert 0 <= rate.boron_kg_ha <= before
        assert zone.kind is ZoneKind.ZONE or rate.boron_kg_ha == 0
    assert prescription.boron_kg == pytest.approx(
        sum(rate.area_ha * rate.boron_kg_ha for rate in prescription.rates)
    )
    assert prescription.boron_kg <= RECORD.prescription.boron_kg * (1 + 1e-9)
    stated = prescription.boron_pct
    share = stated / 100 if stated is not None else prescription.boron_g_l / 1000
    assert prescription.product_total * share == pytest.approx(prescription.boron_kg)
    summary(record)


def test_another_product_gives_the_same_boron():
    adapted = adapt(RECORD, Change(product=Product(form=Form.GRANULE, boron_pct=5.0)), source="p")
    check(adapted)
    assert adapted.record.adapted_from == "p"
    assert adapted.record.prescription.boron_kg == pytest.approx(RECORD.prescription.boron_kg)
    for number, rate in by_zone(adapted.record).items():
        assert rate.product_rate == pytest.approx(2 * by_zone(RECORD)[number].product_rate)
        assert rate.ruled_by is by_zone(RECORD)[number].ruled_by


def test_granules_to_a_spray_with_everything_chosen():
    adapted = adapt(RECORD, Change(product=SPRAY, machine=Machine(pulse_width_ratio=8)), source="p")
    check(adapted)
    assert adapted.record.prescription.unit == "L"
    assert adapted.record.settings.machine.nozzle_size
    assert adapted.record.prescription.boron_kg == pytest.approx(RECORD.prescription.boron_kg)


def test_a_coarse_machine_lowers_and_says_so():
    adapted = adapt(RECORD, Change(machine=Machine(step=3.0)), source="p")
    check(adapted)
    assert by_zone(adapted.record)[2].boron_kg_ha == pytest.approx(0.3)
    assert "ADAPT-LOWER" in {found.code for found in adapted.findings}


def test_keep_off_areas_are_cut_out_exactly():
    area = shapely.box(WEST + 100, SOUTH + 100, WEST + 200, SOUTH + 300)
    adapted = adapt(RECORD, Change(keep_off=(area,)), source="p")
    check(adapted)
    for zone, rate in zip(
        adapted.record.prescription.zone_map.zones,
        adapted.record.prescription.rates,
        strict=True,
    ):
        if rate.boron_kg_ha > 0:
            assert shapely.intersection(zone.geometry, area).area < 1e-6
    saved = (
        shapely.intersection(area, RECORD.prescription.zone_map.zones[0].geometry).area
        / 10_000
        * 1.2
    )
    assert adapted.record.prescription.boron_kg == pytest.approx(
        RECORD.prescription.boron_kg - saved, rel=1e-3
    )
    labels = adapted.record.prescription.zone_map.labels
    inside = shapely.contains_xy(area, RECORD.grid.centres_m)
    kinds = np.array([zone.kind for zone in adapted.record.prescription.zone_map.zones])
    assert set(kinds[labels[inside]]) == {ZoneKind.KEEP_OFF}


def test_a_zone_that_goes_retires_its_number():
    whole = RECORD.prescription.zone_map.zones[1].geometry.buffer(1.0)
    adapted = adapt(RECORD, Change(keep_off=(whole,)), source="p")
    check(adapted)
    assert 2 not in by_zone(adapted.record)
    assert 2 in adapted.record.prescription.zone_map.retired_numbers
    assert "ADAPT-GONE" in {found.code for found in adapted.findings}


def test_a_machine_that_throws_less_evenly_stays_under_the_ceiling():
    tight = replace(
        RECORD.cell_need, ceiling_mg_kg=np.full(RECORD.grid.n_cells, 1.75), boron_sd=np.full(
            RECORD.grid.n_cells, 0.02)
    )  # fmt: skip
    start = replace(RECORD, cell_need=tight)
    even = replace(start.settings, machine=replace(start.settings.machine, spread_cv_pct=5.0))
    adapted = adapt(
        replace(start, settings=even), Change(machine=Machine(spread_cv_pct=20.0)), source="p"
    )
    check(adapted)
    assert by_zone(adapted.record)[1].boron_kg_ha < 1.2
    for place, rate in enumerate(adapted.record.prescription.rates):
        if rate.boron_kg_ha > 0:
            cells = part_of(tight, adapted.record.prescription.zone_map.labels == place)
            uneven = unevenness_of(adapted.record.settings)
            assert chance_over_ceiling(cells, rate.boron_kg_ha, unevenness=uneven).mean() <= 0.0501


def test_refused():
    with pytest.raises(Refusal) as said:
        adapt(RECORD, Change(machine=Machine(spread_cv_pct=25.0)), source="p")
    assert said.value.exit_code == 4
    foliar = replace(RECORD, settings=replace(RECORD.settings, placement=Placement.FOLIAR))
    with pytest.raises(UsageProblem) as usage:
        adapt(foliar, Change(), source="p")
    assert usage.value.findings[0].code == "ADAPT-FORM"
    with pytest.raises(Refusal):
        adapt(RECORD, Change(profile=Profile(most_vertices=5)), source="p")


def test_adapted_to_itself_is_the_same():
    adapted = adapt(RECORD, Change(), source="p")
    check(adapted)
    for number, rate in by_zone(RECORD).items():
        again = by_zone(adapted.record)[number]
        assert again.boron_kg_ha == pytest.approx(rate.boron_kg_ha)
        assert again.product_rate == pytest.approx(rate.product_rate)


@given(
    st.floats(1, 20),
    st.one_of(st.none(), st.floats(0.5, 6)),
    st.one_of(st.none(), st.floats(1, 15)),
    st.one_of(st.none(), st.floats(5, 30)),
    st.floats(0, 20),
    st.sampled_from([0.0, 15.0, 40.0]),
)
@settings(max_examples=25, deadline=None)
def test_never_more_boron_in_any_zone(pct, step, least, most, cv, strip):
    machine = Machine(step=step, least_rate=least, most_rate=most, spread_cv_pct=cv)
    change = Change(
        product=Product(form=Form.GRANULE, boron_pct=pct), machine=machine, keep_off_m=strip
    )
    check(adapt(RECORD, change, source="p"))

"""Zones to rows: hot and keep-off ground, slivers, sprays, and what is said beside the rates."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import shapely

from schorl.model.prescription import Limit
from schorl.model.settings import Form, Machine, Placement, Product
from schorl.model.zones import Zone, ZoneKind, ZoneMap
from schorl.steps.assessing import assess_cells
from schorl.steps.rating import prescribe_rates
from support.one_soil import CELLS, GRID, job, sampled, surfaces_of

SOIL = {"clay": 15.0, "organic_matter": 2.0}
WEST, EAST = shapely.box(0, 0, 10, 20), shapely.box(10, 0, 20, 20)


def zone_map(*kinds, areas=(WEST, EAST)):
    zones = tuple(
        Zone(number=place + 1, kind=kind, geometry=area, area_ha=area.area / 1e4)
        for place, (kind, area) in enumerate(zip(kinds, areas, strict=True))
    )
    labels = (GRID.centres_m[:, 0] > 10).astype(int)
    return ZoneMap(zones=zones, labels=labels, count=2, reason="two halves",
                   origin="own layer", heading_deg=0.0)  # fmt: skip


def rated(boron=0.4, zones=None, need=None, settings=None):
    settings = settings or job("sugar beet")
    samples, surfaces = sampled(boron, constants=SOIL), surfaces_of(boron, **SOIL)
    assessed = assess_cells(samples, surfaces, GRID, settings)
    if need:
        assessed = replace(assessed, need=replace(assessed.need, **need))
    zones = zones or zone_map(ZoneKind.ZONE, ZoneKind.ZONE)
    return prescribe_rates(zones, assessed, samples, surfaces, GRID, settings)


def test_totals_are_sums_of_area_times_rate():
    prescription = rated().prescription
    rates = prescription.rates
    assert prescription.boron_kg == pytest.approx(sum(r.area_ha * r.boron_kg_ha for r in rates))
    total = sum(r.area_ha * r.product_rate for r in rates)
    assert prescription.product_total == pytest.approx(total)
    assert prescription.product_total * 0.10 == pytest.approx(prescription.boron_kg)
    near = rated(boron=0.72, need={"boron_sd": np.full(CELLS, 0.2)}).prescription
    assert near.boron_kg > 0
    assert near.field_outlook.short_after < near.field_outlook.short_before


def test_hot_and_keep_off_ground_gets_none_and_so_does_a_zone_with_hot_cells():
    kept = rated(zones=zone_map(ZoneKind.HOT_SPOT, ZoneKind.KEEP_OFF)).prescription
    assert [rate.boron_kg_ha for rate in kept.rates] == [0.0, 0.0]
    assert [rate.ruled_by for rate in kept.rates] == [Limit.HOT_SPOT, Limit.KEEP_OFF]
    assert "soil at its ceiling here" in kept.rates[0].why
    assert "keep-off" in kept.rates[1].why
    hot = np.zeros(CELLS, bool)
    hot[0] = True  # the north-west cell
    first, second = rated(need={"hot": hot}).prescription.rates
    assert (first.boron_kg_ha, first.ruled_by) == (0.0, Limit.HOT_SPOT)
    assert first.limits_kg_ha["hot spot"] == 0.0
    assert second.boron_kg_ha > 0


def test_a_sliver_without_a_cell_is_read_from_the_nearest():
    sliver = shapely.box(19.9, 0, 20, 20)
    zones = zone_map(ZoneKind.ZONE, ZoneKind.ZONE, areas=(WEST, sliver))
    zones = replace(zones, labels=np.zeros(CELLS, int))
    rates = rated(zones=zones).prescription.rates
    assert rates[1].boron_mean_mg_kg == pytest.approx(0.4)
    assert (rates[1].boron_kg_ha, rates[1].ruled_by) == (0.0, Limit.NOTHING)


def test_a_sprays_mix_is_chosen_and_then_rules():
    spray = replace(
        job("sugar beet"), product=Product(form=Form.SPRAY, boron_g_l=150.0),
        placement=Placement.INCORPORATED, machine=Machine(tank_l=3000.0),
    )  # fmt: skip
    found = rated(settings=spray)
    assert found.prescription.unit == "L"
    assert found.machine.mix_g_b_l is not None
    for rate in found.prescription.rates:
        assert rate.product_rate * found.machine.mix_g_b_l / 1000 == pytest.approx(rate.boron_kg_ha)


def codes(found):
    return {one.code for one in found.findings}


def test_what_is_said_beside_the_rates():
    assert "RATE-FEW" in codes(rated())  # two samples a zone
    assert "RATE-OVER" in codes(rated(boron=2.6))
    assert "RATE-DOUBLED" in codes(rated(boron=0.05, need={"mass_ceiling": np.full(CELLS, 1.6)}))
    uneven = np.array([2.2, 0.35, 2.2, 0.35])
    found = rated(need={"need_mean_kg_ha": uneven})
    ranked = sorted(rate.boron_kg_ha for rate in found.prescription.rates)
    assert ("RATE-BIG" in codes(found)) == (ranked[1] > 3 * ranked[0])
    assert "RATE-BIG" in codes(found)
    leaves = job("sugar beet", placement="foliar")
    assert "RATE-FOLIAR" in codes(rated(boron=0.1, settings=leaves))


def test_a_field_that_loses_nothing_has_no_saving_to_show():
    exact = {"boron_sd": np.zeros(CELLS), "need_mean_kg_ha": np.zeros(CELLS)}
    none = rated(boron=0.5, need=exact).prescription
    assert (none.boron_kg, none.saving) == (0.0, None)
    low, middle, high = rated().prescription.saving
    assert low < middle < high

"""`draw_zones` from end to end, with a stand-in for the rates."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import shapely

from schorl.errors import Refusal
from schorl.model.settings import ExtraLayer
from schorl.model.surface import Verdict
from schorl.model.zones import ZoneKind
from schorl.zoning.cover import cover_faults
from support.zone_fields import MASS, samples_at, shifted, trial


def codes(zoned) -> set[str]:
    return {found.code for found in zoned.findings}


def kinds(zone_map) -> list[ZoneKind]:
    return [zone.kind for zone in zone_map.zones]


def exact(zone_map, field) -> bool:
    return cover_faults([zone.geometry for zone in zone_map.zones], field.boundary) == ()


def flat_field():
    """Boron and clay without pattern: noise at the samples, one value on the cells."""
    one = trial(boron_of=lambda e, n: 0.5 + 0 * e, clay_of=lambda e, n: 20.0 + 0 * e)
    random = np.random.default_rng(5)
    return replace(one, sample_need=random.normal(0.6, 0.1, len(one.samples)))


def test_a_step_in_boron_becomes_two_zones_numbered_from_the_least_boron():
    one = trial()
    zoned = one.draw()
    zones = zoned.zone_map
    assert zones.count == 2
    assert zones.origin == "clusters"
    assert [zone.number for zone in zones.zones] == [1, 2]
    means = [one.surfaces["boron"].estimate[zones.labels == place].mean() for place in (0, 1)]
    assert means[0] < means[1]
    assert zones.centres["boron"] == pytest.approx(tuple(means))
    assert exact(zones, one.field)
    # The true step runs half-way; the zones' edge may be a cell off.
    assert zones.zones[0].area_ha == pytest.approx(one.field.area_ha / 2, rel=0.02)


def test_the_reason_and_the_table_stand_behind_the_number():
    zones = trial().draw().zone_map
    assert zones.reason.startswith("Two zones: need and soil are patterned (p = 0.001)")
    assert [row.count for row in zones.table] == [1, 2, 3, 4, 5]
    assert zones.table[0].saving == 0.0
    assert all(row.saving_low <= row.saving <= row.saving_high for row in zones.table)
    assert "fuzziness performance (low is crisp)" in zones.table[1].indices


def test_noise_gets_one_flat_rate_and_the_reason_says_why():
    one = flat_field()
    zoned = one.draw()
    assert zoned.zone_map.count == 1
    assert zoned.zone_map.origin == "one flat rate"
    assert "p = " in zoned.zone_map.reason
    assert "ZONE-FLAT" in codes(zoned)
    assert zoned.zone_map.zones[0].geometry.equals(one.field.boundary)


def test_few_samples_are_called_no_evidence():
    one = flat_field()
    some = slice(0, 20)
    few = samples_at(one.samples.east_north_m[some], np.full(20, 0.5), np.full(20, 20.0))
    random = np.random.default_rng(5)
    zoned = replace(one, samples=few, sample_need=random.normal(0.6, 0.1, 20)).draw()
    assert zoned.zone_map.count == 1
    assert "no evidence" in zoned.zone_map.reason


def test_a_pattern_that_saves_nothing_under_the_cap_gets_one_rate():
    """Every cell needs more than the cap: a saving before the limits, none after them."""
    one = trial()
    need = replace(one.need, need_mean_kg_ha=one.need.need_mean_kg_ha + 8.0)
    zoned = replace(one, need=need).draw()
    assert zoned.zone_map.structure_p < 0.01
    assert zoned.zone_map.count == 1
    assert "not worth their risk" in zoned.zone_map.reason


def test_flat_boron_numbers_zones_from_the_most_need():
    one = trial(boron_of=lambda e, n: 0.5 + 0 * e, clay_of=lambda e, n: 10.0 + 30.0 * (n > 0.5))
    boron = replace(one.surfaces["boron"], verdict=Verdict.NONE)
    zones = replace(one, surfaces={**one.surfaces, "boron": boron}).draw().zone_map
    assert zones.count == 2
    need = [one.need.need_mean_kg_ha[zones.labels == place].mean() for place in (0, 1)]
    assert need[0] > need[1]


@pytest.mark.parametrize("count", [1, 2, 3, 4])
def test_the_advisors_number_is_used(count):
    one = trial(boron_of=lambda e, n: 0.3 + 0.5 * e).with_zoning(count=count)
    zones = one.draw().zone_map
    assert zones.count == count
    assert "as asked for" in zones.reason
    assert exact(zones, one.field)


def test_a_number_against_the_gate_is_a_warning():
    one = flat_field()
    random = np.random.default_rng(1)
    clay = 20.0 + random.normal(0.0, 0.5, one.grid.n_cells)
    surfaces = {**one.surfaces, "clay": replace(one.surfaces["clay"], estimate=clay, location=clay)}
    zoned = replace(one, surfaces=surfaces).with_zoning(count=2).draw()
    assert codes(zoned) & {"ZONE-COUNT", "ZONE-FEWER"}


def test_soil_only_zones_follow_the_soil_and_not_the_need():
    """Clay halves the field north-south, the need (credits) east-west."""
    one = trial(boron_of=lambda e, n: 0.5 + 0.0 * e, clay_of=lambda e, n: 15.0 + 15.0 * (n > 0.5))
    east = (one.grid.centres_m[:, 0] > one.grid.centres_m[:, 0].mean()).astype(float)
    one = replace(one, need=replace(one.need, need_mean_kg_ha=0.3 + 1.5 * east))
    zones = one.with_zoning(soil_only=True, count=2).draw().zone_map
    north = one.grid.centres_m[:, 1] > one.grid.centres_m[:, 1].mean()
    assert len(set(zones.labels[north])) == 1
    assert set(zones.labels[north]) != set(zones.labels[~north])


def test_hot_cells_are_cut_out_as_a_zero_patch_before_the_gate():
    one = trial()
    hot = np.zeros(one.grid.n_cells, bool)
    hot[2000:2004] = True
    zoned = one.with_hot(hot).draw()
    zones = zoned.zone_map
    assert kinds(zones) == [ZoneKind.ZONE, ZoneKind.ZONE, ZoneKind.HOT_SPOT]
    assert zones.zones[-1].number == 3
    assert (zones.labels[hot] == 2).all()
    # At least the machine's rectangle, 24 m by 20 m.
    assert zones.zones[-1].area_ha >= 0.048
    assert "ZONE-HOT" in codes(zoned)
    assert exact(zones, one.field)


def test_a_field_that_is_hot_everywhere_is_refused():
    one = trial()
    with pytest.raises(Refusal) as refused:
        one.with_hot(np.ones(one.grid.n_cells, bool)).draw()
    assert refused.value.findings[0].code == "ZONE-NOTHING-LEFT"
    assert refused.value.exit_code == 4


def test_keep_off_areas_are_cut_out_exactly():
    bank = shifted(shapely.box(-20, 90, 520, 120))
    one = trial().with_zoning(keep_off=(bank,))
    zones = one.draw().zone_map
    assert zones.zones[-1].kind is ZoneKind.KEEP_OFF
    kept = bank.intersection(one.field.boundary)
    assert zones.zones[-1].geometry.symmetric_difference(kept).area < 1e-6
    assert exact(zones, one.field)


def test_kept_zones_keep_their_outlines_and_numbers():
    upper, lower = shifted(shapely.box(0, 150, 500, 400)), shifted(shapely.box(0, 0, 500, 150))
    one = trial().with_zoning(kept=((7, upper), (3, lower)), retired_numbers=(9,))
    zones = one.draw().zone_map
    assert zones.origin == "kept"
    assert {zone.number: zone.geometry.area for zone in zones.zones} == pytest.approx(
        {7: upper.area, 3: lower.area}
    )
    assert zones.retired_numbers == (9,)
    assert exact(zones, one.field)


def test_a_new_patch_in_kept_zones_gets_a_number_never_used_before():
    upper, lower = shifted(shapely.box(0, 150, 500, 400)), shifted(shapely.box(0, 0, 500, 150))
    one = trial().with_zoning(kept=((7, upper), (3, lower)), retired_numbers=(9,))
    hot = np.zeros(one.grid.n_cells, bool)
    hot[2000] = True
    zones = one.with_hot(hot).draw().zone_map
    assert {zone.number: zone.kind for zone in zones.zones}[10] is ZoneKind.HOT_SPOT
    assert exact(zones, one.field)


def test_an_own_layer_with_gap_and_overlap_covers_the_field_and_says_so():
    left, right = shifted(shapely.box(-5, -5, 260, 405)), shifted(shapely.box(240, 0, 480, 400))
    one = trial().with_zoning(own_layer=((1, left), (2, right)))
    zoned = one.draw()
    assert {"ZONE-LAYER-GAP", "ZONE-LAYER-OVERLAP"} <= codes(zoned)
    zones = zoned.zone_map
    assert zones.origin == "own layer"
    assert exact(zones, one.field)
    by_number = {zone.number: zone for zone in zones.zones}
    assert by_number[1].geometry.area == pytest.approx(260 * 400)  # the first wins the overlap
    assert by_number[2].geometry.area == pytest.approx(240 * 400)  # and the gap has one neighbour


def test_zones_of_another_field_are_refused():
    away = shifted(shapely.box(400, 0, 900, 400))
    with pytest.raises(Refusal) as refused:
        trial().with_zoning(own_layer=((1, away),)).draw()
    assert refused.value.findings[0].code == "ZONE-LAYER-AWAY"


def composites(values, *, cover: float = 1.0):
    """Five composites in strips across the field, of 15 cores each."""
    one = trial()
    areas = [shifted(shapely.box(100 * i, 0, 100 * i + 100 * cover, 400)) for i in range(5)]
    places = np.array([[area.centroid.x, area.centroid.y] for area in areas])
    values = np.asarray(values, float)
    clay = np.full(5, 20.0)
    strip = np.minimum(((one.grid.centres_m[:, 0] - 400_000.0) // 100).astype(int), 4)
    boron = values[strip]
    return replace(
        one,
        samples=samples_at(places, values, clay, areas=areas, cores=15),
        sample_need=MASS * (0.78 - values),
        surfaces={"boron": replace(one.surfaces["boron"], estimate=boron, location=boron)},
        need=replace(one.need, need_mean_kg_ha=MASS * (0.78 - boron)),
    )


def test_composites_that_differ_are_the_management_zones():
    one = composites([0.3, 0.7, 0.4, 0.65, 0.2])
    zoned = one.draw()
    zones = zoned.zone_map
    assert zones.origin == "sample zones"
    assert zones.count == 5
    assert zones.structure_p < 0.01
    assert exact(zones, one.field)
    # Numbered from the least boron: strips 5, 1, 3, 4, 2.
    wests = [round(zone.geometry.bounds[0] - 400_000.0) for zone in zones.zones]
    assert wests == [400, 0, 200, 300, 100]


def test_composites_that_differ_by_no_more_than_error_get_one_rate():
    zones = composites([0.50, 0.53, 0.48, 0.51, 0.49]).draw().zone_map
    assert zones.origin == "one flat rate"
    assert zones.structure_p > 0.10
    assert "sample zones" in zones.reason


def test_composites_on_part_of_the_field_are_kriged_through_and_said_so():
    zoned = composites([0.3, 0.7, 0.4, 0.65, 0.2], cover=0.5).draw()
    assert zoned.zone_map.origin != "sample zones"
    assert "ZONE-SAMPLES-PART" in codes(zoned)


def test_redraw_krigs_through_composites_that_cover_the_field():
    one = composites([0.3, 0.7, 0.4, 0.65, 0.2]).with_zoning(redraw=True, count=2)
    assert one.draw().zone_map.origin == "clusters"


def test_an_extra_layer_takes_part_and_a_useless_one_is_named():
    one = trial()
    centres = one.grid.centres_m
    layer = ExtraLayer(name="yield", east_north_m=((0.0, 0.0),), values=(1.0,))
    slope = ExtraLayer(
        name="conductivity", east_north_m=tuple(map(tuple, centres)), values=tuple(centres[:, 1])
    )
    zoned = one.with_zoning(extras=(layer, slope)).draw()
    left = [found for found in zoned.findings if found.code == "ZONE-EXTRA"]
    assert [found.where for found in left] == ["yield"]


def test_doubt_is_highest_between_the_zones():
    one = trial(boron_of=lambda e, n: 0.3 + 0.5 * e).with_zoning(count=2)
    zones = one.draw().zone_map
    assert zones.doubt.shape == (one.grid.n_cells,)
    assert zones.doubt.min() >= 0.0
    assert zones.doubt.max() <= 1.0
    edge = zones.zones[0].geometry.boundary.intersection(zones.zones[1].geometry.boundary)
    away = np.array([edge.distance(shapely.Point(*place)) for place in one.grid.centres_m[::17]])
    doubt = zones.doubt[::17]
    assert doubt[away < 15].mean() > 5 * doubt[away > 150].mean()
    assert all(0.5 < sure <= 1.0 for sure in zones.sureness)


def test_the_heading_is_found_and_said_or_taken_as_given():
    found = trial().draw()
    assert found.zone_map.heading_deg == pytest.approx(90.0)
    assert "ZONE-HEADING" in codes(found)
    given = trial().with_zoning(heading_deg=200.0).draw()
    assert given.zone_map.heading_deg == pytest.approx(20.0)
    assert "ZONE-HEADING" not in codes(given)


def test_progress_is_told_and_ends():
    told = []
    one = trial()
    from schorl.steps.zoning import draw_zones

    draw_zones(
        one.field,
        one.grid,
        one.samples,
        one.surfaces,
        one.need,
        sample_need_kg_ha=one.sample_need,
        outcome=one.outcome,
        settings=one.settings,
        seed=0,
        progress=lambda *step: told.append(step),
    )
    assert told[0] == ("zones", 0, 3)
    assert told[-1] == ("zones", 3, 3)


def test_areas_of_one_number_are_one_zone_and_zones_off_the_field_are_none():
    corners = [(0, 0), (250, 0), (0, 200), (250, 200)]
    boxes = [shifted(shapely.box(x, y, x + 250, y + 200)) for x, y in corners]
    away = shifted(shapely.box(900, 0, 950, 50))
    layer = ((4, boxes[0]), (2, boxes[1]), (4, boxes[3]), (2, boxes[2]), (6, away))
    one = trial().with_zoning(own_layer=layer)
    zones = one.draw().zone_map
    assert sorted(zone.number for zone in zones.zones) == [2, 4]
    assert zones.count == 2
    assert zones.reason.startswith("Two zones")
    assert exact(zones, one.field)


def test_a_field_of_a_local_system_is_zoned_like_any_other():
    """A field across the edge of two UTM zones is worked in a transverse Mercator of its own."""
    from schorl.geodesy import area_ha, field_crs

    crs = field_crs(12.0, 52.0, west=11.998, east=12.004)
    assert crs.startswith("+proj=tmerc")
    one = trial()
    field = replace(one.field, crs=crs, epsg=None, area_ha=area_ha(one.field.boundary, crs=crs))
    zones = replace(one, field=field).draw().zone_map
    assert zones.count == 2
    assert sum(zone.area_ha for zone in zones.zones) == pytest.approx(field.area_ha, rel=1e-9)


def test_parts_of_a_field_that_do_not_touch_are_all_covered():
    parts = shapely.union_all(
        [shapely.box(0, 0, 240, 400), shapely.box(260, 0, 500, 400), shapely.box(510, 0, 530, 30)]
    )
    one = trial(shifted(parts))
    zones = one.draw().zone_map
    assert zones.count == 2
    assert exact(zones, one.field)
    assert sum(zone.area_ha for zone in zones.zones) == pytest.approx(one.field.area_ha)


def test_a_pattern_finer_than_the_machine_gets_one_rate():
    """Stripes of 12 m save much as clusters, and nothing once a 24 m machine must follow them."""
    one = trial(
        boron_of=lambda e, n: 0.3 + 0.4 * ((n * 400 // 12) % 2), clay_of=lambda e, n: 20 + 0 * e
    )
    one = replace(one, sample_need=one.samples.east_north_m[:, 0] - 400_000.0)
    zones = one.draw().zone_map
    assert zones.structure_p < 0.01
    assert zones.table[1].saving > 0.3
    assert zones.count == 1
    assert zones.origin == "one flat rate"
    assert "not worth their risk" in zones.reason

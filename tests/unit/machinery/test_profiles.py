"""Profiles: read, refused with every fault at once, and zones made to fit them."""

from __future__ import annotations

import pytest
import shapely

from schorl.errors import Refusal, UsageProblem
from schorl.machinery.profiles import Profile, profile_names, read_profile, shipped_profile
from schorl.machinery.simplify import fit_zones, shape_of

box = shapely.box


@pytest.mark.parametrize("name", profile_names())
def test_shipped_profiles_are_sound_and_titled(name):
    assert shipped_profile(name).title


def test_a_profile_of_ones_own():
    profile = read_profile(
        '\ufefftitle = "tractor shed"\nformats = ["shapefile"]\nmost_polygons = 40\n'
        'single_parts = true\nrate_decimals = 1\nmass_unit = "lb/ac"\n',
        where="shed.toml",
    )
    assert (profile.most_polygons, profile.single_parts) == (40, True)
    assert profile.rate_unit("kg") == "lb/ac"
    assert profile.rate_unit("L") == "L/ha"
    assert profile.rate(10.0, "kg") == 8.9  # 8.92 lb/ac, down
    assert read_profile("", where="empty") == Profile()


def test_faults_come_all_at_once_with_the_nearest_key():
    text = 'most_polygon = 4\nrate_decimals = 9\nholes = "no"\nformats = ["dwg"]\n'
    with pytest.raises(UsageProblem) as said:
        read_profile(text, where="mine.toml")
    assert said.value.exit_code == 2
    assert len(said.value.findings) == 4
    hints = " ".join(found.hint for found in said.value.findings)
    assert "most_polygons" in hints
    assert "from 0 to 6" in hints
    assert "true or false" in hints


@pytest.mark.parametrize("value", ["true", "1.5", '"3"', "-1", "0", "nan", "[]"])
def test_a_count_is_a_whole_number(value):
    with pytest.raises(UsageProblem):
        read_profile(f"most_polygons = {value}", where="x")


def test_not_toml():
    with pytest.raises(Refusal) as said:
        read_profile("most_polygons 40", where="x")
    assert said.value.exit_code == 3


def test_no_such_shipped_profile():
    with pytest.raises(UsageProblem) as said:
        shipped_profile("task-data-zone")
    assert "task-data-zones" in said.value.findings[0].hint


# --- fitting ----------------------------------------------------------------------------------


def pieces():
    """Zone 0 in two parts left and right of zone 1, and a small keep-off corner."""
    low = shapely.union_all([box(0, 0, 100, 300), box(200, 10, 210, 20)])
    keep = box(290, 290, 300, 300)
    rest = box(0, 0, 300, 300).difference(shapely.union_all([low, keep]))
    faces = shapely.polygonize(
        [shapely.node(shapely.union_all([shapely.boundary(one) for one in (low, keep, rest)]))]
    ).geoms

    def own(area):
        return shapely.union_all([f for f in faces if area.contains(f.representative_point())])

    return [own(low), own(rest), own(keep)]


def test_counts():
    shape = shape_of(pieces(), single_parts=True)
    assert shape.polygons == 4
    assert shape_of(pieces(), single_parts=True, holes=False).polygons > 4
    assert shape_of(pieces(), single_parts=False).polygons == 3


def test_small_parts_join_a_neighbour_that_gets_less():
    areas = pieces()
    profile = Profile(most_polygons=3, single_parts=True)
    fitted = fit_zones(areas, [1.2, 0.4, 0.0], [False, False, True], profile, most_tolerance_m=12)
    assert fitted.error.moved_ha == pytest.approx(0.01)
    assert fitted.error.more_kg == 0.0
    assert fitted.error.less_kg == pytest.approx(0.01 * 0.8)
    assert fitted.findings[0].code == "PROFILE-SIMPLER"
    assert shapely.coverage_is_valid(list(fitted.areas))
    assert fitted.areas[2].equals(areas[2])


def test_no_part_joins_a_neighbour_that_gets_more():
    """The small part gets least: giving it the rate around it would be more boron there."""
    profile = Profile(most_polygons=3, single_parts=True)
    with pytest.raises(Refusal) as said:
        fit_zones(pieces(), [0.0, 1.2, 0.0], [False, False, True], profile, most_tolerance_m=12)
    assert said.value.exit_code == 4
    found = said.value.findings[0]
    assert found.code == "PROFILE-LIMIT"
    assert "polygons" in found.what


def test_what_fits_is_left_alone():
    areas = pieces()
    fitted = fit_zones(areas, [1.2, 0.4, 0.0], [False] * 3, Profile(), most_tolerance_m=12)
    assert fitted.areas == tuple(areas)
    assert fitted.tolerance_m == 0.0
    assert not fitted.findings


def test_holes_that_a_controller_cannot_have_are_cut_open_and_counted():
    areas = pieces()
    fitted = fit_zones(
        areas, [1.2, 0.4, 0.0], [False] * 3, Profile(holes=False), most_tolerance_m=12
    )
    assert fitted.areas == tuple(areas)
    few = Profile(holes=False, most_polygons=4)
    with pytest.raises(Refusal, match="polygons"):
        fit_zones(areas, [1.2, 0.4, 0.0], [True] * 3, few, most_tolerance_m=12)

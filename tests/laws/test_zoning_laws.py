"""Laws of zones: they cover the field exactly once, and units, shifts and seeds change nothing."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

from schorl.model.field import lay_grid
from schorl.model.settings import Machine
from schorl.zoning.clusters import fuzzy_c_means, memberships
from schorl.zoning.cover import KEEP_OFF, Fixed, cover_faults, cover_field
from schorl.zoning.drawing import shape_clusters
from schorl.zoning.indices import (
    fuzziness_performance,
    modified_entropy,
    modified_partition_coefficient,
    partition_coefficient,
)
from schorl.zoning.loss import best_rate, expected_loss, expected_short, plan_loss
from schorl.zoning.matching import adjusted_rand, match_zones, transition_ha
from schorl.zoning.sampled import label_in
from schorl.zoning.structure import structure_p
from schorl.zoning.travel import ground_of, lay_travel_grid
from support.zone_fields import shifted, trial

slow_ones = settings(max_examples=6, deadline=None)
few = settings(max_examples=25, deadline=None)
more = settings(max_examples=60, deadline=None)


@st.composite
def fields(draw):
    """Stars of 5 to 12 corners about a middle, some with a hole, 0.3 to 8 ha."""
    corners = draw(st.integers(5, 12))
    reach = [draw(st.floats(30.0, 160.0)) for _ in range(corners)]
    angle = np.linspace(0.0, 2.0 * np.pi, corners, endpoint=False)
    star = shapely.Polygon(np.column_stack([reach * np.cos(angle), reach * np.sin(angle)]))
    if draw(st.booleans()):
        star = star.difference(shapely.Point(draw(st.floats(-30, 30)), 0.0).buffer(8.0))
    return shifted(shapely.make_valid(star, method="structure"))


@settings(max_examples=150, deadline=None)
@given(
    boundary=fields(),
    count=st.integers(2, 5),
    heading=st.floats(0.0, 179.0),
    seed=st.integers(0, 10**6),
    pond=st.booleans(),
)
def test_random_memberships_always_become_an_exact_cover(boundary, count, heading, seed, pond):
    """The worst case: labels without any pattern, on any field, in any direction."""
    grid = lay_grid(boundary, cell_m=5.0)
    shares = np.random.default_rng(seed).dirichlet(np.ones(count), grid.n_cells)
    ground = ground_of(Machine(working_width_m=12.0, speed_km_h=6.0), least_area_ha=0.05)
    travel = lay_travel_grid(grid, heading, margin_m=40.0)
    middle = shapely.get_coordinates(boundary.representative_point())[0]
    water = shapely.Point(middle).buffer(15.0)
    fixed = (Fixed(label=KEEP_OFF, area=water),) if pond else ()
    use = np.ones(grid.n_cells, bool)
    if pond:
        use = ~shapely.contains_xy(water, grid.centres_m)
    if not use.any():
        return
    shaped = shape_clusters(shares, use, travel, ground, cells_m=grid.centres_m)
    cover = cover_field(
        boundary, shaped.lines, shaped.label_of, fixed=fixed, tolerance_m=7.5, small_m2=100.0
    )
    areas = list(cover.areas.values())
    assert cover.faults == ()
    assert cover_faults(areas, boundary) == ()
    # Counted without the coverage functions: areas add up, and no two share any ground.
    assert abs(sum(area.area for area in areas) - boundary.area) < 0.1
    for place, one in enumerate(areas):
        assert all(one.intersection(other).area < 1e-6 for other in areas[place + 1 :])


@few
@given(boundary=fields(), seed=st.integers(0, 10**6), count=st.integers(1, 6))
def test_any_layer_of_polygons_is_made_to_cover_the_field(boundary, seed, count):
    random = np.random.default_rng(seed)
    west, south, east, north = boundary.bounds
    middles = random.uniform([west, south], [east, north], (count, 2))
    areas = [shapely.Point(place).buffer(random.uniform(20, 150)) for place in middles]
    if not any(area.intersects(boundary) for area in areas):
        return
    cover = cover_field(
        boundary,
        [shapely.boundary(area) for area in areas],
        lambda points: label_in(areas, points),
        small_m2=0.0,
    )
    assert cover.faults == ()


@slow_ones
@given(scale=st.floats(0.01, 100.0), shift=st.floats(-50.0, 50.0))
def test_the_unit_of_a_surface_does_not_change_the_zones(scale, shift):
    one = trial(
        n=40, cell_m=10.0, boron_of=lambda e, n: 0.3 + 0.2 * (e > 0.3) + 0.3 * (e > 0.75)
    ).with_zoning(count=3)
    clay = one.surfaces["clay"]
    other = replace(
        clay,
        estimate=clay.estimate * scale + shift,
        location=clay.location * scale + shift,
        map_sd=clay.map_sd * scale,
        decision_sd=clay.decision_sd * scale,
    )
    first = one.draw().zone_map
    second = replace(one, surfaces={**one.surfaces, "clay": other}).draw().zone_map
    assert (first.labels == second.labels).mean() > 0.999


@slow_ones
@given(seed=st.integers(0, 1000))
def test_same_input_and_seed_give_the_same_zones_to_the_last_bit(seed):
    one = trial(n=40, cell_m=10.0, boron_of=lambda e, n: 0.3 + 0.5 * e * n)
    first, second = one.draw(seed=seed).zone_map, one.draw(seed=seed).zone_map
    assert first.reason == second.reason
    assert [shapely.to_wkb(zone.geometry) for zone in first.zones] == [
        shapely.to_wkb(zone.geometry) for zone in second.zones
    ]


@more
@given(
    seed=st.integers(0, 10**6), scale=st.floats(0.01, 100.0), shift=st.floats(-10, 10),
    turn=st.floats(0, 6.28),
)  # fmt: skip
def test_structure_does_not_depend_on_unit_origin_or_compass(seed, scale, shift, turn):
    random = np.random.default_rng(seed)
    where, values = random.uniform(0, 300, (25, 2)), random.normal(size=25)
    turned = where @ np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
    p = structure_p(where, values, seed=1)
    assert structure_p(turned + 5000.0, values * scale + shift, seed=1) == p
    assert 1 / 500 <= p <= 1.0


@more
@given(seed=st.integers(0, 10**6), classes=st.integers(2, 6), fuzziness=st.floats(1.1, 3.0))
def test_the_two_sign_forms_of_the_fuzziness_index_add_to_one(seed, classes, fuzziness):
    """The index to be low and Dave's modified partition coefficient are one figure, turned."""
    random = np.random.default_rng(seed)
    table, centres = random.normal(size=(40, 3)), random.normal(size=(classes, 3))
    shares = memberships(table, centres, fuzziness=fuzziness)
    assert np.allclose(shares.sum(axis=1), 1.0)
    index, turned = fuzziness_performance(shares), modified_partition_coefficient(shares)
    assert abs(index + turned - 1.0) < 1e-12
    assert -1e-12 <= index <= 1.0 + 1e-12
    assert 1.0 / classes - 1e-12 <= partition_coefficient(shares) <= 1.0
    assert -1e-12 <= modified_entropy(shares) <= 1.0 + 1e-12


def test_crisp_memberships_are_zero_and_even_ones_are_one():
    crisp = np.eye(3)[np.arange(30) % 3]
    even = np.full((30, 3), 1 / 3)
    assert fuzziness_performance(crisp) == 0.0
    assert abs(fuzziness_performance(even) - 1.0) < 1e-12
    assert abs(modified_entropy(even) - 1.0) < 1e-12


@more
@given(
    mean=st.floats(-2.0, 4.0),
    sd=st.floats(0.05, 2.0),
    rate=st.floats(0.0, 3.4),
    cost=st.floats(0.2, 5.0),
)
def test_closed_form_loss_equals_the_integral(mean, sd, rate, cost):
    need = norm(mean, sd)
    low, high = mean - 12 * sd, mean + 12 * sd
    short = quad(lambda d: (d - rate) * need.pdf(d), min(max(rate, low), high), high)[0]
    excess = quad(lambda d: (rate - d) * need.pdf(d), low, min(max(rate, low), high))[0]
    one, two = np.array([mean]), np.array([sd])
    assert abs(expected_short(rate, one, two)[0] - short) < 1e-6
    assert abs(expected_loss(rate, one, two, cost_ratio=cost)[0] - (cost * short + excess)) < 1e-5


@more
@given(seed=st.integers(0, 10**6), cost=st.floats(0.2, 5.0))
def test_no_other_rate_loses_less_than_the_best_one(seed, cost):
    random = np.random.default_rng(seed)
    mean, sd = random.uniform(-1, 3, 30), random.uniform(0.05, 1, 30)
    best = best_rate(mean, sd, cost_ratio=cost, most=3.0)
    least = expected_loss(best, mean, sd, cost_ratio=cost).sum()
    for rate in np.linspace(0.0, 3.0, 61):
        assert least <= expected_loss(rate, mean, sd, cost_ratio=cost).sum() + 1e-9


@more
@given(seed=st.integers(0, 10**6))
def test_finer_plans_never_lose_more_by_their_own_reckoning(seed):
    random = np.random.default_rng(seed)
    mean, sd = random.uniform(-1, 3, 60), random.uniform(0.05, 1, 60)
    fine = random.integers(0, 6, 60)
    coarse = fine // 2
    flat = np.zeros(60, dtype=np.intp)
    losses = [plan_loss(labels, mean, sd, most=3.0)[1] for labels in (fine, coarse, flat)]
    assert losses[0] <= losses[1] + 1e-9
    assert losses[1] <= losses[2] + 1e-9


@more
@given(seed=st.integers(0, 10**6), rows=st.integers(2, 5), cols=st.integers(2, 5))
def test_matching_a_map_with_itself_finds_every_zone_and_no_change(seed, rows, cols):
    random = np.random.default_rng(seed)
    along, up = np.sort(random.uniform(0, 500, cols - 1)), np.sort(random.uniform(0, 500, rows - 1))
    east, north = np.r_[0, along, 500], np.r_[0, up, 500]
    zones = [
        shapely.box(east[i], north[j], east[i + 1], north[j + 1])
        for i in range(cols)
        for j in range(rows)
        if east[i + 1] - east[i] > 0.1 and north[j + 1] - north[j] > 0.1
    ]
    order = random.permutation(len(zones))
    match = match_zones(zones, [zones[i] for i in order])
    assert {(a, int(order[b])) for a, b in match.pairs} == {(i, i) for i in range(len(zones))}
    table = transition_ha(zones, zones)
    assert np.allclose(table, np.diag([zone.area / 10_000 for zone in zones]))


@more
@given(seed=st.integers(0, 10**6))
def test_adjusted_rand_ignores_names_and_order_of_the_maps(seed):
    random = np.random.default_rng(seed)
    table = random.integers(1, 20, (4, 3)).astype(float)
    shuffled = table[random.permutation(4)][:, random.permutation(3)]
    assert abs(adjusted_rand(table) - adjusted_rand(shuffled)) < 1e-12
    assert abs(adjusted_rand(table) - adjusted_rand(table.T)) < 1e-12


@few
@given(seed=st.integers(0, 10**6))
def test_fuzzy_c_means_lowers_its_objective_and_stays_in_the_data(seed):
    random = np.random.default_rng(seed)
    table = random.normal(size=(60, 2))
    start = table[random.choice(60, 3, replace=False)]

    def objective(centres):
        shares = memberships(table, centres)
        squares = ((table[:, None] - centres[None]) ** 2).sum(axis=2)
        return float((shares**1.5 * squares).sum())

    found = fuzzy_c_means(table, start)
    assert objective(found.centres) <= objective(start) + 1e-9
    assert (found.centres >= table.min(axis=0)).all()
    assert (found.centres <= table.max(axis=0)).all()

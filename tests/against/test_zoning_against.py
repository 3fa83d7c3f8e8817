"""Zones against reference libraries: scikit-learn, shapely and rasterio, and R on a real field."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
import shapely

from schorl.model.field import lay_grid
from schorl.zoning.clusters import assign, fit_centres, fuzzy_c_means
from schorl.zoning.features import structured_share
from schorl.zoning.indices import (
    calinski_harabasz,
    fuzziness_performance,
    partition_coefficient,
    partition_entropy,
    silhouette,
)
from schorl.zoning.matching import adjusted_rand, kappa, match_zones, transition_ha
from schorl.zoning.structure import moran, nearest_neighbours


def contingency(first, second):
    return np.array(
        [
            [np.sum((first == a) & (second == b)) for b in np.unique(second)]
            for a in np.unique(first)
        ],
        dtype=float,
    )


@pytest.mark.parametrize("seed", range(8))
def test_adjusted_rand_and_kappa_are_those_of_scikit_learn(seed):
    from sklearn.metrics import adjusted_rand_score, cohen_kappa_score

    random = np.random.default_rng(seed)
    first = random.integers(0, 4, 300)
    second = np.where(random.random(300) < 0.6, first, random.integers(0, 4, 300))
    table = contingency(first, second)
    assert adjusted_rand(table) == pytest.approx(adjusted_rand_score(first, second), abs=1e-12)
    assert kappa(table) == pytest.approx(cohen_kappa_score(first, second), abs=1e-12)


def test_transition_areas_are_those_of_counted_cells():
    grid = lay_grid(shapely.box(0, 0, 400, 300), cell_m=10.0)

    def strips(edges):
        return [shapely.box(a, 0, b, 300) for a, b in pairwise(edges)]

    earlier = strips([0, 130, 260, 400])
    later = strips([0, 90, 300, 400])
    table = transition_ha(earlier, later)
    east = grid.centres_m[:, 0]
    counted = contingency(np.digitize(east, [130, 260]), np.digitize(east, [90, 300]))
    assert np.allclose(table, counted * grid.cell_m**2 / 10_000.0)
    assert match_zones(earlier, later).pairs == ((0, 0), (1, 1), (2, 2))


def test_k_means_of_a_thinned_table_agrees_with_the_full_run():
    from sklearn.cluster import KMeans
    from sklearn.metrics import adjusted_rand_score

    random = np.random.default_rng(1)
    table = random.normal(size=(30_000, 3)) + 2.5 * random.integers(0, 4, 30_000)[:, None]
    ours = assign(table, fit_centres(table, 4, seed=0))
    theirs = KMeans(4, n_init=10, random_state=5).fit_predict(table)
    assert adjusted_rand_score(ours, theirs) > 0.97


def test_moran_is_the_textbook_sum_with_a_weight_matrix():
    random = np.random.default_rng(4)
    where, values = random.uniform(0, 100, (40, 2)), random.normal(size=40)
    neighbours = nearest_neighbours(where)
    weights = np.zeros((40, 40))
    weights[np.arange(40)[:, None], neighbours] = 1.0
    z = values - values.mean()
    textbook = 40 / weights.sum() * (z @ weights @ z) / (z @ z)
    assert moran(values, neighbours) == pytest.approx(textbook, abs=1e-12)


def test_structured_share_of_a_known_mixture():
    """Slope of variance 1 and white noise of variance v: neighbours share 1/(1 + v) of it."""
    random = np.random.default_rng(3)
    slope = np.add.outer(np.linspace(-1, 1, 200), np.zeros(200))
    slope /= slope.std()
    for noise in (0.25, 1.0, 4.0):
        mixed = slope + np.sqrt(noise) * random.normal(size=slope.shape)
        assert structured_share(mixed) == pytest.approx(1 / (1 + noise), abs=0.02)


# --- a real field, BB.250 of LimeSoDa (data CC BY-SA 4.0, loaded and not copied) ---------------
# Reference figures: R 4.2.2, kmeans with 500 starts; cmeans of e1071 1.7-13 at m = 1.3, c = 3.


@pytest.fixture(scope="module")
def bb250():
    """Clay, organic carbon and pH at 250 points, centred and scaled by the sample SD."""
    limesoda = pytest.importorskip("LimeSoDa")
    table = limesoda.load_dataset("BB.250")["Dataset"]
    columns = [
        next(name for name in table.columns if name.lower().startswith(start))
        for start in ("clay", "soc", "ph")
    ]
    values = table[columns].to_numpy(float)
    return (values - values.mean(axis=0)) / values.std(axis=0, ddof=1)


@pytest.mark.parametrize(
    ("classes", "within", "index", "width"),
    [
        (2, 311.461250067, 346.796302782, 0.613164435780),
        (3, 238.171203389, 263.845315838, 0.375469657026),
        (4, 182.800694085, 253.086255041, 0.304846255948),
        (5, 139.104093651, 267.667351023, 0.351063380332),
    ],
)
def test_k_means_of_a_real_field_is_that_of_r(bb250, classes, within, index, width):
    centres = fit_centres(bb250, classes, seed=0, starts=500)
    labels = assign(bb250, centres)
    assert ((bb250 - centres[labels]) ** 2).sum() == pytest.approx(within, rel=1e-6)
    assert calinski_harabasz(bb250, labels) == pytest.approx(index, rel=1e-6)
    assert silhouette(bb250, labels) == pytest.approx(width, rel=1e-5)


def test_fuzzy_c_means_of_a_real_field_is_that_of_r(bb250):
    start = fit_centres(bb250, 3, seed=0)
    found = fuzzy_c_means(bb250, start, fuzziness=1.3, tolerance=1e-10, most_passes=5000)
    assert partition_coefficient(found.memberships) == pytest.approx(0.882234683709, abs=1e-5)
    assert partition_entropy(found.memberships) == pytest.approx(0.196696651922, abs=1e-5)
    assert fuzziness_performance(found.memberships) == pytest.approx(0.176647891711, abs=2e-5)
    assert found.centres.min(axis=0)[0] == pytest.approx(-0.5243673696392, abs=1e-4)

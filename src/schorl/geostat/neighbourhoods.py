"""Kriging from part of the samples: nearest neighbours, and tiles for large sample sets."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from schorl.geostat.covariance import correlation_in_place
from schorl.geostat.support import Layout, layout_of
from schorl.geostat.system import SAME_PLACE_M, System, Targets, replace_turn, sample_to_target
from schorl.geostat.threads import Room, for_each
from schorl.model.arrays import Floats
from schorl.model.variogram import Support, Variogram

BATCH = 512
#: Samples in a tile's neighbourhood, and about how many of them lie within the tile's reach.
TILE_SAMPLES, SAMPLES_PER_TILE = 400, 24


def krige_nearest(
    layout: Layout,
    columns: Floats,
    targets: Targets,
    variogram: Variogram,
    *,
    filtered: bool,
    neighbours: int,
) -> tuple[Floats, Floats]:
    """Ordinary kriging from each target's nearest samples (by distance to the target's centre).

    One small bordered system a target, solved in batches.
    """
    centres = layout.averaged(layout.points_m)
    _, nearest = cKDTree(centres).query(targets.centres_m, k=neighbours)
    nearest = np.sort(np.asarray(nearest).reshape(len(targets.centres_m), -1), axis=1)
    turned = replace_turn(variogram)
    own = targets.own_variance(turned, filtered=filtered)
    whole = _full_covariance(layout, variogram)
    estimate = np.empty((len(nearest), columns.shape[1]))
    variance = np.empty(len(nearest))

    def work(start: int) -> None:
        part = slice(start, start + BATCH)
        chosen = nearest[part]
        shared = _picked_covariances(
            layout, targets.part(part), variogram, chosen, filtered=filtered
        )
        count, size = chosen.shape
        bordered = np.ones((count, size + 1, size + 1))
        bordered[:, :size, :size] = whole[chosen[:, :, None], chosen[:, None, :]]
        bordered[:, size, size] = 0.0
        right = np.ones((count, size + 1, 1))
        right[:, :size, 0] = shared
        solved = np.linalg.solve(bordered, right)[:, :, 0]
        estimate[part] = np.einsum("ck,ckd->cd", solved[:, :size], columns[chosen])
        explained = np.einsum("ck,ck->c", solved, right[:, :, 0])
        variance[part] = np.maximum(own - explained, 0.0)

    for_each(range(0, len(nearest), BATCH), work)
    return estimate, variance


def _full_covariance(layout: Layout, variogram: Variogram) -> Floats:
    from schorl.geostat.support import data_covariance

    return data_covariance(layout, replace_turn(variogram))


def _picked_covariances(
    layout: Layout, targets: Targets, variogram: Variogram, chosen: np.ndarray, *, filtered: bool
) -> Floats:
    """Covariances of each target with its own samples, ``(targets, k)``."""
    if not layout.all_points:
        shared = sample_to_target(layout, targets, variogram, filtered=filtered, room=Room())
        return np.take_along_axis(shared.T, chosen, axis=1)
    points = layout.points_m[chosen]
    total = np.zeros(chosen.shape)
    for offset in targets.offsets_m:
        gap = np.linalg.norm(points - (targets.centres_m + offset)[:, None, :], axis=2)
        at_sample = gap <= SAME_PLACE_M
        shared = correlation_in_place(gap, variogram.family, variogram.practical_range_m)
        shared *= variogram.partial_sill
        if not filtered:
            shared[at_sample] += variogram.nugget
        total += shared
    return total / len(targets.offsets_m)


def krige_tiled(
    layout: Layout, columns: Floats, targets: Targets, variogram: Variogram, *, filtered: bool
) -> tuple[Floats, Floats]:
    """Large sample sets: overlapping tiles that share a neighbourhood, blended.

    Tile centres stand on a square lattice; each target mixes the solutions of its four tiles with
    bilinear weights, so the surface has no step where the neighbourhood changes.
    """
    spread = np.ptp(layout.points_m, axis=0)
    side = float(np.sqrt(max(spread.prod(), 1.0) * SAMPLES_PER_TILE / len(layout.points_m)))
    origin = targets.centres_m.min(axis=0) - 0.5 * side
    place = (targets.centres_m - origin) / side
    corner = np.floor(place).astype(np.intp)
    share = place - corner
    tree = cKDTree(layout.points_m)
    own = targets.own_variance(replace_turn(variogram), filtered=filtered)
    estimate = np.zeros((len(place), columns.shape[1]))
    variance = np.zeros(len(place))
    for east in (0, 1):
        for north in (0, 1):
            weight = np.abs(1 - east - share[:, 0]) * np.abs(1 - north - share[:, 1])
            lattice = corner + np.array([east, north])
            _add_layer(
                layout, columns, targets, variogram, tree,
                lattice=lattice, node_m=origin + lattice * side, weight=weight,
                own=own, filtered=filtered, into=(estimate, variance),
            )  # fmt: skip
    return estimate, variance


def _add_layer(
    layout: Layout,
    columns: Floats,
    targets: Targets,
    variogram: Variogram,
    tree: cKDTree,
    *,
    lattice: np.ndarray,
    node_m: Floats,
    weight: Floats,
    own: float,
    filtered: bool,
    into: tuple[Floats, Floats],
) -> None:
    """Add one corner's solutions: every target belongs to exactly one tile of this layer."""
    key = lattice[:, 0] * (int(lattice[:, 1].max()) + 2) + lattice[:, 1]
    order = np.argsort(key, kind="stable")
    starts = np.flatnonzero(np.r_[True, np.diff(key[order]) > 0])
    groups = np.split(order, starts[1:])
    estimate, variance = into
    room = Room()

    def work(group: np.ndarray) -> None:
        _, nearest = tree.query(node_m[group[0]], k=min(TILE_SAMPLES, len(columns)))
        nearest = np.sort(nearest)
        some = _some_points(layout, nearest)
        system = System.of(some, columns[nearest], variogram)
        for start in range(0, len(group), BATCH):
            part = group[start : start + BATCH]
            shared = sample_to_target(
                some, targets.part(part), variogram, filtered=filtered, room=room
            )
            mean, spread = system.predict(shared, own, room)
            estimate[part] += weight[part, None] * mean
            variance[part] += weight[part] * spread

    for_each(groups, work)


def _some_points(layout: Layout, chosen: np.ndarray) -> Layout:
    supports = [
        Support(points_m=layout.points_m[[one]], cores=int(layout.cores[one]), kind="point")
        for one in chosen
    ]
    some = layout_of(layout.points_m[chosen], supports)
    return Layout(
        points_m=layout.points_m[chosen],
        about_m=layout.about_m,
        starts=some.starts,
        counts=some.counts,
        is_zone=some.is_zone,
        cores=some.cores,
    )

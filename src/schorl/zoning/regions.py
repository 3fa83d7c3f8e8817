"""Connected regions of a label raster, and merging those too small to be worth a rate.

The usual raster sieve leaves a small region alone where all its neighbours are small too; here
the smallest goes first and neighbours grow as they take it, so none is left that has a neighbour.
"""

from __future__ import annotations

import heapq
from collections import defaultdict
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from schorl.model.arrays import Counts, Floats

#: Labels of a raster, any width of integer; -1 is none.
Labels = NDArray[np.signedinteger[Any]]
#: Memberships on a raster, ``(k, rows, cols)``.
Layers = NDArray[np.floating[Any]]


def label_regions(labels: Labels) -> tuple[Counts, Counts]:
    """Connected regions (sharing cell edges) of equal label, -1 left out.

    Returns
    -------
    regions, label_of
        ``(rows, cols)`` region numbers from 0, -1 off; and the label of each region.
    """
    regions = np.full(labels.shape, -1, dtype=np.intp)
    label_of: list[int] = []
    for label in np.unique(labels[labels >= 0]):
        found, count = ndimage.label(labels == label)
        here = found > 0
        regions[here] = found[here] + (len(label_of) - 1)
        label_of.extend([int(label)] * count)
    return regions, np.array(label_of, dtype=np.intp)


def borders(regions: Counts) -> dict[int, dict[int, int]]:
    """Cell edges that each region shares with each neighbour."""
    pairs = []
    for first, second in (
        (regions[:, :-1], regions[:, 1:]),
        (regions[:-1, :], regions[1:, :]),
    ):
        apart = (first != second) & (first >= 0) & (second >= 0)
        pairs.append(np.column_stack([first[apart], second[apart]]))
    beside: dict[int, dict[int, int]] = defaultdict(dict)
    table = np.sort(np.concatenate(pairs), axis=1)
    if len(table):
        kinds, counts = np.unique(table, axis=0, return_counts=True)
        for (one, other), count in zip(kinds.tolist(), counts.tolist(), strict=True):
            beside[one][other] = count
            beside[other][one] = count
    return beside


def merge_small(labels: Labels, layers: Layers, least_cells: int) -> Labels:
    """Merge regions of fewer than ``least_cells`` cells into a neighbour, the smallest first.

    A region takes, of its neighbours' labels, the one its own cells belong to most (summed
    memberships ``layers``, ``(k, rows, cols)``), then the longest border. A region without
    neighbours, such as a small part of the field on its own, stays.
    """
    regions, label_of = label_regions(labels)
    if not len(label_of):
        return labels
    size = np.bincount(regions[regions >= 0], minlength=len(label_of))
    if size.min() >= least_cells:
        return labels
    here = regions >= 0
    wish = np.array(
        [np.bincount(regions[here], layer[here], minlength=len(label_of)) for layer in layers]
    )
    merged = _Regions(label_of, size, wish, borders(regions))
    merged.run(least_cells)
    fresh = labels.copy()
    fresh[here] = merged.labels()[regions[here]].astype(labels.dtype)
    return fresh


class _Regions:
    """Region graph while it is being merged; ``parent`` leads to the region that took it."""

    def __init__(
        self, label: Counts, size: Counts, wish: Floats, beside: dict[int, dict[int, int]]
    ) -> None:
        self.label = label.copy()
        self.size = size.copy()
        self.wish = wish
        self.beside = beside
        self.parent = np.arange(len(label))

    def run(self, least_cells: int) -> None:
        small = [(int(self.size[r]), int(r)) for r in np.flatnonzero(self.size < least_cells)]
        heapq.heapify(small)
        while small:
            size, region = heapq.heappop(small)
            if self.parent[region] != region or self.size[region] != size:
                continue
            if not self.beside[region]:
                continue
            self._take(region, self._best_label(region))
            if self.size[region] < least_cells:
                heapq.heappush(small, (int(self.size[region]), region))

    def _best_label(self, region: int) -> int:
        edges: dict[int, int] = defaultdict(int)
        for neighbour, count in self.beside[region].items():
            edges[int(self.label[neighbour])] += count
        return max(edges, key=lambda label: (self.wish[label, region], edges[label], -label))

    def _take(self, region: int, label: int) -> None:
        """Give a region a label and join to it every neighbour that has the same."""
        self.label[region] = label
        for neighbour in [n for n in self.beside[region] if self.label[n] == label]:
            self.parent[neighbour] = region
            self.size[region] += self.size[neighbour]
            self.wish[:, region] += self.wish[:, neighbour]
            for other, count in self.beside.pop(neighbour).items():
                self.beside[other].pop(neighbour)
                if other != region:
                    total = self.beside[region].get(other, 0) + count
                    self.beside[region][other] = self.beside[other][region] = total

    def labels(self) -> Counts:
        """Final label of each first region."""
        root = self.parent.copy()
        while (root != self.parent[root]).any():
            root = self.parent[root]
        return np.asarray(self.label[root])

"""Indices of clusterings: shown as information, never used to choose.

All of them propose at least two zones, on pure noise too. Their sign conventions differ between
texts: the fuzziness performance index used here is 0 for crisp and 1 for fully fuzzy memberships;
the form 1 - c/(c-1) (1-F) that is also printed under that name is Dave's modified partition
coefficient, the same number taken from 1.
"""

from __future__ import annotations

import numpy as np

from schorl.model.arrays import Counts, Floats
from schorl.zoning.clusters import fuzzy_c_means, thinned

INDEX_CELLS = 600
SILHOUETTE_CELLS = 500


def partition_coefficient(shares: Floats) -> float:
    """F = mean over rows of the sum of squared memberships; 1 crisp, 1/c fully fuzzy."""
    return float((shares**2).sum() / len(shares))


def partition_entropy(shares: Floats) -> float:
    """H = -mean over rows of the sum of u ln u; 0 crisp, ln c fully fuzzy."""
    positive = np.where(shares > 0, shares, 1.0)
    return float(-(shares * np.log(positive)).sum() / len(shares))


def fuzziness_performance(shares: Floats) -> float:
    """FPI = 1 - (cF - 1)/(c - 1), to be low; 0 crisp, 1 fully fuzzy."""
    classes = shares.shape[1]
    return float(1.0 - (classes * partition_coefficient(shares) - 1.0) / (classes - 1.0))


def modified_partition_coefficient(shares: Floats) -> float:
    """Dave's 1 - c/(c-1) (1 - F), to be high; always 1 - FPI."""
    classes = shares.shape[1]
    return float(1.0 - classes / (classes - 1.0) * (1.0 - partition_coefficient(shares)))


def normalised_entropy(shares: Floats) -> float:
    """NCE = H / (1 - c/n): hardly normalised for c where there are many rows; to be low."""
    rows, classes = shares.shape
    return float(partition_entropy(shares) / (1.0 - classes / rows))


def modified_entropy(shares: Floats) -> float:
    """MPE = H / ln c, normalised for the number of classes; to be low."""
    return float(partition_entropy(shares) / float(np.log(shares.shape[1])))


def silhouette(table: Floats, labels: Counts) -> float:
    """Mean silhouette width, to be high (scikit-learn's)."""
    from sklearn.metrics import silhouette_score

    return float(silhouette_score(table, labels))


def calinski_harabasz(table: Floats, labels: Counts) -> float:
    """[B/(k-1)] / [W/(n-k)], to be high (scikit-learn's)."""
    from sklearn.metrics import calinski_harabasz_score

    return float(calinski_harabasz_score(table, labels))


def index_table(table: Floats, centres: Floats, *, seed: int) -> dict[str, float]:
    """All indices of one clustering, from at most 600 rows (silhouette 500)."""
    rows = thinned(table, INDEX_CELLS, seed=seed)
    fuzzy = fuzzy_c_means(rows, centres, tolerance=1e-3, most_passes=60)
    hard = fuzzy.memberships.argmax(axis=1).astype(np.intp)
    # Every row a class of its own says nothing, nor does one class.
    if not 2 <= len(np.unique(hard)) < len(rows):
        return {}
    some = slice(None, None, max(1, len(rows) // SILHOUETTE_CELLS))
    figures = {
        "fuzziness performance (low is crisp)": fuzziness_performance(fuzzy.memberships),
        "modified partition coefficient (high is crisp)": modified_partition_coefficient(
            fuzzy.memberships
        ),
        "normalised classification entropy (low is crisp)": normalised_entropy(fuzzy.memberships),
        "modified partition entropy (low is crisp)": modified_entropy(fuzzy.memberships),
        "Calinski-Harabasz (high is apart)": calinski_harabasz(rows, hard),
    }
    if len(np.unique(hard[some])) > 1:
        figures["silhouette (high is apart)"] = silhouette(rows[some], hard[some])
    return figures

"""Sample zones as management zones, and zone layers that are used as they were drawn."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import shapely

from schorl.model.arrays import Counts, Floats
from schorl.model.field import Area
from schorl.zoning.cover import UNKNOWN

#: Composites must cover this share of the field to be its management zones.
COVERED = 0.90
#: Spread of single cores inside a sample zone, as a share of the value (a proposal, no source).
CORE_CV = 0.30
#: At or below this chance the needs of sample zones count as different.
DIFFER_P = 0.10


def covered_share(areas: Sequence[Area], boundary: Area) -> float:
    """Share of a field's area that lies in at least one of some areas."""
    if not areas:
        return 0.0
    whole = shapely.union_all([shapely.make_valid(area) for area in areas])
    return float(shapely.intersection(whole, boundary).area / boundary.area)


def label_in(areas: Sequence[Area], points: Floats) -> Counts:
    """Position of the first area that holds each of ``(m, 2)`` points; -1 in none."""
    labels = np.full(len(points), UNKNOWN, dtype=np.intp)
    for place in range(len(areas) - 1, -1, -1):
        shapely.prepare(areas[place])
        labels[shapely.contains_xy(areas[place], points)] = place
    return labels


def differences_p(values: Floats, error_sd: Floats) -> float:
    """Chance of zone values at least as different from known error alone.

    Chi-square test of homogeneity (Cochran 1954, Biometrics 10:101-129): Q, the sum of squared
    deviations from the weighted mean over their error variances, against n - 1 degrees of freedom.

    Parameters
    ----------
    values, error_sd
        One value a zone and its standard error, shape ``(n,)``; missing values are left out.

    Returns
    -------
    float
        1 where fewer than two values are known.
    """
    from scipy.stats import chi2

    known = np.isfinite(values) & np.isfinite(error_sd)
    if known.sum() < 2:
        return 1.0
    value, sd = values[known], np.maximum(error_sd[known], 1e-12)
    weight = 1.0 / sd**2
    mean = float((weight * value).sum() / weight.sum())
    return float(chi2.sf((weight * (value - mean) ** 2).sum(), len(value) - 1))


def composite_error_mg_kg(boron_mg_kg: Floats, cores: Counts, *, lab_relative_sd: float) -> Floats:
    """Standard error of each composite's boron: laboratory and the cores in it, shape ``(n,)``.

    Both are shares of the field's own level, not of each value: weighting a value by its own
    error would give low values more weight than they deserve.
    """
    level = float(np.sqrt(np.nanmean(boron_mg_kg**2)))
    relative = np.sqrt(lab_relative_sd**2 + CORE_CV**2 / np.maximum(cores, 1))
    return np.asarray(level * relative)

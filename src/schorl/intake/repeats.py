"""Several samples at one place, averaged where that was asked for."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from schorl.intake.draft import Draft
from schorl.model.reading import SampleHints
from schorl.model.samples import Measured, SampleSet


def averaged(samples: SampleSet, hints: SampleHints, draft: Draft) -> SampleSet:
    """Average samples at one place where that was asked for."""
    if not hints.average_duplicates or any(kind != "point" for kind in samples.kind):
        return samples
    keys = [tuple(one) for one in np.round(samples.east_north_m * 2) / 2]
    order: dict[tuple[float, ...], list[int]] = {}
    for place, key in enumerate(keys):
        order.setdefault(key, []).append(place)
    if len(order) == len(keys):
        return samples
    groups = list(order.values())
    draft.note("IN-AVERAGED", f"{len(keys) - len(groups)} duplicates were averaged")
    return _grouped(samples, groups)


def _grouped(samples: SampleSet, groups: list[list[int]]) -> SampleSet:
    first = [group[0] for group in groups]

    def mean(values: np.ndarray) -> np.ndarray:
        with np.errstate(invalid="ignore"):
            return np.array(
                [np.nanmean(values[g]) if np.isfinite(values[g]).any() else np.nan for g in groups]
            )

    properties: Mapping[str, Measured] = {
        name: Measured(
            values=mean(one.values),
            below_limit=np.array([bool(one.below_limit[g].all()) for g in groups]),
            column=one.column,
            unit_read=one.unit_read,
        )
        for name, one in samples.properties.items()
    }
    return replace(
        samples,
        ids=tuple("+".join(samples.ids[i] for i in group) for group in groups),
        east_north_m=samples.east_north_m[first],
        properties=properties,
        kind=tuple(samples.kind[i] for i in first),
        cores=np.array([samples.cores[g].sum() for g in groups]),
        areas=tuple(samples.areas[i] for i in first),
        core_points_m=tuple(samples.core_points_m[i] for i in first),
    )

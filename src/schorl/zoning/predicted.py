"""Whether the maps can predict the need where a sample was left out.

The permutation test asks whether needs are patterned, the expected saving asks whether zones would
pay if the maps are right. On noise both err together, one field in fifteen or so: chance order
makes a map, and the map promises a saving. Leaving each sample out once asks the maps themselves.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from schorl.model.arrays import Floats

#: Skill that the maps must show for the need, at 60 samples (a proposal, see `least_skill`).
LEAST_SKILL = 0.10
AT_SAMPLES = 60.0


@dataclass(frozen=True, eq=False, kw_only=True)
class LeftOut:
    """One property at the samples, ``(n,)``: as observed, and predicted from the others."""

    observed: Floats
    predicted: Floats


def left_out_means(values: Floats) -> Floats:
    """Mean of the other values for each value: the prediction where there is no pattern."""
    return np.asarray((values.sum() - values) / (len(values) - 1))


def need_skill(need: Floats, properties: Sequence[LeftOut]) -> float | None:
    """Share of the need's variance that leave-one-out predictions of its properties explain.

    The need is taken as linear in the properties (ordinary least squares at the samples); each
    sample's prediction errors then carry over to its need.

    Parameters
    ----------
    need
        Need at the samples, kg B/ha, shape ``(n,)``.
    properties
        Everything the need is made from that varies over the field.

    Returns
    -------
    float or None
        1 - squared error of the predictions over that of the left-out mean; None where there are
        no properties, or hardly more complete samples than slopes.
    """
    if not properties:
        return None
    observed = np.column_stack([one.observed for one in properties])
    predicted = np.column_stack([one.predicted for one in properties])
    known = np.isfinite(need) & np.isfinite(observed).all(1) & np.isfinite(predicted).all(1)
    need, observed, predicted = need[known], observed[known], predicted[known]
    if len(need) < observed.shape[1] + 3:
        return None
    design = np.column_stack([np.ones(len(need)), observed])
    slopes = np.linalg.lstsq(design, need, rcond=None)[0][1:]
    error = (observed - predicted) @ slopes
    spread = need - left_out_means(need)
    square = float(spread @ spread)
    return 1.0 - float(error @ error) / square if square > 0 else 0.0


def least_skill(samples: int) -> float:
    """Skill that the need must reach: 0.10 at 60 samples, more with fewer.

    By chance alone the skill spreads with the inverse root of the number of samples.
    """
    return LEAST_SKILL * float(np.sqrt(AT_SAMPLES / max(samples, 1)))

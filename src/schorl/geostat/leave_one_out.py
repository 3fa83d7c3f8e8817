"""Leave-one-out residuals from one inverse (Dubrule 1983, Math. Geology 15:687-699).

With the bordered matrix [[K, 1], [1', 0]] inverted once, the residual of sample i predicted from
all others is e_i = [P z]_i / P_ii and its kriging variance 1 / P_ii, P being the upper left block.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.linalg import cho_factor, cho_solve

from schorl.geostat.support import data_covariance, layout_of
from schorl.geostat.threads import one_blas_thread
from schorl.model.arrays import Floats
from schorl.model.variogram import Support, Variogram


def leave_one_out(
    east_north_m: Floats,
    values: Floats,
    variogram: Variogram,
    *,
    support: Sequence[Support] | None = None,
) -> tuple[Floats, Floats]:
    """Residuals (observed less predicted) and kriging variances, ``(n,)`` each.

    Parameters
    ----------
    east_north_m, values
        Samples, ``(n, 2)`` in metres and ``(n,)``.
    variogram
        Fitted variogram; the variance is that of the datum left out, its noise included.
    support
        One ``Support`` a sample; None means points.

    Raises
    ------
    ValueError
        The system is singular, or shapes do not fit.
    """
    values = np.asarray(values, dtype=np.float64)
    layout = layout_of(east_north_m, support)
    covariance = data_covariance(layout, variogram)
    with one_blas_thread():
        try:
            factor = cho_factor(covariance, lower=True)
        except np.linalg.LinAlgError:
            raise ValueError(
                "the kriging system is singular: two samples lie in one place and the variogram "
                "has no nugget; average or drop one of them"
            ) from None
        inverse = cho_solve(factor, np.eye(len(values)))
    row = inverse.sum(axis=1)
    bordered = inverse - np.outer(row, row) / row.sum()
    precision = np.diag(bordered)
    return (bordered @ values) / precision, 1.0 / precision

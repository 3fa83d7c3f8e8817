"""Arrays inside frozen values: copied once, then locked."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]
Counts = NDArray[np.intp]


def locked(values: ArrayLike, dtype: Any = np.float64) -> Any:
    """An own, contiguous, read-only copy of an array; already locked arrays are shared."""
    array = np.asarray(values)
    if array.dtype == dtype and not array.flags.writeable and array.flags.c_contiguous:
        return array
    own = np.array(values, dtype=dtype, order="C")
    own.setflags(write=False)
    return own


def lock(value: object, **arrays: ArrayLike) -> None:
    """Store locked copies in the fields of a frozen dataclass, for use in ``__post_init__``."""
    for name, array in arrays.items():
        kind = {"b": np.bool_, "i": np.intp, "u": np.intp}.get(np.asarray(array).dtype.kind)
        object.__setattr__(value, name, locked(array, kind or np.float64))

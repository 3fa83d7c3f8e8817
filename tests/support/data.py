"""Open data that packages carry, and the reference files beside the tests."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

REFERENCE = Path(__file__).resolve().parents[1] / "reference"


def meuse(column: str) -> tuple[np.ndarray, np.ndarray]:
    """The Meuse set as scikit-gstat carries it: places and one variable."""
    import skgstat

    folder = Path(skgstat.__file__).parent / "data"
    file = next(folder.rglob("meuse.txt"))
    table = pd.read_csv(file, sep=None, engine="python")
    return table[["x", "y"]].to_numpy(float), table[column].to_numpy(float)


def lime_soda(name: str) -> tuple[np.ndarray, pd.DataFrame]:
    """A field of LimeSoDa (data CC BY-SA 4.0, loaded from its package): places and table."""
    import LimeSoDa

    loaded = LimeSoDa.load_dataset(name)
    return np.asarray(loaded["Coordinates"], dtype=float), loaded["Dataset"]

"""A boundary to hold files to, as one area in longitude and latitude."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import geopandas
import shapely

from schorl.errors import Refusal
from schorl.findings import finding
from schorl.geodesy import WGS84


def read_outline(path: Path) -> Any:
    """Union of the polygons of a boundary file in degrees.

    Raises
    ------
    Refusal
        The file cannot be read or has no coordinate system (exit 3).
    """
    try:
        frame = geopandas.read_file(path)
    except Exception as reason:  # the reader's many kinds of failure
        raise Refusal(
            [finding("IN-BROKEN", where=path.name, what=f"cannot be read: {reason}")]
        ) from None
    if frame.crs is None:
        raise Refusal([finding("IN-CRS", where=path.name, what="no coordinate system is declared")])
    return shapely.union_all(frame.to_crs(WGS84).geometry.values)

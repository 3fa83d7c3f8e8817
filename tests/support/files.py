"""Small field files, good ones to spoil."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
from pyproj import Transformer

ORIGIN = (412_000.0, 5_768_000.0)
TO_DEGREES = Transformer.from_crs("EPSG:32633", "EPSG:4326", always_xy=True)
SQUARE = [(0, 0), (400, 0), (400, 300), (0, 300), (0, 0)]


def degrees(ring):
    """Metres from the corner as longitude and latitude."""
    return [
        [round(v, 8) for v in TO_DEGREES.transform(ORIGIN[0] + x, ORIGIN[1] + y)] for x, y in ring
    ]


def boundary_text(rings=None, **more):
    """A GeoJSON boundary; rings in metres from the corner."""
    rings = [SQUARE] if rings is None else rings
    geometry = {"type": "Polygon", "coordinates": [degrees(ring) for ring in rings]}
    feature = {"type": "Feature", "properties": {"field": "Square"}, "geometry": geometry}
    return json.dumps({"type": "FeatureCollection", "features": [feature], **more})


def sample_rows(count=24, *, seed=1):
    """Plausible samples: name, longitude, latitude, boron, organic matter, clay."""
    random = np.random.default_rng(seed)
    rows = []
    for i in range(count):
        x, y = 40 + 64 * (i % 6), 40 + 55 * (i // 6)
        x, y = x + random.uniform(-8, 8), y + random.uniform(-8, 8)
        ((lon, lat),) = degrees([(x, y)])
        boron = 0.45 + 0.0008 * x + random.normal(0, 0.04)
        rows.append(
            [f"S{i + 1}", f"{lon:.7f}", f"{lat:.7f}", f"{boron:.2f}",
             f"{2.2 + 0.001 * x:.1f}", f"{14 + 0.02 * x:.0f}"]
        )  # fmt: skip
    return rows


HEADER = ["sample", "longitude", "latitude", "B (mg/kg)", "OM (%)", "clay (%)"]


def table_text(rows=None, header=None, *, mark=","):
    """Rows as delimited text."""
    rows = sample_rows() if rows is None else rows
    return "\n".join(mark.join(row) for row in [header or HEADER, *rows]) + "\n"


def write(path: Path, content: str | bytes, *, encoding="utf-8") -> Path:
    """Write text or bytes."""
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(content.encode(encoding) if isinstance(content, str) else content)
    return path

"""Writing all formats of the 50 ha sample field, and verifying large files.

    python scripts/bench.py formats              writing, and 100,000 polygons of each kind verified
    python scripts/bench.py formats 10000        fewer polygons

Aims: all formats in under 1 s once the rates are known, 100,000 polygons verified in under 30 s.
Polygons are squares of a lattice with rates of their own, each a zone.
"""

from __future__ import annotations

import json
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import shapely

ROOT = Path(__file__).resolve().parents[2]
FIELD = ROOT / "sample_fields" / "long_acre" / "2026"
WEST, SOUTH, SIDE = 13.0, 52.0, 0.0001


def main(arguments: list[str]) -> int:
    """Print seconds."""
    count = int(arguments[0]) if arguments else 100_000
    with tempfile.TemporaryDirectory() as folder:
        writing(Path(folder))
        for kind, make in (("GeoJSON", geojson), ("shapefile", shapefile)):
            path = make(Path(folder), count)
            seconds, seen = timed(path)
            faults = [fault.what for fault in seen.faults[:2]]
            print(f"verify {count:,} polygons, {kind:<10} {seconds:6.2f} s, whole: {seen.whole} "
                  f"{faults or ''}", flush=True)  # fmt: skip
    return 0


def writing(folder: Path) -> None:
    """All formats of the sample field, without report, job sheet and picture."""
    from schorl.formats.pack import write_pack
    from schorl.jobs import check_job, load_job
    from schorl.run.inputs import read_inputs
    from schorl.run.prescribing import survey

    record = survey(read_inputs(check_job(load_job(FIELD), where="job"), FIELD))
    for place in range(3):
        started = time.perf_counter()
        write_pack(record, folder / f"pack{place}", extras={}, replace=False)
        seconds = time.perf_counter() - started
    print(f"all formats of {record.field.area_ha:.0f} ha, written, read back and synced: "
          f"{seconds:.2f} s", flush=True)  # fmt: skip


def squares(count: int) -> np.ndarray:
    """Squares of a lattice in degrees."""
    across = int(np.ceil(np.sqrt(count)))
    row, col = np.divmod(np.arange(count), across)
    west, south = WEST + col * SIDE, SOUTH + row * SIDE
    return shapely.box(
        west.round(7), south.round(7), (west + SIDE).round(7), (south + SIDE).round(7)
    )


def geojson(folder: Path, count: int) -> Path:
    """One feature a square."""
    features = [
        {
            "type": "Feature",
            "properties": {"zone": place + 1, "product_rate": float(place % 40)},
            "geometry": shapely.geometry.mapping(square),
        }
        for place, square in enumerate(squares(count))
    ]
    path = folder / "many.geojson"
    path.write_text(json.dumps({"type": "FeatureCollection", "features": features}), "utf-8")
    return path


def shapefile(folder: Path, count: int) -> Path:
    """One row a square."""
    import geopandas

    frame = geopandas.GeoDataFrame(
        {"RATE": np.arange(count) % 40 * 1.0, "ZONE": np.arange(count) + 1},
        geometry=squares(count), crs="EPSG:4326",
    )  # fmt: skip
    path = folder / "many.shp"
    frame.to_file(path, engine="pyogrio", encoding="UTF-8")
    return path


def timed(path: Path):
    """Seconds and answer of one verification."""
    from schorl.formats.verify import verify

    started = time.perf_counter()
    seen = verify(path)
    return time.perf_counter() - started, seen


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

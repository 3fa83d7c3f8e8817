"""Metres, degrees and hectares: the only place that changes coordinate systems.

Order is always east, north (``always_xy``). Areas are ellipsoidal hectares on WGS 84.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

WGS84 = "EPSG:4326"


@lru_cache(maxsize=64)
def _transformer(source: str, target: str) -> Any:
    from pyproj import Transformer

    return Transformer.from_crs(source, target, always_xy=True)


def transform_points(
    points: NDArray[np.float64], *, source: str, target: str
) -> NDArray[np.float64]:
    """Bring ``(n, 2)`` east-north points from one coordinate system to another.

    Systems are authority codes ("EPSG:32633"), PROJ strings or WKT. Points that cannot be
    brought over come back as infinity, as PROJ gives them.
    """
    east, north = _transformer(source, target).transform(points[:, 0], points[:, 1])
    return np.column_stack([np.asarray(east, float), np.asarray(north, float)])


def transform_geometry(geometry: shapely.Geometry, *, source: str, target: str) -> Any:
    """Bring a geometry from one coordinate system to another, vertex by vertex, without height.

    Within one system nothing is computed: the vertices keep their bits.
    """
    flat = shapely.force_2d(geometry)
    if source == target:
        return flat
    return shapely.transform(
        flat, lambda points: transform_points(points, source=source, target=target)
    )


def area_ha(geometry: shapely.Geometry, *, crs: str) -> float:
    """Ellipsoidal area in hectares of a polygon or multipolygon given in any system.

    Method: geodesic polygon area (Karney 2013), as pyproj carries it; rings are oriented first,
    holes count negative.
    """
    from pyproj import Geod

    degrees = transform_geometry(geometry, source=crs, target=WGS84)
    oriented = shapely.orient_polygons(degrees) if hasattr(shapely, "orient_polygons") else degrees
    area_m2, _ = Geod(ellps="WGS84").geometry_area_perimeter(_orient(oriented))
    return abs(float(area_m2)) / 10_000.0


def _orient(geometry: Any) -> Any:
    from shapely.geometry import MultiPolygon
    from shapely.geometry.polygon import orient

    if geometry.geom_type == "Polygon":
        return orient(geometry)
    return MultiPolygon([orient(part) for part in geometry.geoms if part.geom_type == "Polygon"])


def field_crs(longitude_deg: float, latitude_deg: float, *, west: float, east: float) -> str:
    """The metric system a field is worked in.

    The UTM zone of the field's middle (EPSG:326xx, 327xx); where the field straddles a zone edge
    or lies outside 80° S to 84° N, a transverse Mercator of its own through its middle, rounded
    to a hundredth of a degree so that seasons share it.
    """
    zone_of = {int((lon + 180.0) // 6.0) + 1 for lon in (west, east)}
    if len(zone_of) == 1 and -80.0 <= latitude_deg <= 84.0:
        zone = min(zone_of.pop(), 60)
        return f"EPSG:{(32600 if latitude_deg >= 0 else 32700) + zone}"
    lon_0, lat_0 = round(longitude_deg, 2), round(latitude_deg, 2)
    return (
        f"+proj=tmerc +lat_0={lat_0:.2f} +lon_0={lon_0:.2f} +k=1 +x_0=500000 +y_0=1000000 "
        "+datum=WGS84 +units=m +no_defs +type=crs"
    )


def epsg_of(crs: str) -> int | None:
    """EPSG number of a system, or None for a local one."""
    return int(crs.split(":")[1]) if crs.upper().startswith("EPSG:") else None

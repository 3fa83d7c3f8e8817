"""The zones as every file carries them: WGS 84, rounded once together, single parts, checked."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from shapely.geometry import MultiPolygon, Polygon
from shapely.geometry.polygon import orient

from schorl.errors import OutputProblem
from schorl.findings import finding
from schorl.geodesy import WGS84, transform_geometry
from schorl.model.prescription import ZoneRate
from schorl.model.record import RunRecord
from schorl.model.zones import Zone

DECIMALS = 7  # about 1 cm
TASK_DECIMALS = 9


@dataclass(frozen=True, eq=False, kw_only=True)
class ZoneShape:
    """A zone in longitude and latitude with its rate."""

    zone: Zone
    rate: ZoneRate
    geometry: Polygon | MultiPolygon

    @property
    def parts(self) -> list[Polygon]:
        """Single polygons, outer rings counter-clockwise, holes clockwise."""
        return [orient(part) for part in shapely.get_parts(self.geometry)]


def zone_shapes(record: RunRecord, *, decimals: int = DECIMALS) -> tuple[ZoneShape, ...]:
    """Zones in degrees, rounded together so that shared edges stay shared.

    Raises
    ------
    OutputProblem
        Rounding made a zone invalid or broke the coverage (exit 5).
    """
    prescription = record.prescription
    zones = prescription.zone_map.zones
    moved = [in_degrees(zone.geometry, crs=record.field.crs, decimals=decimals) for zone in zones]
    if not all(shapely.is_valid(one) for one in moved) or not shapely.coverage_is_valid(moved):
        what = "the zones are no longer a clean coverage after rounding to degrees"
        raise OutputProblem([finding("OUT-ROUNDING", where="zones", what=what)])
    return tuple(
        ZoneShape(zone=zone, rate=rate, geometry=geometry)
        for zone, rate, geometry in zip(zones, prescription.rates, moved, strict=True)
    )


def in_degrees(geometry: Any, *, crs: str, decimals: int) -> Any:
    """A geometry in rounded longitude and latitude; points that fall together are merged."""
    degrees = transform_geometry(geometry, source=crs, target=WGS84)
    rounded = shapely.transform(degrees, lambda points: np.round(points, decimals))
    if shapely.is_valid(rounded) and not rounded.is_empty:
        return rounded
    mended = shapely.make_valid(rounded, method="structure")
    parts = [one for one in shapely.get_parts(mended) if one.geom_type == "Polygon"]
    return parts[0] if len(parts) == 1 else MultiPolygon(parts)


def boundary_degrees(record: RunRecord) -> Any:
    """The boundary in rounded degrees."""
    return in_degrees(record.field.boundary, crs=record.field.crs, decimals=DECIMALS)


def attributes(record: RunRecord, shape: ZoneShape) -> dict[str, object]:
    """What GeoJSON and GeoPackage say of a zone."""
    prescription = record.prescription
    share = prescription.boron_pct
    return {
        "zone": shape.zone.number,
        "product_rate": round(shape.rate.product_rate, 6),
        "product_unit": f"{prescription.unit}/ha",
        "boron_kg_ha": round(shape.rate.boron_kg_ha, 6),
        "boron_pct": share,
        "area_ha": round(shape.zone.area_ha, 6),
        "ruled_by": str(shape.rate.ruled_by),
    }

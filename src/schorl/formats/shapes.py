"""The zones as every file carries them: WGS 84, rounded once together, single parts, checked."""

from __future__ import annotations

from collections.abc import Callable
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
from schorl.model.profile import Profile
from schorl.model.record import RunRecord
from schorl.model.zones import Zone
from schorl.polygons import without_holes

DECIMALS = 7  # about 1 cm
TASK_DECIMALS = 9


@dataclass(frozen=True, eq=False, kw_only=True)
class ZoneShape:
    """A zone in longitude and latitude with its rate; ``holes`` false cuts its holes open."""

    zone: Zone
    rate: ZoneRate
    geometry: Polygon | MultiPolygon
    holes: bool = True

    @property
    def whole(self) -> MultiPolygon:
        """The zone as one geometry, its holes in place; rings turned as in ``parts``."""
        return MultiPolygon([orient(part) for part in shapely.get_parts(self.geometry)])

    @property
    def parts(self) -> list[Polygon]:
        """Single polygons, outer rings counter-clockwise, holes clockwise."""
        parts = list(shapely.get_parts(self.geometry))
        if not self.holes:
            parts = [piece for part in parts for piece in without_holes(part)]
        return [orient(part) for part in parts]


def profile_of(record: RunRecord) -> Profile:
    """What the controller takes; everything where no profile was chosen."""
    return record.settings.profile or Profile()


def rate_column(record: RunRecord, shape: ZoneShape) -> float:
    """A zone's product rate as the rate column has it: the profile's unit and decimals."""
    profile = record.settings.profile
    rate = shape.rate.product_rate
    return rate if profile is None else profile.rate(rate, record.prescription.unit)


def zone_shapes(record: RunRecord, *, decimals: int = DECIMALS) -> tuple[ZoneShape, ...]:
    """Zones in degrees, rounded together so that shared edges stay shared.

    Raises
    ------
    OutputProblem
        Rounding made a zone invalid or broke the coverage (exit 5).
    """
    prescription = record.prescription
    zones = prescription.zone_map.zones
    exact = [
        transform_geometry(zone.geometry, source=record.field.crs, target=WGS84) for zone in zones
    ]
    moved = _rounded_together(exact, decimals)
    if moved is None:
        what = "the zones are no longer a clean coverage after rounding to degrees"
        raise OutputProblem([finding("OUT-ROUNDING", where="zones", what=what)])
    holes = profile_of(record).holes
    return tuple(
        ZoneShape(zone=zone, rate=rate, geometry=geometry, holes=holes)
        for zone, rate, geometry in zip(zones, prescription.rates, moved, strict=True)
    )


def _rounded_together(exact: list[Any], decimals: int) -> list[Any] | None:
    """All zones on one grid of degrees, a valid coverage; None where no way leads there.

    Plain rounding keeps shared nodes shared and nearly always suffices. Where a node lies closer
    to a foreign edge than the grid is wide, the coverage is cleaned at that width first, or the
    finer grid of task data is taken.
    """
    width = 10.0**-decimals
    attempts: list[Callable[[], list[Any]]] = [lambda: exact]
    if hasattr(shapely, "coverage_clean"):
        attempts += [
            lambda: list(shapely.coverage_clean(exact, snapping_distance=width)),
            lambda: list(shapely.coverage_clean(exact, snapping_distance=10 * width)),
        ]
    for places in dict.fromkeys((decimals, TASK_DECIMALS)):
        for attempt in attempts:
            rounded = [rounded_area(one, places) for one in attempt()]
            sound = all(shapely.is_valid(one) and not one.is_empty for one in rounded)
            if sound and shapely.coverage_is_valid(rounded):
                return rounded
    return None


def in_degrees(geometry: Any, *, crs: str, decimals: int) -> Any:
    """A geometry in rounded longitude and latitude; points that fall together are merged."""
    return rounded_area(transform_geometry(geometry, source=crs, target=WGS84), decimals)


def rounded_area(degrees: Any, decimals: int) -> Any:
    """Rounded coordinates; what rounding made invalid is mended."""
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

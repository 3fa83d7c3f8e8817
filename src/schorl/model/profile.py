"""What a controller takes, in numbers and yes or no."""

from __future__ import annotations

import math
from dataclasses import dataclass

from schorl import units

FORMATS = ("geojson", "shapefile", "geopackage", "geotiff", "task data")
LAYOUTS = ("zones", "grid 1", "grid 2")
VERSIONS = ("4", "3.3")
#: Unit of the rate column -> what leaves the machine, metric over this unit.
RATE_UNITS = {
    "kg/ha": ("kg", 1.0),
    "lb/ac": ("kg", units.KG_HA_PER_LB_ACRE),
    "L/ha": ("L", 1.0),
    "gal/ac": ("L", units.L_HA_PER_US_GAL_ACRE),
}
FLOOR_EDGE = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Profile:
    """What one controller takes.

    ``most_vertices`` counts the points of one polygon, holes and closing points included, and
    ``most_polygons`` single polygons where ``single_parts`` holds, else zones. ``holes`` false
    means that polygons may not have any: they are cut open and count as single polygons.
    """

    title: str = ""
    formats: tuple[str, ...] = FORMATS
    task_data_version: str = "4"
    task_data_layout: str = "zones"
    most_polygons: int | None = None
    most_vertices: int | None = None
    most_vertices_in_all: int | None = None
    single_parts: bool = False
    holes: bool = True
    name_length: int | None = None
    rate_decimals: int = 2
    mass_unit: str = "kg/ha"
    volume_unit: str = "L/ha"

    def rate_unit(self, unit: str) -> str:
        """Unit of the rate column for a product counted in "kg" or "L"."""
        return self.mass_unit if unit == "kg" else self.volume_unit

    def rate(self, per_ha: float, unit: str) -> float:
        """A rate as the controller gets it: its unit, rounded down to its decimals.

        Down, so that no rounding adds boron; a figure within a millionth of a step counts as it.
        """
        scale = 10.0**self.rate_decimals
        value = per_ha / RATE_UNITS[self.rate_unit(unit)][1]
        return math.floor(value * scale + FLOOR_EDGE) / scale

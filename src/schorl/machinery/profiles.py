"""What a controller takes, in numbers and yes or no: a profile.

A profile is a small TOML text. Those that come with the program are named by what they do; a
person writes others for a machine at hand. Every key may be left out; what is left out is free.
"""

from __future__ import annotations

import difflib
import math
import tomllib
from dataclasses import asdict, dataclass, fields
from importlib.resources import files
from importlib.resources.abc import Traversable

from schorl import units
from schorl.errors import Refusal, UsageProblem
from schorl.findings import Finding, finding

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
CHOICES = {
    "task_data_layout": LAYOUTS,
    "task_data_version": VERSIONS,
    "mass_unit": ("kg/ha", "lb/ac"),
    "volume_unit": ("L/ha", "gal/ac"),
}
#: Whole numbers -> least and most that make sense.
COUNTS = {
    "most_polygons": (1, 1_000_000),
    "most_vertices": (4, 10_000_000),
    "most_vertices_in_all": (4, 100_000_000),
    "name_length": (1, 255),
    "rate_decimals": (0, 6),
}
FLOOR_EDGE = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Profile:
    """What one controller takes.

    ``most_vertices`` counts the points of one polygon, holes and closing points included, and
    ``most_polygons`` single polygons where ``single_parts`` holds, else zones. ``holes`` false
    means that polygons may not have any.
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

    def as_mapping(self) -> dict[str, object]:
        """Keys and values, for a record or manifest."""
        return asdict(self)


def read_profile(text: str, *, where: str) -> Profile:
    """A profile from TOML text.

    Raises
    ------
    Refusal
        Not TOML (exit 3).
    UsageProblem
        Unknown keys and impossible values, all at once (exit 2).
    """
    try:
        values = tomllib.loads(text.removeprefix("\ufeff"))
    except tomllib.TOMLDecodeError as reason:
        what = f"the profile is not TOML: {reason}"
        raise Refusal([finding("PROFILE-READ", where=where, what=what)]) from None
    found = [one for key, value in values.items() if (one := _fault(key, value, where))]
    if found:
        raise UsageProblem(found)
    if "formats" in values:
        values["formats"] = tuple(values["formats"])
    return Profile(**values)


def _fault(key: str, value: object, where: str) -> Finding | None:
    known = [one.name for one in fields(Profile)]
    if key not in known:
        near = difflib.get_close_matches(key, known, n=1)
        hint = f"did you mean `{near[0]}`?" if near else f"known keys: {', '.join(known)}"
        what = f"there is no key `{key}`"
        return finding("PROFILE-KEY", where=where, what=what, hint=hint)
    wanted = _wanted(key, value)
    if wanted is None:
        return None
    what = f"`{key}` is {value!r}"
    return finding("PROFILE-VALUE", where=where, what=what, hint=f"give {wanted}")


def _wanted(key: str, value: object) -> str | None:
    """What a key should hold, None where it does."""
    if key in COUNTS:
        low, high = COUNTS[key]
        whole = isinstance(value, int) and not isinstance(value, bool)
        fits = whole and low <= int(str(value)) <= high
        return None if fits else f"a whole number from {low} to {high}"
    if key in ("single_parts", "holes"):
        return None if isinstance(value, bool) else "true or false"
    if key == "formats":
        sound = isinstance(value, list) and value and all(one in FORMATS for one in value)
        return None if sound else f"one or more of {', '.join(FORMATS)}"
    if key in CHOICES:
        return None if value in CHOICES[key] else f"one of {', '.join(CHOICES[key])}"
    return None if isinstance(value, str) else "text"


def _folder() -> Traversable:
    return files("schorl") / "machinery" / "profiles"


def profile_names() -> tuple[str, ...]:
    """Names of the profiles that come with the program."""
    names = [one.name for one in _folder().iterdir() if one.name.endswith(".toml")]
    return tuple(sorted(name.removesuffix(".toml") for name in names))


def shipped_profile(name: str) -> Profile:
    """A profile that comes with the program.

    Raises
    ------
    UsageProblem
        There is none of that name (exit 2), with the nearest.
    """
    known = profile_names()
    if name not in known:
        near = difflib.get_close_matches(name, known, n=1)
        hint = f"did you mean `{near[0]}`?" if near else f"one of {', '.join(known)}, or a file"
        what = f"there is no profile `{name}`"
        raise UsageProblem([finding("PROFILE-KEY", where="profile", what=what, hint=hint)])
    text = (_folder() / f"{name}.toml").read_text(encoding="utf-8")
    return read_profile(text, where=f"profile {name}")

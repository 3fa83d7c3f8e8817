"""What a controller takes, in numbers and yes or no: a profile.

A profile is a small TOML text. Those that come with the program are named by what they do; a
person writes others for a machine at hand. Every key may be left out; what is left out is free.
"""

from __future__ import annotations

import difflib
import tomllib
from dataclasses import fields
from importlib.resources import files
from importlib.resources.abc import Traversable

from schorl.errors import Refusal, UsageProblem
from schorl.findings import Finding, finding
from schorl.model.profile import FORMATS, LAYOUTS, VERSIONS, Profile

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

"""A controller's profile by the name it comes with, or from a file."""

from __future__ import annotations

from pathlib import Path

from schorl.errors import Refusal
from schorl.findings import finding
from schorl.machinery.profiles import read_profile, shipped_profile
from schorl.model.profile import Profile


def profile_named(name: str, folder: Path) -> Profile:
    """The profile of a shipped name, or of a TOML file counted from ``folder``.

    Raises
    ------
    UsageProblem
        No such name, unknown keys or impossible values (exit 2).
    Refusal
        The file is missing or is not TOML (exit 3).
    """
    if not name.lower().endswith(".toml"):
        return shipped_profile(name)
    path = folder / name
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as reason:
        what = f"the profile cannot be read: {reason}"
        raise Refusal([finding("PROFILE-READ", where=str(path), what=what)]) from None
    return read_profile(text, where=path.name)

"""Texture classes by name: the sand and clay that a declared class stands for."""

from __future__ import annotations

import difflib

from schorl.agronomy.tables import Row, table
from schorl.errors import UsageProblem
from schorl.findings import finding

UNDECLARED = "loam"  # stands in where no texture is named and no figure hangs on it


def texture_named(name: str) -> Row:
    """The row of a texture class, whatever its capitals; a loam's without a name.

    Raises
    ------
    UsageProblem
        A class that is not in the table, with the nearest names (exit 2).
    """
    wanted = " ".join(name.lower().replace("-", " ").replace("_", " ").split()) or UNDECLARED
    rows = {row["id"]: row for row in table("textures")}
    if wanted in rows:
        return rows[wanted]
    near = difflib.get_close_matches(wanted, rows, n=3, cutoff=0.4) or list(rows)
    raise UsageProblem(
        [
            finding(
                "RATE-TEXTURE",
                where="job",
                what=f"`{name}` is not a texture class of the table",
                hint=f"nearest: {', '.join(near)}; `schorl tables textures` lists them all",
            )
        ]
    )

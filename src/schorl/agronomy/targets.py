"""Targets and soil ceilings by crop, clay and interpretation, mg/kg of hot-water boron."""

from __future__ import annotations

import numpy as np

from schorl.agronomy.crops import Crop
from schorl.agronomy.tables import Row, limit, row_of, table
from schorl.model.arrays import Flags, Floats

OWN_CLASSES = "program"


def _line(name: str, group: str, column: str, clay_pct: Floats) -> Floats:
    rows = [row for row in table(name) if row["group"] == group]
    clays = [float(row["clay_pct"]) for row in rows]
    return np.asarray(np.interp(clay_pct, clays, [float(row[column]) for row in rows]))


def crop_need_target(need: str, clay_pct: Floats) -> Floats:
    """Target by need class ("high", "medium", "low") and clay."""
    return _line("targets", need, "target_mg_kg", clay_pct)


def texture_line_target(clay_pct: Floats) -> Floats:
    """1 mg/kg in sand rising to 2 in heavy clay (common practice, no source)."""
    return _line("targets", "texture line", "target_mg_kg", clay_pct)


def class_rows(region: str) -> tuple[Row, ...]:
    """Rows of a region's class limits; this program's own without a region."""
    wanted = " ".join(region.lower().split()) or OWN_CLASSES
    return tuple(row for row in table("class_limits") if row["region"] == wanted)


def class_table_target(rows: tuple[Row, ...], clay_pct: Floats, organic: Flags) -> Floats:
    """Lower end of "adequate" by clay; where a soil is organic that of its own row, if any."""
    target = np.full(np.shape(clay_pct), np.nan)
    for row in rows:
        if row["organic"] == "yes":
            chosen = organic
        else:
            low, high = float(row["clay_from_pct"]), float(row["clay_below_pct"])
            chosen = (clay_pct >= low) & (clay_pct < high)
        target[chosen] = float(row["adequate_from"])
    return target


def class_scope(rows: tuple[Row, ...], crop: Crop) -> bool:
    """Whether a region's class limits were made for the crop."""
    crops = rows[0]["crops"]
    return crops == "all" or crop.name in crops.split("|")


def regions() -> tuple[str, ...]:
    """Regions with a preset of class limits, in the order of the table."""
    names = dict.fromkeys(row["region"] for row in table("class_limits"))
    return tuple(name for name in names if name != OWN_CLASSES)


def own_target(
    rows: tuple[tuple[str, float, float, float], ...], crop: Crop, clay_pct: Floats
) -> Floats:
    """Target from a table of one's own: crop (empty for all), clay from, clay below, target."""
    target = np.full(np.shape(clay_pct), np.nan)
    for name, low, high, value in rows:
        if name and name.lower() != crop.name.lower():
            continue
        target[(clay_pct >= low) & (clay_pct < high)] = value
    return target


def soil_ceiling(
    crop: Crop, next_sensitive: str, clay_pct: Floats, organic_matter_pct: Floats
) -> Floats:
    """Ceiling by texture, lowered where this or the next crop is sensitive.

    ``next_sensitive`` is the ceiling class of the next crop ("texture", "sensitive", "very
    sensitive").
    """
    ceiling = _line("ceilings", "texture", "ceiling_mg_kg", clay_pct)
    organic = organic_matter_pct > limit("organic-from")
    ceiling = np.where(organic, float(row_of("ceilings", "organic")["ceiling_mg_kg"]), ceiling)
    classes = {crop.ceiling_class, next_sensitive}
    for name, row_id in (("sensitive", "sensitive"), ("very sensitive", "very-sensitive")):
        if name in classes:
            most = float(row_of("ceilings", row_id)["ceiling_mg_kg"])
            ceiling = np.minimum(ceiling, most)
    return np.asarray(ceiling)

"""Target and ceiling of a job, by its interpretation, with the rows they come from."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from schorl.agronomy.crops import Crop, crop_named
from schorl.agronomy.tables import table, trace
from schorl.agronomy.targets import (
    class_table_target,
    crop_need_target,
    own_target,
    regions,
    soil_ceiling,
    texture_line_target,
)
from schorl.errors import Refusal, UsageProblem
from schorl.findings import finding
from schorl.model.arrays import Floats
from schorl.model.samples import SampleSet
from schorl.model.settings import CropSettings, Interpretation, RunSettings

Sources = list[Mapping[str, str]]


def hot_water(samples: SampleSet) -> bool:
    """Whether the built-in limits belong to the extraction method."""
    method = samples.campaign.method.lower().strip()
    for row in table("methods"):
        if method in (row["id"], *row["aliases"].split("|")):
            return row["limits_apply"] == "yes"
    return False


def target_for(crop: Crop, settings: RunSettings, clay_pct: Floats) -> tuple[Floats, Sources]:
    """Target of each cell, ``(n_cells,)``, mg/kg.

    Raises
    ------
    UsageProblem
        A region without class limits.
    Refusal
        Own targets that do not cover the soil.
    """
    chosen = settings.crop
    kind = chosen.interpretation
    if kind is Interpretation.OWN or chosen.target_mg_kg is not None:
        return _own(crop, chosen, clay_pct)
    if kind is Interpretation.TEXTURE_LINE:
        return texture_line_target(clay_pct), _rows("targets", "group", "texture line")
    if kind is Interpretation.CLASS_TABLE:
        region = chosen.region.lower()
        if region and region not in regions():
            what = f"`{chosen.region}` has no class limits; there are {', '.join(regions())}"
            raise UsageProblem([finding("RATE-REGION", where="job", what=what)])
        rows = _rows("class_limits", "region", region or "program")
        return class_table_target(region, clay_pct), rows
    return crop_need_target(crop.need, clay_pct), _rows("targets", "group", crop.need)


def _own(crop: Crop, chosen: CropSettings, clay_pct: Floats) -> tuple[Floats, Sources]:
    if chosen.target_mg_kg is not None:
        return np.full(np.shape(clay_pct), chosen.target_mg_kg), [_said("target", chosen)]
    target = own_target(chosen.own_targets, crop, clay_pct)
    if np.isnan(target).any():
        bare = clay_pct[np.isnan(target)]
        what = f"no own target for clay {bare.min():.0f} to {bare.max():.0f} %"
        raise Refusal([finding("RATE-OWN-TABLE", where="own targets", what=what)])
    return target, []


def _said(what: str, chosen: CropSettings) -> Mapping[str, str]:
    value = chosen.target_mg_kg if what == "target" else chosen.ceiling_mg_kg
    return {
        "table": "job",
        "row": what,
        "value": f"{value:g}",
        "unit": "mg/kg",
        "status": "GIVEN",
        "source": "given in the job",
    }


def _rows(name: str, column: str, wanted: str) -> Sources:
    value = {"targets": "target_mg_kg", "class_limits": "adequate_from"}[name]
    return [
        trace(name, row["id"], float(row[value])) for row in table(name) if row[column] == wanted
    ]


def ceiling_for(
    crop: Crop,
    settings: RunSettings,
    clay_pct: Floats,
    organic_matter_pct: Floats,
    *,
    builtin: bool,
) -> tuple[Floats, Sources]:
    """Soil ceiling of each cell, mg/kg; ``builtin`` where hot-water figures apply.

    Raises
    ------
    Refusal
        An own ceiling above the built-in one without a named person.
    """
    given = settings.crop.ceiling_mg_kg
    if not builtin:
        assert given is not None  # refused before
        return np.full(np.shape(clay_pct), given), [_said("ceiling", settings.crop)]
    own = soil_ceiling(crop, _next_class(settings), clay_pct, organic_matter_pct)
    sources: Sources = [
        trace("ceilings", row["id"], float(row["ceiling_mg_kg"]))
        for row in table("ceilings")
        if row["group"] in {crop.ceiling_class, _next_class(settings)}
    ]
    if given is None:
        return own, sources
    named = any(one.what == "soil ceiling" and one.person.strip() for one in settings.overrides)
    if given > own.min() + 1e-9 and not named:
        what = f"the given ceiling {given:g} mg/kg is above the built-in {own.min():g}"
        raise Refusal([finding("RATE-CEILING-RAISED", where="job", what=what)])
    return np.full(np.shape(clay_pct), given), [_said("ceiling", settings.crop)]


def _next_class(settings: RunSettings) -> str:
    """Ceiling class that the next crop asks for; sensitive where it is not named."""
    if not settings.crop.next_crop:
        return "sensitive"
    following = crop_named(settings.crop.next_crop, option="--next-crop")
    if following.ceiling_class == "very sensitive":
        return "very sensitive"
    return "sensitive" if following.sensitive_next else following.ceiling_class

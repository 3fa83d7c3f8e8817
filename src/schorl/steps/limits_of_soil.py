"""Target and ceiling of a job, by its interpretation, with the rows they come from."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from schorl.agronomy.crops import Crop, crop_named
from schorl.agronomy.methods import NOT_NAMED, is_hot_water, same_method
from schorl.agronomy.tables import Row, limit, table, trace
from schorl.agronomy.targets import (
    class_rows,
    class_scope,
    class_table_target,
    crop_need_target,
    own_target,
    regions,
    soil_ceiling,
    texture_line_target,
)
from schorl.errors import Refusal, UsageProblem
from schorl.findings import Finding, finding
from schorl.model.arrays import Floats
from schorl.model.samples import SampleSet
from schorl.model.settings import CropSettings, Interpretation, RunSettings

Sources = list[Mapping[str, str]]


def hot_water(samples: SampleSet) -> bool:
    """Whether the built-in limits belong to the extraction method."""
    return is_hot_water(samples.campaign.method)


def class_limits_fit(samples: SampleSet, settings: RunSettings) -> list[Finding]:
    """What keeps a region's class limits from this crop and these samples, all at once.

    Raises
    ------
    UsageProblem
        A region without class limits.
    """
    rows = _class_rows(settings.crop)
    first, campaign = rows[0], samples.campaign
    name, found = first["region"], []
    if not class_scope(rows, crop_named(settings.crop.crop)):
        what = f"class limits of {name} were made for {first['scope']}, not {settings.crop.crop}"
        found.append(finding("RATE-REGION-CROP", where="target", what=what))
    unnamed = first["method"] == NOT_NAMED
    if not (unnamed and hot_water(samples)) and not same_method(first["method"], campaign.method):
        what = (
            f"class limits of {name} are for {first['method']}, the samples for {campaign.method}"
        )
        if unnamed:
            what = f"class limits of {name} do not name their extraction, the samples are for "
            what += campaign.method
        found.append(finding("RATE-REGION-METHOD", where="target", what=what))
    if campaign.per_volume != (first["unit"] == "mg/L"):
        basis = "litre" if campaign.per_volume else "kilogram"
        what = f"class limits of {name} are in {first['unit']}, the samples are per {basis} of soil"
        found.append(finding("RATE-REGION-VOLUME", where="target", what=what))
    return found


def class_limits_note(settings: RunSettings) -> list[Finding]:
    """What to know of a region's class limits that may be used."""
    first = _class_rows(settings.crop)[0]
    if first["method"] != NOT_NAMED:
        return []
    what = f"class limits of {first['region']}: {first['note'] or 'extraction not named'}"
    return [finding("RATE-REGION-UNNAMED", where="target", what=what)]


def _class_rows(chosen: CropSettings) -> tuple[Row, ...]:
    rows = class_rows(chosen.region)
    if not rows:
        what = f"`{chosen.region}` has no class limits; there are {', '.join(regions())}"
        raise UsageProblem([finding("RATE-REGION", where="job", what=what)])
    return rows


def uses_class_table(settings: RunSettings) -> bool:
    """Whether the target comes from class limits."""
    chosen = settings.crop
    return chosen.interpretation is Interpretation.CLASS_TABLE and chosen.target_mg_kg is None


def target_for(
    crop: Crop, settings: RunSettings, clay_pct: Floats, organic_matter_pct: Floats
) -> tuple[Floats, Sources]:
    """Target of each cell, ``(n_cells,)``, mg/kg (mg/L of soil with limits per volume).

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
        return texture_line_target(clay_pct), _line_rows("targets", "texture line", clay_pct)
    if kind is Interpretation.CLASS_TABLE:
        rows = _class_rows(chosen)
        organic = organic_matter_pct > limit("organic-from")
        target = class_table_target(rows, clay_pct, organic)
        used = [row for row in rows if (target == float(row["adequate_from"])).any()]
        return target, [
            trace("class_limits", row["id"], float(row["adequate_from"])) for row in used
        ]
    return crop_need_target(crop.need, clay_pct), _line_rows("targets", crop.need, clay_pct)


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
        "key": f"job: {what}",
        "table": "job",
        "row": what,
        "value": f"{value:g}",
        "unit": "mg/kg",
        "status": "given",
        "source": "given in the job",
        "address": "",
    }


def _line_rows(name: str, group: str, clay_pct: Floats) -> Sources:
    """Rows of a line over clay that the soils' figures are drawn between."""
    rows = [row for row in table(name) if row["group"] == group]
    clays = [-np.inf, *(float(row["clay_pct"]) for row in rows), np.inf]
    column = {"targets": "target_mg_kg", "ceilings": "ceiling_mg_kg"}[name]
    return [
        trace(name, row["id"], float(row[column]))
        for row, low, high in zip(rows, clays, clays[2:], strict=False)
        if ((clay_pct > low) & (clay_pct < high)).any()
    ]


def _ceiling_rows(
    own: Floats, classes: set[str], clay_pct: Floats, organic_matter_pct: Floats
) -> Sources:
    """Rows of ceilings that some soil of the field is held by."""
    held = [row for row in table("ceilings") if row["group"] in classes - {"texture"}]
    least = min((float(row["ceiling_mg_kg"]) for row in held), default=np.inf)
    sources: Sources = [
        trace("ceilings", row["id"], least) for row in held if float(row["ceiling_mg_kg"]) == least
    ]
    free = own < least - 1e-9
    organic = organic_matter_pct > limit("organic-from")
    if (free & organic).any():
        sources += [trace("ceilings", "organic", float(own[free & organic][0]))]
    if (free & ~organic).any():
        sources += _line_rows("ceilings", "texture", clay_pct[free & ~organic])
    return sources


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
    if given is None:
        classes = {crop.ceiling_class, _next_class(settings)}
        return own, _ceiling_rows(own, classes, clay_pct, organic_matter_pct)
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

"""The job file: what a person decides, checked key by key, with paths beside the file.

A job is TOML. Every key has a plain name with its unit; an unknown key is an error with the
nearest known one, never ignored. Options of the command line lay themselves over the file.
"""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Mapping
from datetime import date
from pathlib import Path
from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from schorl.errors import SchorlError, UsageProblem
from schorl.findings import Finding, finding

POSITIVE = Field(default=None, gt=0, allow_inf_nan=False)
NOT_NEGATIVE = Field(default=None, ge=0, allow_inf_nan=False)
PERCENT = Field(default=None, ge=0, le=100, allow_inf_nan=False)


class _Section(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)


class BoundaryPart(_Section):
    """Where the field's boundary is."""

    file: str
    layer: str | None = None
    crs: str | None = None


class SamplesPart(_Section):
    """Where the samples are and how they were taken."""

    file: str
    layer: str | None = None
    crs: str | None = None
    sampled_on: date | None = None
    depth_cm: float | None = Field(default=None, gt=0, le=200)
    method: str | None = None
    laboratory: str = ""
    lab_relative_sd_pct: float | None = Field(default=None, gt=0, le=100)
    clay_pct: float | None = PERCENT
    organic_matter_pct: float | None = PERCENT
    cores: int | None = Field(default=None, ge=1, le=500)
    columns: dict[str, str] = Field(default_factory=dict)
    units: dict[str, str] = Field(default_factory=dict)
    report_depth_cm: float | None = POSITIVE
    keep_depth: str | None = None
    zone_layer: str | None = None
    zone_column: str | None = None
    strike_out: list[str] = Field(default_factory=list)
    average_duplicates: bool = False


class CropPart(_Section):
    """Crop and soil facts behind target, ceiling and need."""

    name: str | None = None
    next: str = ""
    interpretation: Literal["crop need", "texture line", "class table", "own"] | None = None
    region: str = ""
    target_mg_kg: float | None = POSITIVE
    ceiling_mg_kg: float | None = POSITIVE
    own_table: str | None = None
    cost_ratio: float = Field(default=1.0, gt=0, le=10)
    maintenance_yield_t_ha: float | None = POSITIVE
    drainage_mm: float | None = NOT_NEGATIVE
    water_boron_mg_l: float = Field(default=0.0, ge=0)
    irrigation_mm: float = Field(default=0.0, ge=0)
    manure_boron_kg_ha: float = Field(default=0.0, ge=0)
    bulk_density_g_cm3: float | None = Field(default=None, gt=0.05, lt=2.65)
    sand_pct: float | None = PERCENT
    texture: str = ""
    stones_pct: float = Field(default=0.0, ge=0, lt=100)
    incorporation_cm: float | None = Field(default=None, gt=0, le=60)
    lime_last_year: bool = False
    drought: bool = False
    confirmed_high: list[str] = Field(default_factory=list)


class ProductPart(_Section):
    """The boron product and where it lands."""

    form: Literal["granule", "spray"] | None = None
    placement: (
        Literal["broadcast", "incorporated", "band", "seed row", "foliar", "fertigation"] | None
    ) = None
    name: str = ""
    compound: str = ""
    boron_pct: float | None = Field(default=None, gt=0, le=32)
    boron_g_l: float | None = Field(default=None, gt=0, le=600)
    density_kg_l: float | None = Field(default=None, gt=0.5, lt=3)
    bulk_density_kg_l: float | None = Field(default=None, gt=0.1, lt=3)
    granule_mm: float | None = Field(default=None, gt=0, le=20)
    granule_density_g_cm3: float | None = Field(default=None, gt=0.1, lt=5)
    price_per_unit: float | None = NOT_NEGATIVE
    bag_kg: float | None = POSITIVE


class MachinePart(_Section):
    """The machine in numbers."""

    working_width_m: float | None = Field(default=None, gt=0.2, le=150)
    sections: int = Field(default=1, ge=1, le=400)
    least_rate: float | None = NOT_NEGATIVE
    most_rate: float | None = POSITIVE
    step: float | None = POSITIVE
    speed_km_h: float | None = Field(default=None, gt=0, le=60)
    rate_change_s: float | None = Field(default=None, ge=0, le=60)
    delay_s: float = Field(default=0.0, ge=0, le=60)
    spread_cv_pct: float | None = Field(default=None, ge=0, le=100)
    hopper_kg: float | None = POSITIVE
    tank_l: float | None = POSITIVE
    can_do_zero: bool = True
    carrier: str = ""
    carrier_rate_kg_ha: float | None = POSITIVE
    carrier_may_vary: bool | None = None
    blend_pct: float | None = Field(default=None, gt=0, le=100)
    headland_m: float = Field(default=0.0, ge=0)
    first_pass: str = ""
    nozzle_size: str = ""
    nozzle_spacing_m: float = Field(default=0.5, gt=0.05, le=3)
    pressure_low_bar: float = Field(default=1.5, gt=0)
    pressure_high_bar: float = Field(default=6.0, gt=0)
    pulse_width_ratio: float | None = Field(default=None, ge=1, le=20)
    mix_g_b_l: float | None = POSITIVE
    water_l_ha: float | None = POSITIVE
    water_temperature_c: float | None = Field(default=None, ge=0, le=60)
    events: int = Field(default=1, ge=1, le=50)


class ExtraPart(_Section):
    """A further layer for zoning."""

    file: str
    name: str
    weight: float = Field(default=1.0, gt=0, le=10)
    column: str | None = None
    layer: str | None = None
    crs: str | None = None


class ZoningPart(_Section):
    """How zones are drawn."""

    count: int | None = Field(default=None, ge=1, le=9)
    soil_only: bool = False
    heading_deg: float | None = Field(default=None, ge=0, lt=360)
    least_area_ha: float = Field(default=0.25, ge=0)
    redraw: bool = False
    keep_zones_of: str | None = None
    own_layer: str | None = None
    keep_off: str | None = None
    keep_off_m: float = Field(default=0.0, ge=0)
    extra: list[ExtraPart] = Field(default_factory=list)


class AppliedPart(_Section):
    """Boron already given: a figure, an as-applied file or an earlier pack."""

    on: date | None = None
    kg_ha: float | None = NOT_NEGATIVE
    file: str | None = None
    column: str | None = None
    unit: str | None = None
    boron_pct: float | None = Field(default=None, gt=0, le=100)
    pack: str | None = None
    form: str = ""
    this_season: bool = False


class OverridePart(_Section):
    """A limit set otherwise, by a named person."""

    what: str
    value: float
    unit: str = ""
    person: str = Field(min_length=2)
    reason: str = ""


class PricesPart(_Section):
    """Prices, only to say the value of zoning in money."""

    boron_per_kg: float | None = NOT_NEGATIVE
    yield_per_kg_short: float | None = NOT_NEGATIVE
    currency: str = ""


class Job(_Section):
    """A whole job."""

    field: str = ""
    season: str = "undated"
    seed: int = Field(default=0, ge=0, le=2**31)
    units: Literal["metric", "us"] = "metric"
    made_on: date | None = None
    prepared_by: str = ""
    cell_m: float | None = Field(default=None, ge=0.5, le=50)
    profile: str = ""
    boundary: BoundaryPart | None = None
    samples: SamplesPart | None = None
    crop: CropPart = Field(default_factory=CropPart)
    product: ProductPart = Field(default_factory=ProductPart)
    machine: MachinePart = Field(default_factory=MachinePart)
    zoning: ZoningPart = Field(default_factory=ZoningPart)
    applied: list[AppliedPart] = Field(default_factory=list)
    override: list[OverridePart] = Field(default_factory=list)
    prices: PricesPart = Field(default_factory=PricesPart)


def load_job(path: Path) -> dict[str, Any]:
    """Read a job file, or the job.toml of a folder, as nested values, not yet checked.

    Raises
    ------
    SchorlError
        Exit 3 where the file is missing or is not TOML.
    """
    file = path / "job.toml" if path.is_dir() else path
    try:
        return tomllib.loads(file.read_text(encoding="utf-8-sig"))
    except FileNotFoundError:
        raise SchorlError(
            [finding("JOB-FILE", where=str(path), what=f"there is no job file `{file.name}` here")]
        ) from None
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as reason:
        raise SchorlError(
            [finding("JOB-FILE", where=str(file), what=f"the job file cannot be read: {reason}")]
        ) from None


def lay_over(base: Mapping[str, Any], options: Mapping[str, Any]) -> dict[str, Any]:
    """Options (dotted keys such as ``samples.depth_cm``) laid over nested values of a job."""
    merged: dict[str, Any] = {
        key: (dict(value) if isinstance(value, Mapping) else value) for key, value in base.items()
    }
    for dotted, value in options.items():
        *parents, last = dotted.split(".")
        place = merged
        for parent in parents:
            place[parent] = dict(place.get(parent) or {})
            place = place[parent]
        place[last] = {**place.get(last, {}), **value} if isinstance(value, Mapping) else value
    return merged


def check_job(values: Mapping[str, Any], *, where: str) -> Job:
    """Check nested values into a job.

    Raises
    ------
    UsageProblem
        With one finding for each key that is unknown or has an impossible value.
    """
    try:
        return Job.model_validate(values)
    except ValidationError as problems:
        raise UsageProblem([_job_finding(one, where) for one in problems.errors()]) from None


def _job_finding(problem: Any, where: str) -> Finding:
    key = ".".join(str(part) for part in problem["loc"])
    if problem["type"] == "extra_forbidden":
        known = known_keys()
        near = difflib.get_close_matches(key, known, n=3, cutoff=0.5)
        hint = f"did you mean {', '.join(f'`{one}`' for one in near)}?" if near else ""
        return finding("JOB-KEY", where=where, what=f"`{key}` is not a key of a job", hint=hint)
    shown = problem.get("input")
    said = "" if isinstance(shown, Mapping) else f" (it is {shown!r})"
    return finding("JOB-VALUE", where=where, what=f"`{key}`: {problem['msg'].lower()}{said}")


def known_keys() -> list[str]:
    """All keys of a job file in dotted form."""
    keys: list[str] = []

    def walk(model: type[BaseModel], prefix: str) -> None:
        for name, info in model.model_fields.items():
            inner = [
                part
                for part in getattr(info.annotation, "__args__", (info.annotation,))
                if isinstance(part, type) and issubclass(part, BaseModel)
            ]
            keys.append(prefix + name)
            for part in inner:
                walk(part, f"{prefix}{name}.")

    walk(Job, "")
    return keys


def job_text(job: Job) -> str:
    """A job as TOML, without what it leaves at its default."""
    import tomli_w

    return tomli_w.dumps(job.model_dump(exclude_none=True, exclude_defaults=True, mode="python"))

"""From a checked job to resolved settings: what was missing is asked for, defaults are named."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from schorl.errors import UsageProblem
from schorl.findings import Finding, finding
from schorl.jobs import Job
from schorl.model.field import Area
from schorl.model.profile import Profile
from schorl.model.settings import (
    AppliedBoron,
    CropSettings,
    ExtraLayer,
    Form,
    Interpretation,
    Machine,
    Override,
    Placement,
    Product,
    RunSettings,
    ZoneSettings,
)
from schorl.units import UnitSystem

#: What was given, what is assumed without it, and the option to say otherwise.
Default = tuple[object, str | None, str]
DEFAULT_WIDTH_M = 24.0
DEFAULT_SPEED_KM_H = 10.0
DEFAULT_RATE_CHANGE_S = 3.0
DEFAULT_SPREAD_CV_PCT = 15.0


@dataclass(frozen=True, kw_only=True)
class Layers:
    """What a job's other files hold, read and in the field's metres."""

    applied: tuple[AppliedBoron, ...] = ()
    kept: tuple[tuple[int, Area], ...] = ()
    retired_numbers: tuple[int, ...] = ()
    own_layer: tuple[tuple[int, Area], ...] = ()
    keep_off: tuple[Area, ...] = ()
    extras: tuple[ExtraLayer, ...] = ()
    own_targets: tuple[tuple[str, float, float, float], ...] = ()


def missing_facts(job: Job) -> tuple[Finding, ...]:
    """Facts that are never assumed and that the job does not give (all at once)."""
    return tuple(_missing(job))


def _missing(job: Job) -> Iterator[Finding]:
    asked = [
        (job.boundary is None, "the field's boundary", "--boundary FILE"),
        (job.samples is None, "the samples", "--samples FILE"),
        (not job.crop.name, "the crop", "--crop NAME (`schorl tables crops` lists them)"),
        (job.product.form is None, "what is spread, granule or spray", "--form granule"),
        (
            job.product.boron_pct is None and job.product.boron_g_l is None,
            "the product's share of boron",
            "--boron-pct X (granule or % w/w of a liquid with its density) or --boron-g-l X",
        ),
        (
            job.product.form == "spray" and job.product.placement is None,
            "where the spray lands",
            "--placement broadcast|incorporated|band|foliar|fertigation",
        ),
    ]
    for absent, what, option in asked:
        if absent:
            yield finding(
                "JOB-MISSING", where="job", what=f"{what} is not given", hint=f"give `{option}`"
            )


def default_notes(job: Job) -> tuple[Finding, ...]:
    """One note for each default that was used and can change a rate."""
    return (*machine_notes(job), *_defaults(job))


def machine_notes(job: Job) -> tuple[Finding, ...]:
    """One note for each default of the machine that was used."""
    machine = job.machine
    used: list[Default] = [
        (machine.working_width_m, f"working width {DEFAULT_WIDTH_M:g} m", "--working-width-m"),
        (machine.speed_km_h, f"speed {DEFAULT_SPEED_KM_H:g} km/h", "--speed-km-h"),
        (machine.rate_change_s, f"rate change in {DEFAULT_RATE_CHANGE_S:g} s", "rate_change_s"),
        (machine.spread_cv_pct, f"spread CV {DEFAULT_SPREAD_CV_PCT:g} %", "--spread-cv"),
        (machine.least_rate, "no least rate of the machine", "--least-rate"),
        (machine.most_rate, "no most rate of the machine", "--most-rate"),
    ]
    return tuple(_said(used))


def _said(used: list[Default]) -> Iterator[Finding]:
    for given, said, option in used:
        if given is None and said:
            yield finding(
                "JOB-DEFAULT",
                where="job",
                what=f"{said} was assumed",
                hint=f"say otherwise with `{option}`",
            )


def _defaults(job: Job) -> Iterator[Finding]:
    granule = "granule broadcast on the surface" if job.product.form == "granule" else None
    used: list[Default] = [
        (job.product.placement, granule, "--placement"),
        (job.crop.interpretation, _default_interpretation(job), "--interpretation"),
    ]
    yield from _said(used)
    if not job.crop.next:
        yield finding(
            "JOB-NEXT-CROP", where="job", what="the next crop is not named: it counts as sensitive"
        )


def _default_interpretation(job: Job) -> str:
    own = job.crop.target_mg_kg is not None or job.crop.own_table is not None
    return "the target that was given" if own else "the target by crop need"


def resolve(
    job: Job, *, field_name: str, layers: Layers, profile: Profile | None = None
) -> RunSettings:
    """Settings of a run.

    Raises
    ------
    UsageProblem
        Where a fact that is never assumed is missing; all of them at once.
    """
    missing = missing_facts(job)
    if missing:
        raise UsageProblem(missing)
    return RunSettings(
        field_name=field_name,
        season=job.season,
        crop=_crop(job, layers),
        product=product_of(job),
        placement=Placement(job.product.placement or "broadcast"),
        machine=machine_of(job),
        zoning=_zoning(job, layers),
        cell_m=job.cell_m,
        units=UnitSystem(job.units),
        seed=job.seed,
        made_on=job.made_on,
        prepared_by=job.prepared_by,
        overrides=tuple(Override(**one.model_dump()) for one in job.override),
        profile=profile,
    )


def _crop(job: Job, layers: Layers) -> CropSettings:
    part = job.crop
    own = part.target_mg_kg is not None or part.own_table is not None
    chosen = part.interpretation or ("own" if own else "crop need")
    plain = part.model_dump(
        exclude={"name", "next", "interpretation", "own_table", "confirmed_high"}
    )
    return CropSettings(
        crop=part.name or "",
        next_crop=part.next,
        interpretation=Interpretation(chosen),
        own_targets=layers.own_targets,
        applied=layers.applied,
        confirmed_high=tuple(part.confirmed_high),
        price_boron_per_kg=job.prices.boron_per_kg,
        price_yield_per_kg_short=job.prices.yield_per_kg_short,
        currency=job.prices.currency,
        **plain,
    )


def product_of(job: Job) -> Product:
    """A job's product."""
    plain = job.product.model_dump(exclude={"form", "placement"})
    return Product(form=Form(job.product.form or "granule"), **plain)


def machine_of(job: Job) -> Machine:
    """A job's machine, with the documented defaults for what it leaves out."""
    given = job.machine.model_dump(exclude_none=True)
    defaults = {
        "working_width_m": DEFAULT_WIDTH_M,
        "speed_km_h": DEFAULT_SPEED_KM_H,
        "rate_change_s": DEFAULT_RATE_CHANGE_S,
        "spread_cv_pct": DEFAULT_SPREAD_CV_PCT,
    }
    return Machine(**{**defaults, **given})


def _zoning(job: Job, layers: Layers) -> ZoneSettings:
    plain = job.zoning.model_dump(exclude={"keep_zones_of", "own_layer", "keep_off", "extra"})
    return ZoneSettings(
        kept=layers.kept,
        retired_numbers=layers.retired_numbers,
        own_layer=layers.own_layer,
        keep_off=layers.keep_off,
        extras=layers.extras,
        **plain,
    )

"""From a written pack to an adapted one: the same boron another way."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from schorl.errors import Refusal, UsageProblem
from schorl.findings import Finding, finding
from schorl.intake.boundaries import read_areas
from schorl.jobs import Job, check_job
from schorl.model.field import Area
from schorl.model.record import RunRecord
from schorl.model.settings import Machine, Product
from schorl.run.packs import named_source, whole_record
from schorl.run.profiles import profile_named
from schorl.run.settings import machine_notes, machine_of, product_of
from schorl.steps.adapting import Change, adapt

SECTIONS = ("machine", "product")


@dataclass(frozen=True, slots=True, kw_only=True)
class Wanted:
    """What a person wants changed; empty is as it was."""

    machine_file: Path | None = None
    product: Mapping[str, Any] | None = None  # keys of a job's [product]
    profile: str | None = None
    keep_off: Path | None = None
    keep_off_m: float = 0.0


def adapt_pack(folder: Path, wanted: Wanted) -> RunRecord:
    """The record of a pack, adapted.

    Raises
    ------
    UsageProblem
        Nothing to change, unknown keys or impossible values (exit 2).
    Refusal
        The pack is not whole or has no record (exit 3); the change is not safe (exit 4).
    """
    record = whole_record(folder)
    change, notes = _change(record, wanted)
    adapted = adapt(record, change, source=named_source(folder)).record
    return replace(adapted, findings=tuple(dict.fromkeys((*adapted.findings, *notes))))


def _change(record: RunRecord, wanted: Wanted) -> tuple[Change, tuple[Finding, ...]]:
    said = read_sections(wanted.machine_file) if wanted.machine_file else {}
    product = {**said.get("product", {}), **(wanted.product or {})}
    where = wanted.machine_file.name if wanted.machine_file else "options"
    job = check_job({"machine": said.get("machine", {}), "product": product}, where=where)
    areas, notes = _keep_off(record, wanted.keep_off)
    machine = _machine(job, said)
    change = Change(
        product=_product(record.settings.product, job, product),
        machine=machine,
        profile=None if wanted.profile is None else profile_named(wanted.profile, Path.cwd()),
        keep_off=areas,
        keep_off_m=wanted.keep_off_m,
    )
    if change == Change():
        what = "nothing to change was given"
        hint = "give --machine, --boron-pct, --boron-g-l, --profile, --keep-off or --keep-off-m"
        raise UsageProblem([finding("JOB-MISSING", where="adapt", what=what, hint=hint)])
    return change, (*notes, *(machine_notes(job) if machine else ()))


def read_sections(path: Path) -> dict[str, dict[str, Any]]:
    """The [machine] and [product] of a TOML file; keys outside sections are the machine's."""
    try:
        values = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as reason:
        what = f"the machine file cannot be read: {reason}"
        raise Refusal([finding("JOB-FILE", where=str(path), what=what)]) from None
    sections = {name: dict(values.pop(name, {})) for name in SECTIONS}
    sections["machine"].update(values)
    return sections


def _machine(job: Job, said: Mapping[str, Mapping[str, Any]]) -> Machine | None:
    return machine_of(job) if said.get("machine") else None


def _product(old: Product, job: Job, given: Mapping[str, Any]) -> Product | None:
    """The old product with what was given; a new one where its form changes."""
    if not given:
        return None
    if job.product.form is not None and job.product.form != str(old.form):
        return product_of(job)
    fresh = {name: value for name, value in given.items() if name not in ("form", "placement")}
    if "boron_pct" in fresh or "boron_g_l" in fresh:
        fresh = {"boron_pct": None, "boron_g_l": None} | fresh
    return replace(old, **fresh)


def _keep_off(record: RunRecord, path: Path | None) -> tuple[tuple[Area, ...], tuple[Finding, ...]]:
    if path is None:
        return (), ()
    reading = read_areas(path, crs_to=record.field.crs)
    if reading.value is None:
        raise Refusal(reading.findings)
    return tuple(area for _, area, _ in reading.value), reading.findings

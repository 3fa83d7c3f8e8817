"""Everything a job names, read once and checked: the first half of every command."""

from __future__ import annotations

import os
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TypeVar

from schorl.errors import Refusal, UsageProblem
from schorl.findings import Finding, errors_among, finding
from schorl.jobs import AppliedPart, Job
from schorl.model.field import Area, Field
from schorl.model.profile import Profile
from schorl.model.reading import Reading, SampleHints
from schorl.model.record import Recognition
from schorl.model.samples import SampleSet
from schorl.model.settings import AppliedBoron, ExtraLayer, RunSettings
from schorl.model.zones import ZoneKind
from schorl.run.settings import DEFAULT_WIDTH_M, Layers, default_notes, missing_facts, resolve

T = TypeVar("T")


@dataclass(frozen=True, kw_only=True)
class Inputs:
    """A field, its samples and the settings, with everything noticed on the way."""

    field: Field
    samples: SampleSet
    settings: RunSettings
    findings: tuple[Finding, ...]
    recognised: tuple[Recognition, ...]
    inputs_sha256: dict[str, str]


class Notebook:
    """Findings and recognitions gathered while reading; errors are raised together, once."""

    def __init__(self) -> None:
        self.findings: list[Finding] = []
        self.recognised: list[Recognition] = []
        self.read: dict[str, Path] = {}

    def take(self, reading: Reading[T]) -> T | None:
        """Keep what a reading noticed and hand its value on."""
        self.findings.extend(reading.findings)
        self.recognised.extend(reading.recognised)
        return reading.value

    def stop_on_errors(self) -> None:
        """Raise everything noticed so far if any of it stops a run."""
        if errors_among(self.findings):
            raise Refusal(self.findings)


def read_inputs(job: Job, folder: Path) -> Inputs:
    """Read and check all that a job names; paths count from ``folder``.

    Raises
    ------
    UsageProblem
        A fact that is never assumed is missing (exit 2).
    Refusal
        Input that cannot be understood (3) or that allows no honest answer (4), all findings.
    """
    missing = missing_facts(job)
    if missing:
        raise UsageProblem(missing)
    notes = Notebook()
    field = read_field(job, folder, notes)
    samples = read_sample_set(job, folder, field, notes)
    layers = _read_layers(job, folder, field, notes)
    notes.findings.extend(default_notes(job))
    notes.stop_on_errors()
    return Inputs(
        field=field,
        samples=samples,
        settings=resolve(
            job, field_name=job.field or field.name, layers=layers, profile=_profile(job, folder)
        ),
        findings=tuple(notes.findings),
        recognised=tuple(notes.recognised),
        inputs_sha256=_fingerprints(notes.read),
    )


def _fingerprints(paths: dict[str, Path]) -> dict[str, str]:
    from schorl.intake.fingerprint import sha256_of

    return {name: sha256_of(path) for name, path in sorted(paths.items()) if path.is_file()}


def beside(folder: Path, given: str) -> Path:
    """A path as a job in ``folder`` names it, also where the folder is still to be made."""
    return Path(os.path.normpath(folder / given))


def located(folder: Path, given: str, notes: Notebook) -> Path | None:
    """A path of the job, or None with a finding where nothing is there."""
    path = beside(folder, given)
    if not path.exists():
        notes.findings.append(
            finding("JOB-INPUT", where="job", what=f"there is no file `{given}` in {folder}")
        )
        return None
    notes.read[path.name] = path
    return path


def read_field(job: Job, folder: Path, notes: Notebook) -> Field:
    """The field's boundary; raises with the findings where there is none."""
    from schorl.intake.boundaries import read_boundary

    part = job.boundary
    assert part is not None  # asked for in read_inputs
    path = located(folder, part.file, notes)
    field = None
    if path is not None:
        field = notes.take(read_boundary(path, layer=part.layer, crs=part.crs, name=job.field))
    if field is None:
        if job.samples is not None:
            located(folder, job.samples.file, notes)
        raise Refusal(notes.findings)
    return field


def hints_of(job: Job, folder: Path) -> SampleHints:
    """What the job says about the laboratory file."""
    part = job.samples
    assert part is not None  # asked for in read_inputs
    said_pct = part.lab_relative_sd_pct
    plain = part.model_dump(exclude={"file", "lab_relative_sd_pct", "zone_layer", "strike_out"})
    return SampleHints(
        lab_relative_sd=None if said_pct is None else said_pct / 100.0,
        zone_layer=beside(folder, part.zone_layer) if part.zone_layer else None,
        strike_out=tuple(part.strike_out),
        confirmed=tuple(job.crop.confirmed_high),
        **plain,
    )


def read_sample_set(job: Job, folder: Path, field: Field, notes: Notebook) -> SampleSet:
    """The samples, recognised and checked against the field."""
    from schorl.intake.checks import check_samples
    from schorl.intake.samples import read_samples

    part = job.samples
    assert part is not None  # asked for in read_inputs
    path = located(folder, part.file, notes)
    samples = None
    if path is not None:
        hints = hints_of(job, folder)
        if part.zone_layer:
            located(folder, part.zone_layer, notes)
        samples = notes.take(read_samples(path, field=field, hints=hints))
    if samples is None:
        raise Refusal(notes.findings)
    notes.findings.extend(check_samples(samples, field, confirmed=tuple(job.crop.confirmed_high)))
    return samples


def _read_layers(job: Job, folder: Path, field: Field, notes: Notebook) -> Layers:
    zoning, width = job.zoning, job.machine.working_width_m or DEFAULT_WIDTH_M
    kept, retired = _kept_zones(job, folder, field, notes)
    own = _areas(zoning.own_layer, folder, field, notes)
    return Layers(
        applied=tuple(
            one for part in job.applied for one in _applied(part, folder, field, notes, width)
        ),
        kept=kept,
        retired_numbers=retired,
        own_layer=tuple((place + 1, area) for place, area in enumerate(own)),
        keep_off=_areas(zoning.keep_off, folder, field, notes),
        extras=_extras(job, folder, field, notes),
        own_targets=_own_targets(job, folder, notes),
    )


def _profile(job: Job, folder: Path) -> Profile | None:
    from schorl.run.profiles import profile_named

    return profile_named(job.profile, folder) if job.profile else None


def _areas(given: str | None, folder: Path, field: Field, notes: Notebook) -> tuple[Area, ...]:
    from schorl.intake.boundaries import read_areas

    path = located(folder, given, notes) if given else None
    if path is None:
        return ()
    rows = notes.take(read_areas(path, crs_to=field.crs)) or ()
    return tuple(area for _, area, _ in rows)


def _kept_zones(
    job: Job, folder: Path, field: Field, notes: Notebook
) -> tuple[tuple[tuple[int, Area], ...], tuple[int, ...]]:
    from schorl.geodesy import transform_geometry
    from schorl.run.packs import whole_record

    given = job.zoning.keep_zones_of
    path = located(folder, given, notes) if given else None
    if path is None:
        return (), ()
    record = whole_record(path)
    zone_map = record.prescription.zone_map
    kept = tuple(
        (zone.number, transform_geometry(zone.geometry, source=record.field.crs, target=field.crs))
        for zone in zone_map.zones
        if zone.kind is ZoneKind.ZONE
    )
    return kept, zone_map.retired_numbers


def _applied(
    part: AppliedPart, folder: Path, field: Field, notes: Notebook, width_m: float
) -> tuple[AppliedBoron, ...]:
    if part.pack:
        path = located(folder, part.pack, notes)
        return () if path is None else (_applied_of_pack(part, path, field),)
    if part.file:
        from schorl.intake.applied import read_applied

        path = located(folder, part.file, notes)
        if path is None:
            return ()
        reading = read_applied(
            path,
            field=field,
            on=part.on,
            column=part.column,
            unit=part.unit,
            boron_pct=part.boron_pct,
            form=part.form,
            this_season=part.this_season,
            width_m=width_m,
        )
        one = notes.take(reading)
        return () if one is None else (one,)
    if part.kg_ha is None:
        notes.findings.append(
            finding(
                "JOB-MISSING",
                where="job, [[applied]]",
                what="an entry of boron already given has neither kg_ha, file nor pack",
                hint="give `kg_ha`, `file` or `pack` in the entry",
            )
        )
        return ()
    return (
        AppliedBoron(on=part.on, kg_ha=part.kg_ha, form=part.form, this_season=part.this_season),
    )


def _applied_of_pack(part: AppliedPart, path: Path, field: Field) -> AppliedBoron:
    from schorl.run.packs import whole_record
    from schorl.steps.given import prescribed_boron

    given = prescribed_boron(whole_record(path), crs=field.crs, source=path.name)
    return replace(given, on=part.on, form=part.form, this_season=part.this_season)


def _extras(job: Job, folder: Path, field: Field, notes: Notebook) -> tuple[ExtraLayer, ...]:
    from schorl.intake.rasters import read_extra_layer

    layers = []
    for part in job.zoning.extra:
        path = located(folder, part.file, notes)
        if path is not None:
            layers.append(
                notes.take(
                    read_extra_layer(
                        path, field=field, name=part.name, weight=part.weight, column=part.column
                    )
                )
            )
    return tuple(layer for layer in layers if layer is not None)


def _own_targets(
    job: Job, folder: Path, notes: Notebook
) -> tuple[tuple[str, float, float, float], ...]:
    given = job.crop.own_table
    path = located(folder, given, notes) if given else None
    if path is None:
        return ()
    from schorl.intake.targets import read_own_targets

    return notes.take(read_own_targets(path)) or ()

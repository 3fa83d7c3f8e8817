"""From inputs to a record (map, assess, zone, rate), and from a record to a written pack."""

from __future__ import annotations

import platform
from dataclasses import replace
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import TYPE_CHECKING

from schorl import __version__
from schorl.errors import Refusal
from schorl.findings import Finding, errors_among, finding
from schorl.model.arrays import Counts
from schorl.model.field import CellGrid, Field, lay_grid
from schorl.model.prescription import PlanOutcome
from schorl.model.progress import Progress, silent
from schorl.model.record import RunRecord
from schorl.model.settings import Override, RunSettings
from schorl.run.inputs import Inputs

if TYPE_CHECKING:
    from schorl.formats.pack import PackWritten
    from schorl.steps.assessing import Assessed
    from schorl.steps.mapping import Mapped
    from schorl.steps.zoning import Zoned

LIBRARIES = (
    "numpy",
    "scipy",
    "shapely",
    "pyproj",
    "geopandas",
    "pyogrio",
    "fiona",
    "rasterio",
    "scikit-learn",
    "pykrige",
    "typst",
)
LEAST_CELL_M, MOST_CELL_M = 2.0, 10.0
#: A field of this many cells takes a few seconds; a larger one gets larger cells by default.
MOST_DEFAULT_CELLS = 60_000


def default_cell_m(field: Field, working_width_m: float) -> float:
    """A quarter of the working width, 2 to 10 m, larger for fields of many hectares."""
    cell = min(max(working_width_m / 4.0, LEAST_CELL_M), MOST_CELL_M)
    cell = round(cell * 2.0) / 2.0
    while field.boundary.area / cell**2 > MOST_DEFAULT_CELLS and cell < MOST_CELL_M:
        cell += 0.5
    return cell


def survey(inputs: Inputs, *, progress: Progress = silent) -> RunRecord:
    """Everything from the samples to the rates.

    Raises
    ------
    Refusal
        Where there is no honest or safe answer (exit 4), with all findings so far.
    """
    from schorl.steps.interpretations import other_readings
    from schorl.steps.mapping import map_surfaces
    from schorl.steps.rating import assess_cells, prescribe_rates

    settings, samples, field = inputs.settings, inputs.samples, inputs.field
    found = list(inputs.findings)
    cell_m = settings.cell_m or default_cell_m(field, settings.machine.working_width_m)
    settings = replace(settings, cell_m=cell_m)
    grid = lay_grid(field.boundary, cell_m=cell_m)
    mapped = map_surfaces(samples, grid, seed=settings.seed, progress=progress)
    _keep(found, mapped.findings)
    assessed = assess_cells(samples, mapped.surfaces, grid, settings)
    _keep(found, assessed.findings)
    zoned = _zones(inputs, grid, mapped, assessed, settings, progress=progress)
    _keep(found, zoned.findings)
    rated = prescribe_rates(zoned.zone_map, assessed, samples, mapped.surfaces, grid, settings)
    _keep(found, rated.findings)
    settings = replace(settings, machine=rated.machine)
    given = {rate.zone: rate.boron_kg_ha for rate in rated.prescription.rates}
    found.extend(other_readings(zoned.zone_map, given, samples, mapped.surfaces, grid, settings))
    found.extend(_override_notes(settings.overrides))
    record = RunRecord(
        field=field,
        grid=grid,
        samples=samples,
        surfaces=mapped.surfaces,
        cell_need=assessed.need,
        prescription=rated.prescription,
        settings=settings,
        findings=_once(found),
        recognised=inputs.recognised,
        assumptions=assumptions_of(found),
        inputs_sha256=inputs.inputs_sha256,
        versions=versions(),
    )
    return _fitted(record)


def _zones(
    inputs: Inputs,
    grid: CellGrid,
    mapped: Mapped,
    assessed: Assessed,
    settings: RunSettings,
    *,
    progress: Progress,
) -> Zoned:
    """Zones for the assessed cells; each plan is judged by what it would do under every limit."""
    from schorl.steps.rating import plan_outcome
    from schorl.steps.zoning import draw_zones

    cell_ha = inputs.field.area_ha / grid.n_cells

    def outcome(labels: Counts) -> PlanOutcome:
        return plan_outcome(labels, assessed.need, settings, cell_ha=cell_ha)

    return draw_zones(
        inputs.field, grid, inputs.samples, mapped.surfaces, assessed.need,
        sample_need_kg_ha=assessed.sample_need_kg_ha, outcome=outcome, settings=settings,
        seed=settings.seed, progress=progress,
    )  # fmt: skip


def _fitted(record: RunRecord) -> RunRecord:
    """The record with zones that its controller's profile allows; as it is without one."""
    from schorl.steps.adapting import Change, adapt

    profile = record.settings.profile
    if profile is None:
        return record
    return adapt(record, Change(profile=profile), source="").record


def _keep(found: list[Finding], more: tuple[Finding, ...]) -> None:
    """Take findings in; stop the run where one of them says so."""
    found.extend(more)
    if errors_among(more):
        raise Refusal(found)


def _once(found: list[Finding]) -> tuple[Finding, ...]:
    return tuple(dict.fromkeys(found))


def _override_notes(overrides: tuple[Override, ...]) -> list[Finding]:
    return [
        finding(
            "JOB-OVERRIDE",
            where="job",
            what=f"{one.what} set to {one.value:g} {one.unit} by {one.person}"
            + (f": {one.reason}" if one.reason else ""),
        )
        for one in overrides
    ]


def assumptions_of(found: list[Finding]) -> tuple[str, ...]:
    """The sentences of all notes that tell of a default or an assumption."""
    return tuple(
        dict.fromkeys(one.what for one in found if one.code in ("JOB-DEFAULT", "JOB-NEXT-CROP"))
    )


def versions() -> dict[str, str]:
    """Versions of everything that can change a figure."""
    said = {"schorl": __version__, "python": platform.python_version()}
    for name in LIBRARIES:
        try:
            said[name] = version(name)
        except PackageNotFoundError:
            said[name] = "absent"
    return said


def pack_name(record: RunRecord) -> str:
    """Name of the pack's folder: field and season in a safe alphabet."""
    from schorl.formats.pack import safe_name

    return safe_name(f"{record.settings.field_name}-{record.settings.season}")


def write_record(
    record: RunRecord, folder: Path, *, replace_old: bool, progress: Progress = silent
) -> PackWritten:
    """Report, job sheet, rate map and all prescription files of a record, as one whole pack."""
    from schorl.formats.pack import prescription_files, write_pack
    from schorl.report.figures import rate_map_png
    from schorl.report.job_sheet import job_sheet
    from schorl.report.page import report_page

    progress("report", 0, 3)
    extras = {"report.html": report_page(record)}
    progress("report", 1, 3)
    extras["job_sheet.pdf"] = job_sheet(record, files=prescription_files(record))
    progress("report", 2, 3)
    extras["rate_map.png"] = rate_map_png(record)
    progress("files", 0, 1)
    written = write_pack(record, folder, extras=extras, replace=replace_old)
    progress("files", 1, 1)
    return written

"""From a written pack and checks of leaves to an answer, and a pack of the pass where there is one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from itertools import pairwise
from pathlib import Path
from typing import Any

from schorl.agronomy.crops import crop_named
from schorl.agronomy.tissue_checks import leaf_range
from schorl.errors import Refusal, UsageProblem
from schorl.findings import finding
from schorl.intake.tissue import read_tissue
from schorl.jobs import check_job
from schorl.model.settings import Form, Override
from schorl.model.tissue import LeafRange
from schorl.run.adapting import read_sections
from schorl.run.packs import named_source, whole_record
from schorl.run.settings import machine_of, product_of
from schorl.steps.leaf_pass import LeafAnswer, LeafJob, check_leaves


@dataclass(frozen=True, slots=True, kw_only=True)
class LeafWanted:
    """What a person says about a foliar pass; ``range_row`` names a row of the table of leaves."""

    product: Mapping[str, Any]  # keys of a job's [product]
    machine_file: Path | None = None
    range_row: str | None = None
    deficient_below: float | None = None
    sufficient_from: float | None = None
    toxic_above: float | None = None
    by: str = ""
    dose_kg_ha: float | None = None
    season: str | None = None


def tissue_answer(folder: Path, table: Path, wanted: LeafWanted) -> LeafAnswer:
    """Judge the zones of a pack by a table of leaf checks.

    Raises
    ------
    UsageProblem
        A liquid product is not given, an own range without a person, keys or values that are
        not known (exit 2).
    Refusal
        The pack or table cannot be taken up (exit 3), or there is no range (exit 4).
    """
    record = whole_record(folder)
    reading = read_tissue(table, field=record.field)
    if reading.value is None:
        raise Refusal(reading.findings)
    crop = crop_named(record.settings.crop.crop).name
    held, override = _range(crop, wanted)
    said = read_sections(wanted.machine_file) if wanted.machine_file else {}
    values = {
        "machine": said.get("machine", {}),
        "product": {**said.get("product", {}), **wanted.product, "form": "spray"},
    }
    job = check_job(values, where="tissue")
    if job.product.boron_g_l is None and job.product.boron_pct is None:
        what = "the liquid's share of boron is not given"
        hint = "give `--boron-g-l X`, or `--boron-pct X` with `--density-kg-l X`"
        raise UsageProblem([finding("JOB-MISSING", where="tissue", what=what, hint=hint)])
    machine = machine_of(job)
    if "working_width_m" not in values["machine"]:
        width = record.settings.machine.working_width_m
        machine = replace(machine, working_width_m=width)
    return check_leaves(
        record,
        reading.value,
        LeafJob(
            held=held, product=replace(product_of(job), form=Form.SPRAY), machine=machine,
            season=wanted.season or f"{record.settings.season}-leaves",
            dose_kg_ha=wanted.dose_kg_ha, override=override,
        ),
        source=named_source(folder),
    )  # fmt: skip


def _check_order(low: float | None, enough: float | None, toxic: float | None) -> None:
    """Deficient, sufficient and toxic leaf boron must rise."""
    named = [("deficient below", low), ("sufficient from", enough), ("toxic above", toxic)]
    given = [(name, value) for name, value in named if value is not None]
    faults = [
        f"{name} {value:g} lies above {other} {next_value:g}"
        for (name, value), (other, next_value) in pairwise(given)
        if value > next_value
    ]
    if faults:
        raise UsageProblem([finding("JOB-VALUE", where="tissue", what=what) for what in faults])


def _range(crop: str, wanted: LeafWanted) -> tuple[LeafRange, Override | None]:
    own = (wanted.deficient_below, wanted.sufficient_from)
    if own == (None, None):
        if wanted.toxic_above is not None:
            what = f"toxic above {wanted.toxic_above:g} mg/kg alone is no range"
            hint = "give `--deficient-below X` or `--sufficient-from X` with it"
            raise UsageProblem([finding("JOB-VALUE", where="tissue", what=what, hint=hint)])
        return leaf_range(crop, row=wanted.range_row), None
    if wanted.range_row is not None:
        what = f"both the row `{wanted.range_row}` of the table and an own range were given"
        hint = "give one of the two"
        raise UsageProblem([finding("JOB-VALUE", where="tissue", what=what, hint=hint)])
    if not wanted.by.strip():
        what = "an own range of leaf boron needs the person who answers for it"
        raise UsageProblem([finding("JOB-MISSING", where="tissue", what=what, hint="give `--by`")])
    low, enough = own
    _check_order(low, enough, wanted.toxic_above)
    held = LeafRange(
        part="as sampled", stage="", deficient_below=low, sufficient_from=enough,
        toxic_above=wanted.toxic_above, row=f"own range of {wanted.by}", status="own",
        source=wanted.by,
    )  # fmt: skip
    value = low if low is not None else float(enough or 0.0)
    override = Override(
        what="leaf range", value=value, unit="mg/kg dry matter", person=wanted.by,
        reason=f"{crop}: no row of the table was used",
    )  # fmt: skip
    return held, override

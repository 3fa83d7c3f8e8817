"""From packs of several seasons to comparisons, and from those to a written folder."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from pathlib import Path

from schorl.agronomy.crops import removal_g_t, removal_row
from schorl.errors import Refusal, UsageProblem
from schorl.findings import Finding, finding
from schorl.formats.change import write_change
from schorl.formats.whole_folder import Rows
from schorl.formats.writing import safe_name
from schorl.intake.applied import read_applied
from schorl.model.change import SeasonChange, SeasonPack
from schorl.model.change_summary import several
from schorl.model.progress import Progress, silent
from schorl.model.record import RunRecord
from schorl.model.settings import AppliedBoron
from schorl.run.packs import identity_of, whole_record
from schorl.run.prescribing import versions
from schorl.steps.comparing import compare
from schorl.steps.season_pack import season_pack

MANY = 2
APPLIED_HINTS = {
    "IN-UNIT": 'say --applied-unit "kg B/ha", or "kg/ha" of product with --boron-pct',
    "IN-COLUMN": "name the column with --applied-column",
}


@dataclass(frozen=True, kw_only=True)
class Given:
    """What a person adds to packs: as-applied files and yields, by season."""

    applied: Mapping[str, Path]
    column: str | None = None
    unit: str | None = None
    boron_pct: float | None = None
    yield_t_ha: Mapping[str, float] | None = None


def compare_packs(
    folders: Sequence[Path],
    given: Given,
    *,
    same_place_m: float,
    seed: int = 0,
    progress: Progress = silent,
) -> tuple[SeasonChange, ...]:
    """Compare each pack with the next.

    Raises
    ------
    UsageProblem
        Fewer than two packs, or a season that no pack has (exit 2).
    Refusal
        A pack is not whole (exit 3), or the fields share no ground (exit 4).
    """
    if len(folders) < MANY:
        what = f"{len(folders)} pack given; a comparison needs two or more"
        raise UsageProblem([finding("JOB-MISSING", where="compare", what=what)])
    records = [whole_record(one) for one in folders]
    _check_seasons(given, [one.settings.season for one in records])
    crs = records[0].field.crs
    packs = [
        _season(record, identity_of(folder), given, crs)
        for folder, record in zip(folders, records, strict=True)
    ]
    return tuple(
        _noted(compare(one, other, seed=seed, same_place_m=same_place_m, progress=progress))
        for one, other in pairwise(packs)
    )


def _check_seasons(given: Given, seasons: Sequence[str]) -> None:
    named = {*given.applied, *(given.yield_t_ha or {})}
    strange = sorted(named - set(seasons))
    if strange:
        what = f"no pack is of season `{strange[0]}`; the packs are of {', '.join(seasons)}"
        raise UsageProblem([finding("JOB-VALUE", where="compare", what=what)])


def _season(record: RunRecord, identity: str, given: Given, crs: str) -> SeasonPack:
    pack = season_pack(record, identity=identity, crs=crs)
    applied, notes = _applied(record, pack, given.applied.get(pack.season), given)
    removed = _removed(pack, (given.yield_t_ha or {}).get(pack.season))
    return replace(pack, applied=applied, removed_kg_ha=removed, findings=notes)


def _applied(
    record: RunRecord, pack: SeasonPack, path: Path | None, given: Given
) -> tuple[AppliedBoron | None, tuple[Finding, ...]]:
    if path is None:
        return None, ()
    field = replace(record.field, boundary=pack.boundary, crs=pack.crs)
    reading = read_applied(
        path, field=field, on=None, column=given.column, unit=given.unit,
        boron_pct=given.boron_pct, form="", this_season=False, width_m=pack.working_width_m,
    )  # fmt: skip
    if reading.value is None:
        raise Refusal([_as_option(one) for one in reading.findings])
    return reading.value, reading.findings


def _as_option(found: Finding) -> Finding:
    """The finding with a way out on the command line, where the reader speaks of a job file."""
    hint = APPLIED_HINTS.get(found.code, found.hint)
    return finding(found.code, where=found.where, what=found.what, hint=hint)


def _removed(pack: SeasonPack, yield_t_ha: float | None) -> float | None:
    """Boron that the crop took away, from its yield and the table of removals."""
    if yield_t_ha is None:
        return None
    grams = removal_g_t(pack.crop)
    if grams is None:
        what = f"there is no figure for the boron that `{pack.crop}` takes away"
        hint = "leave --yield-t-ha out for this season"
        raise UsageProblem([finding("JOB-VALUE", where="--yield-t-ha", what=what, hint=hint)])
    return grams * yield_t_ha / 1000.0


def _noted(change: SeasonChange) -> SeasonChange:
    """The comparison with notes on the order of the packs and on what was given."""
    notes = list(change.findings)
    if change.before.when > change.after.when:
        what = f"{change.before.season} is later than {change.after.season}"
        notes.append(finding("SEASON-ORDER", where="compare", what=what))
    notes += _removal_notes(change.before)
    earlier = min(change.before, change.after, key=lambda one: one.when)
    if earlier.applied is None and not change.same:
        what = f"boron of {earlier.season} counts as prescribed"
        notes.append(finding("SEASON-APPLIED", where=earlier.season, what=what))
    return replace(change, findings=tuple(notes))


def _removal_notes(pack: SeasonPack) -> list[Finding]:
    """The row behind the boron that a crop took away, with how far it was checked."""
    row = None if pack.removed_kg_ha is None else removal_row(pack.crop)
    if row is None:
        return []
    what = f"removal: {row['id']} {row['g_b_t']} {row['unit']} ({row['status']})"
    return [finding("SEASON-REMOVAL", where=pack.season, what=what)]


def change_name(changes: Sequence[SeasonChange]) -> str:
    """Name of a comparison's folder: the field, the first and the last season."""
    first, last = changes[0].before, changes[-1].after
    return safe_name(f"{first.field_name}-{first.season}-to-{last.season}")


def write_changes(changes: Sequence[SeasonChange], folder: Path, *, replace_old: bool) -> Rows:
    """The last comparison's files and one page for all of them."""
    from schorl.report.compare_page import compare_page

    return write_change(
        changes[-1], folder, extras={"compare.html": compare_page(changes)}, replace=replace_old,
        versions=versions(), result=several(changes),
    )  # fmt: skip

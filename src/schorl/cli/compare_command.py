"""`schorl compare`: season to season."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from schorl.cli.frame import Answer, Manner, folder_part, run_command, with_manner

FILE = click.Path(path_type=Path)
EPILOG = """\b
Examples:
  schorl compare packs/Long-Acre-2025 packs/Long-Acre-2026 --out packs
  schorl compare packs/Long-Acre-2025 packs/Long-Acre-2026 \\
      --applied 2025=spread.geojson --applied-unit "kg B/ha" --yield-t-ha 2025=68
"""


class SeasonValue(click.ParamType):  # type: ignore[type-arg]
    """SEASON=VALUE, the value of another type."""

    name = "SEASON=VALUE"

    def __init__(self, inner: Any) -> None:
        self.inner = inner

    def convert(
        self, value: object, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[str, object]:
        """Split at the first equals sign."""
        season, sign, rest = str(value).partition("=")
        if not sign or not season or not rest:
            self.fail(f"`{value}` is not of the form SEASON=VALUE", param, ctx)
        return season, self.inner.convert(rest, param, ctx)


@click.command("compare", epilog=EPILOG, short_help="What changed between seasons, is it real?")
@click.argument("packs", nargs=-1, required=True, type=FILE)
@click.option("--out", type=FILE, default=None, help="Folder the comparison is written into.")
@click.option("--replace", is_flag=True, help="Put the comparison in the place of an older one.")
@click.option(
    "--applied",
    multiple=True,
    type=SeasonValue(FILE),
    help="As-applied file of a season; its rates count instead of what was prescribed.",
)
@click.option("--applied-column", type=str, help="Column with the rates [boron_kg_ha].")
@click.option("--applied-unit", type=str, help='Their unit: "kg B/ha", or "kg/ha" of product.')
@click.option("--boron-pct", type=float, help="Boron in that product, % by weight.")
@click.option(
    "--yield-t-ha",
    multiple=True,
    type=SeasonValue(click.FLOAT),
    help="Yield of a season, for the boron that the crop took away.",
)
@click.option(
    "--same-place-m",
    type=click.FloatRange(0, 100),
    default=10.0,
    show_default=True,
    help="Sites this close are one site.",
)
@with_manner
def command(
    packs: tuple[Path, ...],
    out: Path | None,
    replace: bool,
    as_json: bool,
    quiet: bool,
    verbose: int,
    **given: Any,
) -> None:
    """Compare packs of two or more seasons, in the order given.

    Zone means are tested at the sites of both seasons; what cannot be told from noise is not shown
    as a change. The page, the map of change, moved zones, check strips and sites to revisit are
    written whole or not at all.
    """  # fmt: skip
    manner = Manner(as_json=as_json, quiet=quiet, verbose=verbose)

    def work() -> Answer:
        from schorl.model.change_summary import several
        from schorl.report.change_words import change_table
        from schorl.run.comparing import Given, change_name, compare_packs, write_changes

        added = Given(
            applied=dict(given["applied"]), column=given["applied_column"],
            unit=given["applied_unit"], boron_pct=given["boron_pct"],
            yield_t_ha=dict(given["yield_t_ha"]),
        )  # fmt: skip
        changes = compare_packs(
            packs, added, same_place_m=given["same_place_m"], progress=manner.progress
        )
        folder = (out or packs[0].parent) / change_name(changes)
        rows = write_changes(changes, folder, replace_old=replace)
        text = "\n\n".join(change_table(one) for one in changes) + f"\nwritten: {folder}"
        found = tuple(dict.fromkeys(note for one in changes for note in one.findings))
        result = several(changes) | {"written": folder_part(folder, rows)}
        return Answer(result=result, text=text, findings=found)

    run_command("compare", manner, work)

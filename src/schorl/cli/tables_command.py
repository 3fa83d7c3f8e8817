"""`schorl tables`: every figure with its source."""

from __future__ import annotations

import textwrap

import click

from schorl.cli.frame import Answer, Manner, run_command, with_manner
from schorl.errors import UsageProblem
from schorl.findings import finding

EPILOG = """\b
Examples:
  schorl tables
  schorl tables crops
"""


@click.command("tables", epilog=EPILOG, short_help="Figures with their sources.")
@click.argument("name", required=False)
@with_manner
def command(name: str | None, as_json: bool, quiet: bool, verbose: int) -> None:
    """List the tables of figures, or print one with its sources.

    Each row says whether it was read at its source, recalled from memory, computed, is a proposal
    of this program, or common practice without a source.
    """
    manner = Manner(as_json=as_json, quiet=quiet, verbose=verbose)
    run_command("tables", manner, lambda: _one(name) if name else _all())


def _all() -> Answer:
    from schorl.agronomy.tables import table, table_names

    sizes = {name: len(table(name)) for name in table_names()}
    lines = [f"{name:<28}{size:>4} rows" for name, size in sizes.items()]
    return Answer(result={"tables": sizes}, text="\n".join(lines))


def _one(name: str) -> Answer:
    from schorl.agronomy.tables import table, table_names

    if name not in table_names():
        known = ", ".join(table_names())
        raise UsageProblem(
            [
                finding(
                    "JOB-CODE",
                    where="tables",
                    what=f"there is no table `{name}`",
                    hint=f"one of {known}",
                )
            ]
        )
    rows = [dict(row) for row in table(name)]
    return Answer(result={"name": name, "rows": rows}, text="\n\n".join(map(_row_text, rows)))


def _row_text(row: dict[str, str]) -> str:
    cells = [f"{key}: {value}" for key, value in row.items() if value]
    return textwrap.fill("; ".join(cells), width=96, subsequent_indent="    ")

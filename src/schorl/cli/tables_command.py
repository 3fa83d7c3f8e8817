"""`schorl tables`: every figure with its source."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping

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


def _tables() -> dict[str, tuple[Mapping[str, str], ...]]:
    """Rows of all tables, of agronomy and of machines, by name."""
    from schorl.agronomy import tables as of_agronomy
    from schorl.machinery import tables as of_machines

    rows = {name: tuple(of_agronomy.table(name)) for name in of_agronomy.table_names()}
    rows |= {name: tuple(of_machines.table(name).values()) for name in of_machines.table_names()}
    return dict(sorted(rows.items()))


def _all() -> Answer:
    sizes = {name: len(rows) for name, rows in _tables().items()}
    lines = [f"{name:<28}{size:>4} rows" for name, size in sizes.items()]
    return Answer(result={"tables": sizes}, text="\n".join(lines))


def _one(name: str) -> Answer:
    tables = _tables()
    if name not in tables:
        known = ", ".join(tables)
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
    rows = [dict(row) for row in tables[name]]
    return Answer(result={"name": name, "rows": rows}, text="\n\n".join(map(_row_text, rows)))


def _row_text(row: dict[str, str]) -> str:
    cells = [f"{key}: {value}" for key, value in row.items() if value]
    return textwrap.fill("; ".join(cells), width=96, subsequent_indent="    ")

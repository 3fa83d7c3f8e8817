"""`schorl explain`: a finding in full."""

from __future__ import annotations

import difflib

import click

from schorl.cli.frame import Answer, Manner, run_command, with_manner
from schorl.errors import UsageProblem
from schorl.findings import CatalogueEntry, catalogue, finding

EPILOG = """\b
Examples:
  schorl explain JOB-NEXT-CROP
  schorl explain
"""


@click.command("explain", epilog=EPILOG, short_help="Explain a finding code.")
@click.argument("code", required=False)
@with_manner
def command(code: str | None, as_json: bool, quiet: bool, verbose: int) -> None:
    """Explain a finding code in full; without a code, list them all."""
    manner = Manner(as_json=as_json, quiet=quiet, verbose=verbose)
    run_command("explain", manner, lambda: _one(code) if code else _all())


def _one(code: str) -> Answer:
    entry = catalogue().get(code.upper())
    if entry is None:
        near = difflib.get_close_matches(code.upper(), list(catalogue()), n=3, cutoff=0.4)
        raise UsageProblem(
            [
                finding(
                    "JOB-CODE",
                    where="explain",
                    what=f"`{code}` is not a finding code",
                    hint=f"nearest: {', '.join(near)}" if near else "",
                )
            ]
        )
    return Answer(result=_row(entry), text=_text(entry))


def _all() -> Answer:
    entries = [catalogue()[code] for code in sorted(catalogue())]
    lines = [f"{entry.code:<22}{entry.severity:<9}{entry.title}" for entry in entries]
    return Answer(result={"codes": [_row(entry) for entry in entries]}, text="\n".join(lines))


def _row(entry: CatalogueEntry) -> dict[str, object]:
    return {
        "code": entry.code,
        "severity": str(entry.severity),
        "exit": entry.exit,
        "title": entry.title,
        "explanation": entry.explanation,
        "way_out": entry.way_out,
    }


def _text(entry: CatalogueEntry) -> str:
    stops = f" (stops with exit {entry.exit})" if entry.exit else ""
    return (
        f"{entry.code}: {entry.title}\n{entry.severity}{stops}\n\n"
        f"{entry.explanation}\n\nway out: {entry.way_out}"
    )

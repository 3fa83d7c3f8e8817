"""`schorl verify`: is it whole, valid, and what the record says."""

from __future__ import annotations

from pathlib import Path

import click

from schorl.cli.frame import Answer, Manner, run_command, with_manner

EPILOG = """\b
Examples:
  schorl verify packs/Long-Acre-2026
  schorl verify stick/TASKDATA --boundary boundary.geojson
"""


@click.command("verify", epilog=EPILOG, short_help="Is a pack or file whole and valid?")
@click.argument("pack_or_file", type=click.Path(path_type=Path))
@click.option("--boundary", type=click.Path(path_type=Path), help="Field boundary to hold it to.")
@with_manner
def command(
    pack_or_file: Path, boundary: Path | None, as_json: bool, quiet: bool, verbose: int
) -> None:
    """Say whether a pack or file is whole, valid and what its record says.

    Exit 0 where it is, 1 where it is not: each fault is named with its file and place.
    """
    manner = Manner(as_json=as_json, quiet=quiet, verbose=verbose)

    def work() -> Answer:
        from schorl.formats.verify import verify

        seen = verify(pack_or_file, boundary=boundary)
        faults = [
            {"file": fault.file, "place": fault.place, "what": fault.what} for fault in seen.faults
        ]
        lines = [f"{fault['file']}: {fault['place']}: {fault['what']}" for fault in faults]
        last = "whole, valid and as recorded" if seen.whole else f"not whole: {len(faults)} faults"
        return Answer(
            result={"whole": seen.whole, "faults": faults, "record": seen.record},
            text="\n".join([*lines, f"{pack_or_file}: {last}"]),
            ok=seen.whole,
        )

    run_command("verify", manner, work)

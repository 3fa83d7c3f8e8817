"""`schorl prescribe`: the whole way."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from schorl.cli.frame import Answer, Manner, folder_part, run_command, with_manner
from schorl.cli.options import job_of, with_facts

EPILOG = """\b
Examples:
  schorl prescribe sample_fields/long_acre/2026 --out packs
  schorl prescribe --boundary field.geojson --samples soil.csv --depth-cm 20 \\
      --method "hot water" --crop "sugar beet" --form granule --boron-pct 10
"""


@click.command("prescribe", epilog=EPILOG, short_help="Make the prescription.")
@click.argument("job", required=False, type=click.Path(path_type=Path))
@click.option(
    "--out",
    type=click.Path(path_type=Path, file_okay=False),
    default=None,
    help="Folder the pack is written into [the job's folder].",
)
@click.option("--replace", is_flag=True, help="Put the new pack in the place of an older one.")
@with_facts
@with_manner
def command(
    job: Path | None,
    out: Path | None,
    replace: bool,
    as_json: bool,
    quiet: bool,
    verbose: int,
    **facts: Any,
) -> None:
    """Make the prescription: surfaces, zones, rates, files, report.

    JOB is a folder with a job.toml, or the file itself; options say the same facts and win over
    it. The pack is written whole or not at all, and nothing is overwritten without --replace.
    """
    manner = Manner(as_json=as_json, quiet=quiet, verbose=verbose)

    def work() -> Answer:
        from schorl.model.summary import summary
        from schorl.report.words import closing_table
        from schorl.run.inputs import read_inputs
        from schorl.run.prescribing import pack_name, survey, write_record

        checked, folder = job_of(job, facts)
        inputs = read_inputs(checked, folder)
        target_folder = out or folder
        record = survey(inputs, progress=manner.progress)
        target = target_folder / pack_name(record)
        written = write_record(record, target, replace_old=replace, progress=manner.progress)
        result = summary(record) | {"pack": folder_part(written.folder, written.files)}
        text = closing_table(record) + f"\npack: {written.folder}"
        return Answer(result=result, text=text, findings=record.findings)

    run_command("prescribe", manner, work)

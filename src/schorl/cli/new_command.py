"""`schorl new`: a job file with all that was recognised."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from schorl.cli.frame import Answer, Manner, run_command, with_manner
from schorl.cli.options import given_facts, with_facts
from schorl.errors import OutputProblem, UsageProblem
from schorl.findings import errors_among, finding
from schorl.jobs import check_job, job_text, lay_over

EPILOG = """\b
Examples:
  schorl new long_acre --boundary boundary.geojson --samples soil.csv --crop "sugar beet" \\
      --method "hot water" --depth-cm 20 --form granule --boron-pct 10
"""


@click.command("new", epilog=EPILOG, short_help="Write a job file.")
@click.argument("folder", type=click.Path(path_type=Path, file_okay=False))
@click.option("--replace", is_flag=True, help="Write over an older job file.")
@with_facts
@with_manner
def command(
    folder: Path, replace: bool, as_json: bool, quiet: bool, verbose: int, **facts: Any
) -> None:
    """Write FOLDER/job.toml from a boundary and a laboratory file.

    Says what was recognised in the files, and lists every assumption that was made.
    """
    manner = Manner(as_json=as_json, quiet=quiet, verbose=max(verbose, 0 if quiet else 1))

    def work() -> Answer:
        from schorl.formats.writing import write_whole
        from schorl.run.inputs import read_inputs
        from schorl.run.prescribing import assumptions_of

        target = folder / "job.toml"
        if target.exists() and not replace:
            raise UsageProblem(
                [finding("JOB-THERE", where=str(target), what="there is a job file already")]
            )
        values = lay_over({}, given_facts(facts, relative_to=folder))
        checked = check_job(values, where="options")
        inputs = read_inputs(checked, folder)
        full = checked.model_copy(update={"field": inputs.settings.field_name})
        try:
            folder.mkdir(parents=True, exist_ok=True)
            write_whole(target, job_text(full).encode("utf-8"))
        except OSError as reason:
            raise OutputProblem(
                [finding("OUT-WRITE", where=str(target), what=f"cannot be written: {reason}")]
            ) from None
        recognised = [
            {"what": one.what, "where": one.where, "how": one.how} for one in inputs.recognised
        ]
        assumptions = assumptions_of(list(inputs.findings))
        lines = [f"{one['what']}: {one['how']} ({one['where']})" for one in recognised]
        lines += [f"assumed: {one}" for one in assumptions]
        lines.append(f"job: {target}")
        return Answer(
            result={
                "job": str(target),
                "recognised": recognised,
                "assumptions": list(assumptions),
            },
            text="\n".join(lines),
            findings=inputs.findings,
            ok=not errors_among(inputs.findings),
        )

    run_command("new", manner, work)

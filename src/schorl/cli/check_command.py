"""`schorl check`: findings only."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from schorl.cli.frame import Answer, Manner, run_command, with_manner
from schorl.cli.options import job_of, with_facts
from schorl.errors import SchorlError
from schorl.findings import Finding, errors_among

EPILOG = """\b
Examples:
  schorl check sample_fields/long_acre/2026
  schorl check --boundary field.geojson --samples soil.csv --method "hot water" --depth-cm 20 \\
      --crop "sugar beet" --form granule --boron-pct 10
"""


@click.command("check", epilog=EPILOG, short_help="List everything the checks notice.")
@click.argument("job", required=False, type=click.Path(path_type=Path))
@with_facts
@with_manner
def command(job: Path | None, as_json: bool, quiet: bool, verbose: int, **facts: Any) -> None:
    """List everything the checks notice, without writing anything.

    Exit 0 where `prescribe` would go through, 1 where a finding would stop it; each finding
    carries the exit that `prescribe` would end with.
    """
    manner = Manner(as_json=as_json, quiet=quiet, verbose=max(verbose, 0 if quiet else 1))

    def work() -> Answer:
        findings = _all_findings(job, facts, manner)
        bad = errors_among(findings)
        counts = {
            severity: sum(one.severity == severity for one in findings)
            for severity in ("error", "warning", "note")
        }
        exit_code = min((one.exit for one in bad if one.exit), default=0)
        result = {"counts": counts, "prescribe_exit": exit_code}
        words = ", ".join(f"{count} {name}{'s' * (count != 1)}" for name, count in counts.items())
        verdict = "a prescription can be made" if not bad else "a prescription cannot be made"
        return Answer(result=result, text=f"{words}: {verdict}", findings=findings, ok=not bad)

    run_command("check", manner, work)


def _all_findings(job: Path | None, facts: dict[str, Any], manner: Manner) -> tuple[Finding, ...]:
    from schorl.run.inputs import read_inputs
    from schorl.run.prescribing import survey

    checked, folder = job_of(job, facts)
    try:
        return survey(read_inputs(checked, folder), progress=manner.progress).findings
    except SchorlError as problem:
        if problem.exit_code not in (3, 4):
            raise
        return tuple(one for one in problem.findings if isinstance(one, Finding))

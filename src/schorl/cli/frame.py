"""The frame around every command: streams, words for findings, exit codes.

The result goes to stdout (with ``--json`` exactly one JSON document), all else to stderr. This is
the one place that turns errors into exit codes; what is not a ``SchorlError`` is a bug of ours.
"""

from __future__ import annotations

import json
import os
import signal
import sys
import traceback
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NoReturn

import click

from schorl.errors import Exit, SchorlError
from schorl.findings import Finding, Severity, finding
from schorl.model.progress import Progress, silent
from schorl.model.summary import SCHEMA, finding_row

MARKS = {Severity.ERROR: "error", Severity.WARNING: "warning", Severity.NOTE: "note"}
COLOURS = {Severity.ERROR: "red", Severity.WARNING: "yellow", Severity.NOTE: None}


@dataclass(frozen=True, kw_only=True)
class Answer:
    """What a command found out."""

    result: dict[str, Any]
    text: str
    findings: tuple[Finding, ...] = ()
    ok: bool = True


@dataclass(frozen=True, kw_only=True)
class Manner:
    """How a command talks: JSON or words, how much."""

    as_json: bool
    quiet: bool
    verbose: int

    @property
    def progress(self) -> Progress:
        """A progress line on a terminal, silence elsewhere."""
        from schorl.cli.progress import terminal_progress

        return terminal_progress() if sys.stderr.isatty() and not self.quiet else silent


def folder_part(folder: Path, files: Sequence[tuple[str, int, str]]) -> dict[str, Any]:
    """A folder that was written, with path, bytes and checksum of its files."""
    rows = [{"path": path, "bytes": size, "sha256": sha256} for path, size, sha256 in files]
    return {"folder": str(folder), "files": rows}


def with_manner(command: Callable[..., Any]) -> Callable[..., Any]:
    """Add the options that all commands share."""
    for option in (
        click.option("--json", "as_json", is_flag=True, help="One JSON document on stdout."),
        click.option("-q", "--quiet", is_flag=True, help="Only errors and the result."),
        click.option("-v", "--verbose", count=True, help="Notes too, each with its way out."),
    ):
        command = option(command)
    return command


def run_command(
    name: str, manner: Manner, work: Callable[[], Answer], *, no_exit: int = Exit.ANSWER_IS_NO
) -> NoReturn:
    """Run a command's work, show its answer, and leave with the right exit code."""
    signal.signal(signal.SIGTERM, _terminated)
    try:
        answer = work()
    except SchorlError as problem:
        _leave_with_findings(name, manner, problem)
    except KeyboardInterrupt:
        _say_line("interrupted; nothing half-written is left")
        sys.exit(Exit.INTERRUPTED)
    except MemoryError:
        short = finding("RUN-MEMORY", where="run", what="there is not enough memory")
        _leave_with_findings(name, manner, SchorlError([short]))
    except Exception as bug:
        _leave_with_bug(name, manner, bug)
    _show(name, manner, answer)
    sys.exit(Exit.DONE if answer.ok else no_exit)


def _terminated(_number: int, _frame: Any) -> NoReturn:
    _say_line("terminated; nothing half-written is left")
    sys.exit(Exit.TERMINATED)


def _show(name: str, manner: Manner, answer: Answer) -> None:
    if manner.as_json:
        _write_json(name, ok=answer.ok, findings=answer.findings, result=answer.result)
        return
    say_findings(answer.findings, manner)
    sys.stdout.write(answer.text.rstrip("\n") + "\n" if answer.text else "")
    sys.stdout.flush()


def _write_json(
    name: str, *, ok: bool, findings: Sequence[Finding], result: dict[str, Any]
) -> None:
    document = {
        "schema": SCHEMA,
        "command": name,
        "ok": ok,
        "findings": [finding_row(one) for one in findings],
        "result": result,
    }
    sys.stdout.write(json.dumps(document, sort_keys=True, allow_nan=False) + "\n")
    sys.stdout.flush()


def say_findings(findings: Sequence[Finding], manner: Manner) -> None:
    """Findings on stderr, errors last so that they stay in sight; notes only when asked for."""
    order = [Severity.NOTE, Severity.WARNING, Severity.ERROR]
    shown = order if manner.verbose else order[1:]
    if manner.quiet:
        shown = order[2:]
    for severity in shown:
        for one in findings:
            if one.severity is severity:
                _say_finding(one)
    hidden = sum(one.severity is Severity.NOTE for one in findings)
    if hidden and not manner.verbose and not manner.quiet:
        _say_line(f"{hidden} note{'s' if hidden > 1 else ''}; `-v` shows them")


def _say_finding(one: Finding) -> None:
    mark = click.style(MARKS[one.severity], fg=COLOURS[one.severity], bold=True)
    _say_line(f"{mark} [{one.code}] {one.where}: {one.what}")
    if one.hint:
        _say_line(f"  way out: {one.hint}")


def _say_line(text: str) -> None:
    plain = bool(os.environ.get("NO_COLOR")) or not sys.stderr.isatty()
    click.echo(click.unstyle(text) if plain else text, err=True, color=not plain)


def _leave_with_findings(name: str, manner: Manner, problem: SchorlError) -> NoReturn:
    findings = tuple(one for one in problem.findings if isinstance(one, Finding))
    if manner.as_json:
        result = {"exit": problem.exit_code}
        _write_json(name, ok=False, findings=findings, result=result)
    else:
        say_findings(findings, manner)
        _say_line(_last_word(problem.exit_code))
    sys.exit(problem.exit_code)


def _last_word(code: int) -> str:
    words = {
        Exit.USAGE: "nothing was done: the command or the job needs the facts named above",
        Exit.NOT_UNDERSTOOD: "nothing was written: the input above cannot be understood safely",
        Exit.NO_HONEST_ANSWER: "no prescription: an honest or safe rate cannot be given from this",
        Exit.NOT_WRITTEN: "nothing was left half-written; an older pack stands as it was",
        Exit.OUR_BUG: "this is a fault of Schorl; please report it with the lines above",
    }
    return next((said for exit_code, said in words.items() if exit_code == code), "stopped")


def _leave_with_bug(name: str, manner: Manner, bug: Exception) -> NoReturn:
    _say_line(f"schorl {name} failed by a fault of its own: {type(bug).__name__}: {bug}")
    _say_line("please report it with the version (`schorl --version`); `-vv` shows where it was")
    if manner.verbose > 1:
        _say_line("".join(traceback.format_exception(bug)))
    if manner.as_json:
        _write_json(name, ok=False, findings=(), result={"exit": int(Exit.OUR_BUG)})
    sys.exit(Exit.OUR_BUG)

"""`schorl tables`: every figure with its source."""

from __future__ import annotations

import textwrap
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence

import click

from schorl.cli.frame import Answer, Manner, run_command, with_manner
from schorl.errors import UsageProblem
from schorl.findings import finding
from schorl.model.sourced import COMMON, STATUSES

EPILOG = """\b
Examples:
  schorl tables
  schorl tables crops
  schorl tables class_limits
"""
WIDTH = 80
#: Columns of the list of tables: heading and the status it counts.
SHORT = {
    "read": "read",
    "second": "second-hand",
    "memory": "memory",
    "comput.": "computed",
    "propos.": "proposal",
    "common": "common practice",
}
#: Columns that are printed as lines of their own, with what stands before them.
SENTENCES = {
    "text": "", "saying": "", "aliases": "also: ", "crops": "for: ", "used_for": "used for: ",
    "published": "published: ", "note": "",
}  # fmt: skip
LABELS = {
    "clay_pct": "at clay %", "clay_from_pct": "clay from %", "clay_below_pct": "clay below %",
    "temperature_c": "at °C", "sensitive_next": "sensitive as next crop", "g_b_t": "boron",
    "rate_cap_kg_ha": "cap", "boron_pct": "boron %", "sand_pct": "sand %",
    "ceiling_mg_kg": "ceiling", "target_mg_kg": "target", "limits_apply": "built-in limits apply",
}  # fmt: skip
#: What goes without saying.
UNTOLD = {
    ("crops", "all"), ("organic", "no"), ("clay_from_pct", "0"), ("clay_below_pct", "101"), ("perennial", "no"),
}  # fmt: skip
Tables = Mapping[str, Sequence[Mapping[str, str]]]


@click.command("tables", epilog=EPILOG, short_help="Figures with their sources.")
@click.argument("name", required=False)
@with_manner
def command(name: str | None, as_json: bool, quiet: bool, verbose: int) -> None:
    """List the tables of figures, or print one with its sources.

    Each row says whether it was read at its source, read second-hand, recalled from memory,
    computed, is a proposal of this program, or common practice without a source.
    """
    manner = Manner(as_json=as_json, quiet=quiet, verbose=verbose)
    run_command("tables", manner, lambda: _one(name) if name else _all())


def _tables() -> Tables:
    """Rows of all tables, of agronomy and of machines, by name."""
    from schorl.agronomy import tables as of_agronomy
    from schorl.machinery import tables as of_machines

    rows = {name: of_agronomy.table(name) for name in of_agronomy.table_names()}
    rows |= {name: tuple(of_machines.table(name).values()) for name in of_machines.table_names()}
    return dict(sorted(rows.items()))


def _all() -> Answer:
    from schorl.agronomy.targets import regions

    tables = _tables()
    counts = {name: Counter(row["status"] for row in rows) for name, rows in tables.items()}
    result = {
        "tables": {name: len(rows) for name, rows in tables.items()},
        "statuses": {name: {word: count[word] for word in STATUSES} for name, count in counts.items()},
        "meaning": dict(STATUSES),
        "interpretations": ["crop need", "texture line", "class table", "own"],
        "regions": list(regions()),
    }  # fmt: skip
    return Answer(result=result, text="\n".join(_list_lines(counts, regions())))


def _list_lines(counts: Mapping[str, Counter[str]], regions: Sequence[str]) -> Iterator[str]:
    layout = "{:<16}{:>6}" + "{:>9}" * len(SHORT)
    yield layout.format("table", "rows", *SHORT)
    for name, count in counts.items():
        each = [count[word] or "·" for word in SHORT.values()]
        yield layout.format(name, count.total(), *each)
    yield ""
    yield "What the words promise:"
    for word, promise in STATUSES.items():
        yield from _wrapped(f"{word}: {promise}", "  ")
    yield ""
    said = f'Class limits to choose with `--interpretation "class table" --region NAME`: {", ".join(regions)}.'
    yield from _wrapped(said)
    yield "`schorl tables NAME` prints a table with its sources; `--json` all of it."


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


def _row_text(row: Mapping[str, str]) -> str:
    """A row in at most 80 columns: its name, its figures, its standing and source, its address."""
    figures = [
        f"{LABELS.get(key, key.replace('_', ' '))} {value}"
        for key, value in row.items()
        if value
        and key not in (*COMMON, *SENTENCES, "value")
        and (key, value) not in UNTOLD
        and value != row["id"]
    ]
    unit = "" if row["unit"] == "-" else f" [{row['unit']}]"
    if "value" in row:
        figures, unit = [f"{row['value']} {row['unit']}", *figures], ""
    said = f"{row['id']}: {'; '.join(figures)}" if figures else row["id"]
    lines = _wrapped(said + unit, "", "    ")
    for key, label in SENTENCES.items():
        if row.get(key) and (key, row[key]) not in UNTOLD:
            lines += _wrapped(label + row[key].replace("|", ", "), "    ")
    if row["source"].startswith(row["status"]):
        lines += _wrapped(row["source"], "    ")
    else:
        lines += _wrapped(f"{row['status']}: {row['source']}", "    ")
    lines += [f"    {row['address']}"] if row["address"] else []
    return "\n".join(lines)


def _wrapped(said: str, first: str = "", rest: str | None = None) -> list[str]:
    return textwrap.wrap(
        said, WIDTH, initial_indent=first, subsequent_indent=first if rest is None else rest,
        break_on_hyphens=False,
    )  # fmt: skip

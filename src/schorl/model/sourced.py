"""Tables of figures with their sources: what a row must have, checked once when it is read.

Nothing is opened here: agronomy and machinery hand in the text of their own CSV files.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from itertools import pairwise
from types import MappingProxyType

Row = Mapping[str, str]

#: How far a figure was checked, in the words a reader sees, and what each word promises.
STATUSES: Mapping[str, str] = MappingProxyType(
    {
        "read": "read at its source, at the address given",
        "second-hand": "read in a work that quotes the source, the source itself was not opened",
        "memory": "recalled, not looked up: check before you lean on it",
        "computed": "worked out from definitions or from other rows",
        "proposal": "chosen by this program from the evidence named",
        "common practice": "said in the trade, no source found",
    }
)
#: Figures whose word a reader should see wherever they rule a rate.
UNSURE = frozenset({"memory", "proposal", "common practice"})
COMMON = ("id", "unit", "source", "status", "address")
NO_SOURCE = "no source"
ADDRESS = re.compile(r"https?://[^\s,]+\.[^\s,]+")
YEAR = re.compile(r"\b(1[89]|20)\d\d\b")


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """What a column may hold: words, one of a few words, or a number between two ends."""

    number: bool = False
    needed: bool = True
    least: float = float("-inf")
    most: float = float("inf")
    choices: frozenset[str] = frozenset()

    def faults(self, text: str) -> Iterator[str]:
        """What is wrong with a cell."""
        if not text:
            if self.needed:
                yield "is empty"
        elif self.choices and text not in self.choices:
            yield f"`{text}` is not one of {', '.join(sorted(self.choices))}"
        elif self.number:
            yield from self._number_faults(text)

    def _number_faults(self, text: str) -> Iterator[str]:
        try:
            value = float(text)
        except ValueError:
            yield f"`{text}` is not a number"
            return
        if not self.least <= value <= self.most:
            yield f"{text} is outside {self.least:g} to {self.most:g}"


def words(*choices: str, needed: bool = True) -> Column:
    """A column of words, of any or of the few that are named."""
    return Column(needed=needed, choices=frozenset(choices))


def number(least: float, most: float, *, needed: bool = True) -> Column:
    """A column of numbers between two ends."""
    return Column(number=True, least=least, most=most, needed=needed)


@dataclass(frozen=True, slots=True, kw_only=True)
class Schema:
    """A table's columns besides the common ones, its units, and what must rise.

    ``rising`` names columns whose numbers must not fall from left to right in a row; ``stepping``
    a grouping column and a number that must rise from row to row within a group. ``more`` looks at
    the rows together.
    """

    columns: Mapping[str, Column] = field(default_factory=dict)
    units: frozenset[str] = frozenset()
    rising: tuple[str, ...] = ()
    stepping: tuple[str, str] | None = None
    more: Callable[[Sequence[Row]], Iterator[str]] | None = None


def read_rows(name: str, text: str, schema: Schema | None) -> tuple[Row, ...]:
    """Rows of a CSV text in order, each checked; only the common columns without a schema.

    Raises
    ------
    ValueError
        All faults of the table at once: a fault of the package, never of a user.
    """
    reader = csv.DictReader(text.splitlines(), restkey="", restval="")
    rows = tuple(MappingProxyType(dict(row)) for row in reader)
    faults = list(_table_faults(rows, tuple(reader.fieldnames or ()), schema))
    if faults:
        raise ValueError(f"table {name}: " + "; ".join(faults))
    return rows


def _table_faults(
    rows: Sequence[Row], header: Sequence[str], schema: Schema | None
) -> Iterator[str]:
    wanted = (*COMMON, *(schema.columns if schema else ()))
    missing = [column for column in wanted if column not in header]
    if missing:
        yield f"no column {', '.join(missing)}"
        return
    if schema and (extra := sorted(set(header) - set(wanted))):
        yield f"a column more than the schema knows: {', '.join(extra)}"
    seen: set[str] = set()
    for row in rows:
        if row["id"] in seen:
            yield f"row `{row['id']}` stands twice"
        seen.add(row["id"])
        yield from (f"row `{row['id']}`: {fault}" for fault in _row_faults(row, schema))
    if schema:
        yield from _faults_across(rows, schema)


def _row_faults(row: Row, schema: Schema | None) -> Iterator[str]:
    if "" in row:
        yield "more cells than columns"
    yield from _source_faults(row)
    if schema is None:
        return
    if schema.units and row["unit"] not in schema.units:
        yield f"unit `{row['unit']}` is not one of {', '.join(sorted(schema.units))}"
    for name, column in schema.columns.items():
        yield from (f"{name} {fault}" for fault in column.faults(row[name]))
    yield from _order_faults(row, schema.rising)


def _source_faults(row: Row) -> Iterator[str]:
    """A row that says `read` must say where; a fact of the trade must not pretend a source."""
    yield from (f"{name} is empty" for name in ("id", "unit", "source") if not row[name])
    status, address = row["status"], row["address"]
    if status not in STATUSES:
        yield f"status `{status}` is not one of {', '.join(STATUSES)}"
    if address and not ADDRESS.fullmatch(address):
        yield f"address `{address}` is not an address"
    if status == "read" and not address:
        yield "status read without an address"
    if status == "second-hand" and not address and not YEAR.search(row["source"]):
        yield "status second-hand without an address or a dated work"
    if status == "common practice" and (address or NO_SOURCE not in row["source"]):
        yield f"common practice must say `{NO_SOURCE}` and have no address"


def _order_faults(row: Row, names: Sequence[str]) -> Iterator[str]:
    given = [(name, value) for name in names if (value := _value(row[name])) is not None]
    for (left, low), (right, high) in pairwise(given):
        if low > high:
            yield f"{left} {low:g} is above {right} {high:g}"


def _faults_across(rows: Sequence[Row], schema: Schema) -> Iterator[str]:
    if schema.stepping:
        group, step = schema.stepping
        last: dict[str, float] = {}
        for row in rows:
            value = _value(row[step])
            if value is None:
                continue
            if row[group] in last and value <= last[row[group]]:
                yield f"row `{row['id']}`: {step} {value:g} does not rise within {row[group]}"
            last[row[group]] = value
    if schema.more:
        yield from schema.more(rows)


def _value(text: str) -> float | None:
    try:
        return float(text)
    except ValueError:
        return None


def key_of(name: str, row_id: str) -> str:
    """How a row is named wherever its figure is shown: "crops: sugar beet"."""
    return f"{name}: {row_id}"


def traced(name: str, row: Row, value: str) -> dict[str, str]:
    """A figure as a report shows it: where it stands, its status, source and address."""
    return {
        "key": key_of(name, row["id"]),
        "table": name,
        "row": row["id"],
        "value": value,
        "unit": row["unit"],
        "status": row["status"],
        "source": row["source"],
        "address": row["address"],
    }

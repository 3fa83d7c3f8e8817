"""Laboratory tables as rows of text, whatever the file: delimiter, encoding, preamble."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from schorl.intake.guards import Unreadable, checked_bytes, refuse, refuse_xml_tricks, unpacked
from schorl.intake.headers import recognise
from schorl.intake.quantities import plain_words, unit_named

TABLE_SUFFIXES = {".csv", ".txt", ".tsv", ".xlsx"}
#: First words of rows that sum up the samples above them.
SUMMARIES = frozenset(
    {
        "mean", "average", "avg", "total", "totals", "sum", "min", "minimum", "max", "maximum",
        "median", "sd", "std", "stdev", "cv", "count", "mittelwert", "mittel", "durchschnitt",
        "summe", "gesamt", "moyenne", "somme", "media", "promedio", "suma", "somma", "gemiddelde",
        "totaal", "medel", "summa", "srednia",
    }
)  # fmt: skip
MOST_ROWS = 60_000
MOST_CELLS = 3_000_000  # of the rectangle that a sheet's filled cells span


@dataclass(frozen=True, kw_only=True)
class Table:
    """A table with its header; ``lines`` says where each row stands in the file."""

    source: str
    headers: tuple[str, ...]
    units: tuple[str, ...]  # a unit row's cells, or empty strings
    rows: tuple[tuple[str, ...], ...]
    lines: tuple[int, ...]
    decimal_comma: bool
    how: str
    footer: tuple[tuple[int, str], ...] = ()  # lines under the samples that are none, left out


def _soil_columns(row: Sequence[str]) -> int:
    """How many cells of a row name something of a soil test."""
    return len({one.what for one in recognise(row)})


def read_table(
    path: Path, *, layer: str | None, known: Callable[[Sequence[str]], int] = _soil_columns
) -> Table:
    """Read a CSV or XLSX file; the row of names is the one of which ``known`` knows most cells.

    Raises
    ------
    Unreadable
        With the finding: encoding, several sheets, no header that is understood, too many rows.
    """
    data = checked_bytes(path)
    if path.suffix.lower() == ".xlsx":
        raw, how, comma = _sheet(path, data, layer), "spreadsheet", True
    else:
        text, encoding = _decoded(path, data)
        delimiter = _delimiter(text)
        raw = _split(path, text, delimiter)
        comma = _decimal_comma(raw, delimiter)
        named = {",": "comma", ";": "semicolon", "\t": "tab"}[delimiter]
        how = f"{encoding}, {named}, decimal {'comma' if comma else 'point'}"
    if len(raw) > MOST_ROWS:
        raise refuse("IN-ROWS", path, f"{len(raw)} rows; at most {MOST_ROWS} are read")
    aligned = path.suffix.lower() == ".xlsx"
    return _with_header(path, raw, comma, how, aligned=aligned, known=known)


def _decoded(path: Path, data: bytes) -> tuple[str, str]:
    marks = [(b"\xef\xbb\xbf", "utf-8-sig"), (b"\xff\xfe", "utf-16"), (b"\xfe\xff", "utf-16")]
    for mark, encoding in marks:
        if data.startswith(mark):
            try:
                return data.decode(encoding), encoding
            except UnicodeDecodeError as reason:
                raise refuse("IN-ENCODING", path, f"not {encoding}: {reason}") from None
    try:
        text = data.decode("utf-8")
        if "\0" not in text:
            return text, "utf-8"
    except UnicodeDecodeError:
        pass
    if b"\0" in data:
        what = "binary content where text is expected"
        if _wide_letters(data):
            what = "the text is UTF-16 without its byte order mark, so its letters cannot be told"
        raise refuse("IN-ENCODING", path, what)
    return data.decode("cp1252", errors="replace"), "latin-1"


def _wide_letters(data: bytes) -> bool:
    """Whether every other byte of the first lines is nought, as in plain letters of two bytes."""
    start = data[:2000]
    halves = [start[0::2].count(0), start[1::2].count(0)]
    return max(halves) > 0.8 * (len(start) // 2) and min(halves) == 0


def _split(path: Path, text: str, delimiter: str) -> list[list[str]]:
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
    try:
        return list(reader)
    except csv.Error as reason:
        what = f"line {reader.line_num}: a cell cannot be read ({reason})"
        raise refuse("IN-BROKEN", path, what, "mend the quotation marks of that line") from None


def _delimiter(text: str) -> str:
    lines = [line[:4000] for line in text.splitlines() if line.strip()][:40]
    score = {}
    for mark in (";", "\t", ","):
        counts = [len(next(csv.reader([line], delimiter=mark))) for line in lines]
        widest = max(counts, default=0)
        score[mark] = (sum(count == widest for count in counts) if widest > 1 else 0, widest)
    return max(score, key=lambda mark: (score[mark][0] * min(score[mark][1], 3), mark != ","))


def _decimal_comma(raw: list[list[str]], delimiter: str) -> bool:
    if delimiter == ",":
        quoted = [cell for row in raw for cell in row if _looks_decimal(cell, ",")]
        return len(quoted) > 0 and not any(_looks_decimal(c, ".") for row in raw for c in row)
    return any(_looks_decimal(cell, ",") for row in raw for cell in row)


def _looks_decimal(cell: str, mark: str) -> bool:
    text = cell.strip().lstrip("<≤=+- ").strip()
    head, found, tail = text.partition(mark)
    return bool(found) and head.isdigit() and tail.isdigit()


def _sheet(path: Path, data: bytes, layer: str | None) -> list[list[str]]:
    from python_calamine import CalamineWorkbook

    for name, member in unpacked(path, data).items():
        if name.lower().endswith((".xml", ".rels")):
            refuse_xml_tricks(path, member)
        if name.lower().startswith("xl/worksheets/"):
            _refuse_wide_sheet(path, member)
        if name.lower().endswith((".zip", ".xlsx")):
            raise refuse("IN-ARCHIVE", path, f"an archive within the spreadsheet: {name}")
    try:
        book = CalamineWorkbook.from_filelike(io.BytesIO(data))
        names = list(book.sheet_names)
        full = [name for name in names if book.get_sheet_by_name(name).to_python()]
        chosen = layer if layer is not None else (full[0] if len(full) == 1 else None)
        if chosen is None or chosen not in names:
            raise refuse(
                "IN-LAYERS",
                path,
                f"{len(full)} sheets with content: {', '.join(names)}",
                "name one with `--samples-layer`",
            )
        return [
            [_cell_text(cell) for cell in row] for row in book.get_sheet_by_name(chosen).to_python()
        ]
    except Unreadable:
        raise
    except Exception as reason:  # the reader's many kinds of failure all mean: not readable
        raise refuse("IN-BROKEN", path, f"not a readable spreadsheet: {reason}") from None


def _refuse_wide_sheet(path: Path, content: bytes) -> None:
    """Few cells can span a rectangle of billions, which the reader would lay out in memory."""
    column, row = 1 + content.count(b"<c>"), 1
    for letters, number in re.findall(
        rb"<(?:\w+:)?c\s[^>]*?\br=\"([A-Z]{1,4})(\d{1,9})\"", content
    ):
        index = 0
        for letter in letters:
            index = index * 26 + letter - 64
        column, row = max(column, index), max(row, int(number))
    row = max([row, *map(int, re.findall(rb"<(?:\w+:)?row\s[^>]*?\br=\"(\d{1,9})\"", content))])
    if column * row > MOST_CELLS:
        what = f"a sheet spans {row} rows by {column} columns, mostly empty"
        raise refuse("IN-ARCHIVE", path, what, "copy the table alone into a new sheet")


def _cell_text(cell: object) -> str:
    if isinstance(cell, bool):
        return str(cell)
    if isinstance(cell, float):
        return repr(int(cell)) if cell.is_integer() else repr(cell)
    return "" if cell is None else str(cell)


def _with_header(
    path: Path,
    raw: list[list[str]],
    comma: bool,
    how: str,
    *,
    aligned: bool,
    known: Callable[[Sequence[str]], int],
) -> Table:
    best, place = 0, -1
    for line, row in enumerate(raw[:60]):
        understood = known(row)
        if understood > best:
            best, place = understood, line
    if best < 2:
        first = next((row for row in raw if any(cell.strip() for cell in row)), [])
        shown = ", ".join(f"`{cell.strip()}`" for cell in first[:8] if cell.strip())
        raise refuse("IN-HEADER", path, f"no row of column names is understood; it begins {shown}")
    headers = [cell.strip() for cell in raw[place]]
    body = list(enumerate(raw[place + 1 :], start=place + 2))
    units = [""] * len(headers)
    if body and _is_unit_row(body[0][1]):
        units = _fitted(body[0][1], len(headers))
        body = body[1:]
    kept = [(line, row) for line, row in body if any(cell.strip() for cell in row)]
    kept, footer = _without_footer(kept, len(headers))
    if not aligned:
        _refuse_ragged(path, kept, headers)
    return Table(
        source=path.name,
        headers=tuple(headers),
        units=tuple(units),
        rows=tuple(tuple(_fitted(row, len(headers))) for _, row in kept),
        lines=tuple(line for line, _ in kept),
        decimal_comma=comma,
        how=how,
        footer=footer,
    )


def _without_footer(
    body: list[tuple[int, list[str]]], width: int
) -> tuple[list[tuple[int, list[str]]], tuple[tuple[int, str], ...]]:
    """Rows without the sums, means and remarks that stand under them."""
    end = len(body)
    while end and _is_footer(body[end - 1][1], width):
        end -= 1
    # A table of remarks only is no table: better say what is missing in its rows.
    end = end or len(body)
    said = [(line, next(cell.strip() for cell in row if cell.strip())) for line, row in body[end:]]
    return body[:end], tuple(said)


def _is_footer(row: list[str], width: int) -> bool:
    filled = [cell.strip() for cell in row if cell.strip()]
    # The word alone, "Mean:" or "Mean (n = 24)": a sample may well be called "Media luna".
    summary = re.sub(r"\s*[:=(].*", "", plain_words(filled[0])).strip(" .") in SUMMARIES
    lone = len(filled) == 1 and width > 2 and not filled[0].replace(".", "").isdigit()
    return summary or lone


def _refuse_ragged(path: Path, body: list[tuple[int, list[str]]], headers: list[str]) -> None:
    """A row with more or fewer cells than the header has its values in wrong columns."""
    width = max(place for place, header in enumerate(headers, start=1) if header)
    odd = []
    for line, row in body:
        cells = max([width, *(place for place, one in enumerate(row, start=1) if one.strip())])
        if cells > width or 1 < len(row) < width:
            odd.append((line, max(cells, width) if cells > width else len(row)))
    if odd:
        more = f" (and {len(odd) - 1} more lines)" if len(odd) > 1 else ""
        what = f"line {odd[0][0]}{more} has {odd[0][1]} cells where the header has {width}"
        raise refuse("IN-RAGGED", path, what)


def _is_unit_row(row: list[str]) -> bool:
    cells = [cell.strip() for cell in row if cell.strip()]
    named = [cell for cell in cells if unit_named(cell)]
    numbers = [cell for cell in cells if cell.replace(".", "").replace(",", "").isdigit()]
    return len(named) >= 1 and not numbers and len(named) >= len(cells) / 3


def _fitted(row: list[str] | tuple[str, ...], width: int) -> list[str]:
    return [cell.strip() for cell in (*row, *[""] * width)][:width]

"""A laboratory's marks: a figure is read as it was meant, or asked about, and never otherwise."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from schorl.intake.draft import Draft
from schorl.intake.headers import recognise
from schorl.intake.lab_tables import Table
from schorl.intake.values import measured_values
from schorl.model.reading import SampleHints

#: Decimal mark and mark of thousands, as laboratories and spreadsheets print them.
STYLES = st.sampled_from([(".", ""), (",", ""), (".", ","), (",", "."), (".", "."), (",", ",")])
FIGURES = st.lists(st.tuples(st.integers(0, 9_999_999), st.integers(0, 4)), min_size=1, max_size=8)


def printed(whole: int, places: int, decimal: str, thousands: str) -> str:
    """A figure of so many decimals as a sheet prints it."""
    head, tail = divmod(whole, 10**places)
    said = f"{head:,}".replace(",", thousands)
    return said + (f"{decimal}{tail:0{places}d}" if places else "")


def read(cells: list[str], place: str, *, decimal_comma: bool):
    """Calcium read from a column of cells beside a column with a coordinate."""
    table = Table(
        source="s.csv",
        headers=("sample", "longitude", "Ca (mg/kg)"),
        units=("", "", ""),
        rows=tuple((f"S{n}", place, cell) for n, cell in enumerate(cells)),
        lines=tuple(range(2, 2 + len(cells))),
        decimal_comma=decimal_comma,
        how="utf-8, semicolon",
    )
    column = next(one for one in recognise(table.headers) if one.what == "calcium")
    draft = Draft(source="s.csv")
    got = measured_values(
        table, column, "calcium", list(range(len(cells))), tuple("x" * len(cells)),
        hints=SampleHints(), draft=draft,
    )  # fmt: skip
    return got, draft


@given(figures=FIGURES, style=STYLES, exact=st.booleans())
@settings(max_examples=1000, deadline=None)
def test_never_another_figure(figures, style, exact):
    decimal, thousands = style
    if thousands == decimal:  # no sheet parts both with one mark
        thousands = ""
    if exact:  # one number of decimals down the column, as most sheets print
        figures = [(whole, figures[0][1]) for whole, _ in figures]
    cells = [printed(whole, places, decimal, thousands) for whole, places in figures]
    place = f"13{decimal}7249851"
    marks = {mark for cell in [*cells, place] for mark in cell if mark in ",."}
    got, draft = read(cells, place, decimal_comma="," in marks)
    if got is None or draft.broken:
        assert {one.code for one in draft.findings} <= {"IN-THOUSANDS", "IN-NOT-NUMBER"}
        return
    meant = np.array([whole / 10**places for whole, places in figures])
    assert np.allclose(got.measured.values, meant)


@given(whole=st.integers(0, 9999), places=st.integers(0, 4), style=st.sampled_from([".", ","]))
@settings(max_examples=300, deadline=None)
def test_sheets_without_marks_of_thousands_are_always_read(whole, places, style):
    """One mark all through the table leaves nothing to ask."""
    cell = printed(whole, places, style, "")
    got, draft = read([cell], f"13{style}7249851", decimal_comma=style == ",")
    assert not draft.broken
    assert got.measured.values[0] == whole / 10**places

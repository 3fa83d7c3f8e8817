"""Tables of figures: every way a row can be wrong is said, and all of them at once."""

from __future__ import annotations

import pytest

from schorl.agronomy.schemas import SCHEMAS
from schorl.agronomy.tables import table
from schorl.model.sourced import COMMON, Schema, number, read_rows, words

SCHEMA = Schema(
    columns={"low": number(0, 5, needed=False), "high": number(0, 5), "group": words("a", "b")},
    units=frozenset({"mg/kg"}),
    rising=("low", "high"),
    stepping=("group", "high"),
)
HEADER = "id,low,high,group,unit,source,status,address"
GOOD = "one,0.5,1.0,a,mg/kg,Someone 1999,read,https://example.org/a"


def faults(*rows: str, header: str = HEADER) -> str:
    with pytest.raises(ValueError, match="table t: ") as said:
        read_rows("t", "\n".join([header, *rows]), SCHEMA)
    return str(said.value)


def test_a_sound_table_is_read_in_order():
    rows = read_rows(
        "t", "\n".join([HEADER, GOOD, GOOD.replace("one", "two").replace("1.0", "2")]), SCHEMA
    )
    assert [row["id"] for row in rows] == ["one", "two"]
    with pytest.raises(TypeError):
        rows[0]["high"] = "9"  # type: ignore[index]


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("mg/kg", "", "unit is empty"),
        ("mg/kg", "ppm", "unit `ppm` is not one of mg/kg"),
        ("Someone 1999", "", "source is empty"),
        ("read", "READ", "status `READ` is not one of read, second-hand"),
        ("https://example.org/a", "", "status read without an address"),
        ("https://example.org/a", "index id 123", "is not an address"),
        ("1.0", "", "high is empty"),
        ("1.0", "much", "high `much` is not a number"),
        ("1.0", "nan", "high nan is outside 0 to 5"),
        ("1.0", "5.1", "high 5.1 is outside 0 to 5"),
        ("0.5", "1.5", "low 1.5 is above high 1"),
        (",a,", ",c,", "group `c` is not one of a, b"),
        ("read,https://example.org/a", "second-hand,", ""),
        ("Someone 1999,read,https://example.org/a", "someone,second-hand,", "or a dated work"),
        ("Someone 1999,read,https://example.org/a", "the trade,common practice,", "no source"),
        (",read,", ",common practice,", "must say `no source` and have no address"),
        ("/a", "/a,more", "more cells than columns"),
    ],
)  # fmt: skip
def test_every_broken_cell_is_named(old, new, said):
    row = GOOD.replace(old, new)
    if not said:
        assert read_rows("t", f"{HEADER}\n{row}", SCHEMA)
        return
    assert said in faults(row)


def test_faults_come_together():
    said = faults(GOOD, GOOD, GOOD.replace("one", "two").replace("1.0", "0.7"))
    assert "row `one` stands twice" in said
    assert "row `two`: high 0.7 does not rise within a" in said


def test_columns_must_be_those_of_the_schema():
    assert "no column group" in faults(header=HEADER.replace("group,", ""))
    assert "more than the schema knows: extra" in faults(f"{GOOD},x", header=f"{HEADER},extra")
    assert read_rows("t", f"{','.join(COMMON)},extra\na,-,s 2001,memory,,x", None)


def broken(name: str, row_id: str, **cells: str) -> str:
    """What the loader says of a real table with some cells of one row changed."""
    held = [{**row, **(cells if row["id"] == row_id else {})} for row in table(name)]
    assert any(row["id"] == row_id for row in held)
    lines = [",".join(held[0])]
    lines += [
        ",".join('"' + cell.replace('"', '""') + '"' for cell in row.values()) for row in held
    ]
    with pytest.raises(ValueError, match=f"table {name}") as said:
        read_rows(name, "\n".join(lines), SCHEMAS[name])
    return str(said.value)


@pytest.mark.parametrize(
    ("name", "row_id", "cells", "said"),
    [
        ("crops", "wheat", {"rate_cap_kg_ha": "1.12"}, "a crop of low need has a cap above 0.56"),
        ("crops", "dry bean", {"rate_cap_kg_ha": "0.56"}, "a very sensitive crop gets no boron"),
        ("crops", "sugar beet", {"rate_cap_kg_ha": "3.36"}, "outside 0 to 2.24"),
        ("crops", "sugar beet", {"aliases": "maize"}, "`maize` names both"),
        ("crops", "sugar beet", {"ceiling_class": "sensitive"}, "a tolerant crop under the ceiling"),
        ("ceilings", "texture-4", {"ceiling_mg_kg": "3.5"}, "outside 0.5 to 3"),
        ("ceilings", "texture-2", {"clay_pct": "6"}, "clay_pct 6 does not rise within texture"),
        ("targets", "high-2", {"target_mg_kg": "2.5"}, "outside 0.1 to 2"),
        ("class_limits", "denmark", {"high_from": "0.2"}, "adequate_from 0.31 is above high_from"),
        ("class_limits", "program-loam", {"clay_from_pct": "12"}, "leave a gap or overlap"),
        ("class_limits", "program-sand", {"clay_from_pct": "1"}, "does not cover all clay"),
        ("class_limits", "program-sand", {"clay_from_pct": ""}, "without clay contents"),
        ("class_limits", "wisconsin-1", {"method": "mehlich-3"}, "more than one method"),
        ("class_limits", "india", {"unit": "lb/acre"}, "unit `lb/acre` is not one of"),
        ("methods", "mehlich-1", {"aliases": "m3"}, "`m3` names both"),
        ("methods", "mehlich-1", {"aliases": "M1"}, "is not in small letters"),
        ("trade_facts", "texture line", {"status": "read"}, "status read without an address"),
    ],
)  # fmt: skip
def test_a_figure_that_cannot_be_true_never_loads(name, row_id, cells, said):
    assert said in broken(name, row_id, **cells)

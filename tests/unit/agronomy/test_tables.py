"""The program's own tables: their sources can be followed and their names are those of the trade."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import schorl
from schorl.agronomy import tables as of_agronomy
from schorl.agronomy.crops import crop_named
from schorl.agronomy.methods import is_hot_water, method_row, same_method
from schorl.agronomy.schemas import SCHEMAS
from schorl.agronomy.targets import class_rows, regions
from schorl.errors import UsageProblem
from schorl.intake.headers import METHOD_WORDS
from schorl.machinery import tables as of_machines
from schorl.model.sourced import STATUSES

ROWS = [(name, row) for name in of_agronomy.table_names() for row in of_agronomy.table(name)] + [
    (name, row) for name in of_machines.table_names() for row in of_machines.table(name).values()
]
#: Shops, suppliers, mirrors of encyclopedias, sites of copied documents and indexes of code.
NO_SOURCE = re.compile(
    r"scribd|studylib|docplayer|docslib|eurekamag|peeref|biocyclopedia|what-when-how|zxc\.wiki"
    r"|druglead|how234|borichem|chempure|bluebay|suisco|dincat|louiskatz|apug|\bshop\b|code index"
    r"|public file|index id|lfweb",
)


def test_every_table_has_a_schema():
    assert set(SCHEMAS) <= set(of_agronomy.table_names())
    assert set(of_machines.SCHEMAS) == set(of_machines.table_names())


def test_no_row_leans_on_a_shop_or_a_copied_page():
    leaning = [
        (name, row["id"])
        for name, row in ROWS
        if NO_SOURCE.search(row["address"].lower()) or NO_SOURCE.search(row["source"].lower())
    ]
    assert not leaning


def test_every_status_word_is_used_and_explained():
    assert {row["status"] for _, row in ROWS} == set(STATUSES)


def test_what_only_the_trade_says_stays_visible():
    facts = {row["id"]: row for row in of_agronomy.table("trade_facts")}
    for name in ("texture line", "young and old leaves", "brix overnight", "total boron"):
        assert facts[name]["status"] == "common practice"
        assert facts[name]["published"]


def test_crops_are_many_and_each_says_what_its_classes_rest_on():
    rows = of_agronomy.table("crops")
    assert len(rows) >= 50
    for row in rows:
        assert re.search(r"need: .+; tolerance: .+", row["source"]), row["id"]
        # A tolerance that nobody could look up never opens the higher ceilings of tolerant crops
        # to a crop of high need.
        if row["tolerance_status"] == "none" and row["need"] == "high":
            assert row["ceiling_class"] == "sensitive"


@pytest.mark.parametrize(
    ("written", "row_id"),
    [
        ("Hot Water", "hot water"),
        ("HWS-B", "hot water"),
        ("hot_water", "hot water"),
        ("Eau  bouillante", "hot water"),
        ("Bortal", "hot water"),
        ("Heißwasser", "hot water"),
        ("Mehlich III", "mehlich-3"),
        ("M-3", "mehlich-3"),
        ("DTPA/Sorbitol", "dtpa-sorbitol"),
        ("CaCl2/DTPA", "cat"),
        ("Königswasser", "total"),
    ],
)
def test_methods_as_laboratories_write_them(written, row_id):
    row = method_row(written)
    assert row is not None
    assert row["id"] == row_id
    assert is_hot_water(written) == (row_id == "hot water")
    assert same_method(written, row_id)


def test_unknown_methods_are_not_guessed():
    assert method_row("resin strip") is None
    assert not is_hot_water("resin strip")
    assert same_method("Resin strip", "resin-strip")
    assert not same_method("mehlich-3", "hot water")


def test_the_reader_and_the_table_mean_the_same_methods():
    for method, names in METHOD_WORDS.items():
        for name in (method, *names):
            row = method_row(name)
            if row is not None:
                assert row["id"] == method, name
        assert method_row(method) is not None


def test_class_limits_are_for_crops_and_methods_that_exist():
    for region in regions():
        first = class_rows(region)[0]
        if first["crops"] != "all":
            for name in first["crops"].split("|"):
                assert crop_named(name).name == name
        assert first["method"] == "not named" or method_row(first["method"]) is not None


def test_no_limit_stands_in_the_tables_unused():
    code = "\n".join(
        path.read_text(encoding="utf-8") for path in Path(schorl.__file__).parent.rglob("*.py")
    )
    for name in ("limits", "machine_limits"):
        held = {row["id"] for table_name, row in ROWS if table_name == name}
        assert not {one for one in held if f'"{one}"' not in code}


@pytest.mark.parametrize(
    ("written", "name"),
    [
        ("Sugar Beets", "sugar beet"),
        ("winter oilseed rape", "oilseed rape (canola)"),
        ("Spring  Barley", "barley"),
        ("winter oats", "oats"),
        ("soybeans", "soybean"),
        ("peas", "field pea"),
        ("beans", "dry bean"),
        ("Ackerbohne", "faba bean"),
        ("Luzerne", "alfalfa (lucerne)"),
        ("strawberries", "strawberry"),
    ],
)
def test_crops_as_growers_write_them(written, name):
    assert crop_named(written).name == name


@pytest.mark.parametrize("written", ["field bean", "bohne", "s", "winter", "beat", "oilseed"])
def test_names_that_mean_two_crops_or_none_are_asked_about(written):
    """Field bean is a faba bean in Britain, which is fed, and a Phaseolus in America, which is not."""
    with pytest.raises(UsageProblem) as asked:
        crop_named(written)
    assert asked.value.findings[0].code == "RATE-CROP"

"""Leaf checks: ranges from the table, and what a zone's evidence comes to."""

from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from schorl.agronomy.tables import table
from schorl.agronomy.tissue_checks import leaf_range, leaf_ranges, zone_leaves
from schorl.errors import Refusal, UsageProblem
from schorl.model.tissue import LeafVerdict, TissueSample

ALFALFA = leaf_range("alfalfa (lucerne)", row="alfalfa top")  # deficient < 20, sufficient >= 30
ORDER = [LeafVerdict.WARRANTED, LeafVerdict.UNDECIDED, LeafVerdict.NOT, LeafVerdict.TOXIC]


def judged(*leaf, crop="alfalfa (lucerne)", held=ALFALFA, lab=0.05, **more):
    samples = [TissueSample(name=str(place), zone=1, leaf=one, **more)
               for place, one in enumerate(leaf)]  # fmt: skip
    return zone_leaves(1, samples, held, crop=crop, lab_relative=lab)


def test_ranges_are_those_of_the_table_and_name_crops_that_exist():
    crops = {row["id"] for row in table("crops")}
    for row in table("tissue"):
        assert set(row["crops"].split("|")) <= crops
    assert (ALFALFA.deficient_below, ALFALFA.sufficient_from) == (20, 30)
    assert len(leaf_ranges("alfalfa (lucerne)")) == 3


def test_which_range_is_asked_and_a_missing_one_is_refused():
    with pytest.raises(UsageProblem) as asked:
        leaf_range("alfalfa (lucerne)", row=None)
    assert "`alfalfa top third`" in asked.value.findings[0].hint
    with pytest.raises(Refusal) as refused:
        leaf_range("lentil", row=None)
    assert "--by" in refused.value.findings[0].hint
    with pytest.raises(Refusal):
        leaf_range("maize", row="maize leaf")  # tells only excess


@pytest.mark.parametrize(
    ("leaf", "verdict"),
    [
        ((15, 16, 14), LeafVerdict.WARRANTED),
        ((19.8, 20.1), LeafVerdict.UNDECIDED),  # at the edge
        ((25, 25, 25), LeafVerdict.UNDECIDED),  # marginal, no sign beside it
        ((35, 36), LeafVerdict.NOT),
        ((29.9, 30.3), LeafVerdict.UNDECIDED),
    ],
)
def test_leaf_boron_decides(leaf, verdict):
    assert judged(*leaf).verdict is verdict


def test_a_marginal_leaf_is_tipped_by_signs_but_they_decide_nothing_alone():
    tipped = judged(25, 25, 25, young=20, old=30)
    assert tipped.verdict is LeafVerdict.WARRANTED
    assert "common practice, no source" in tipped.why
    assert judged(25, 25, 25, brix_evening=8, brix_morning=8.5).verdict is LeafVerdict.WARRANTED
    assert judged(25, 25, 25, brix_evening=8, brix_morning=6).verdict is LeafVerdict.UNDECIDED
    assert judged(36, 36, young=20, old=30).verdict is LeafVerdict.NOT
    alone = judged(None, young=20, old=30, brix_evening=8, brix_morning=9)
    assert alone.verdict is LeafVerdict.UNDECIDED
    assert "analysed" in alone.why


def test_young_leaves_say_nothing_where_boron_moves_in_the_plant():
    held = replace(ALFALFA, row="own")
    assert judged(25, 25, 25, crop="apple", held=held, young=20, old=30).verdict is (
        LeafVerdict.UNDECIDED
    )


def test_too_much_is_called_out_before_all_else():
    held = leaf_range("tomato", row="tomato leaf")
    assert judged(190, crop="tomato", held=held).verdict is LeafVerdict.TOXIC
    assert judged(170, crop="tomato", held=held).verdict is LeafVerdict.TOXIC  # within its error


@given(
    leaf=st.lists(st.floats(1, 60), min_size=1, max_size=6),
    more=st.floats(0, 60),
    signs=st.booleans(),
)
def test_more_leaf_boron_never_asks_for_more(leaf, more, signs):
    extra = {"young": 20, "old": 30} if signs else {}
    first = judged(*leaf, **extra)
    second = judged(*(one + more for one in leaf), **extra)
    assert ORDER.index(second.verdict) >= ORDER.index(first.verdict)

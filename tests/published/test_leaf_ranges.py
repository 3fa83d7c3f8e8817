"""Leaf boron that publications call short, enough or too much gets that verdict here."""

from __future__ import annotations

import pytest

from schorl.agronomy.tissue_checks import leaf_range, zone_leaves
from schorl.model.tissue import LeafVerdict, TissueSample

SHORT, ENOUGH, EXCESS = LeafVerdict.WARRANTED, LeafVerdict.NOT, LeafVerdict.TOXIC
ALBERTA = "Alberta Agriculture, micronutrient requirements of crops, table 3 (scanned copy)"
CEREALS_1971 = "Can. J. Soil Sci. 51 (1971) 415-422, abstract"
CUTCLIFFE = "Gupta and Cutcliffe 1984, Can. J. Soil Sci. 64:571-576, abstract"
GUPTA_1983 = "Gupta 1983, boron deficiency and toxicity symptoms, abstract"
GOLDY = "R. Goldy, Michigan State University Extension 2013"
AGROCHEM = "Agrochemophysica 8(1), abstract"

#: crop, row of the table, mg/kg dry matter, what the publication says of it, publication
CASES = [
    ("alfalfa (lucerne)", "alfalfa top", 19, SHORT, ALBERTA),
    ("alfalfa (lucerne)", "alfalfa top", 31, ENOUGH, ALBERTA),
    ("wheat", "cereal shoot", 2.8, SHORT, ALBERTA),
    ("rye", "cereal shoot", 5.2, ENOUGH, ALBERTA),
    ("oilseed rape (canola)", "rape shoot", 19, SHORT, ALBERTA),
    ("wheat", "wheat boot shoot", 4.8, SHORT, CEREALS_1971),
    ("barley", "barley boot shoot", 8, ENOUGH, CEREALS_1971),
    ("barley", "barley boot shoot", 17, EXCESS, CEREALS_1971),
    ("oats", "oats boot shoot", 30, ENOUGH, CEREALS_1971),
    ("oats", "oats boot shoot", 36, EXCESS, CEREALS_1971),
    ("radish", "radish leaf", 8.5, SHORT, GUPTA_1983),
    ("tomato", "tomato leaf", 11.5, SHORT, GUPTA_1983),
    ("tomato", "tomato leaf", 175, EXCESS, GUPTA_1983),
    ("snap bean", "snap bean leaf", 128, EXCESS, GUPTA_1983),
    ("cabbage", "vegetable leaf", 210, EXCESS, GOLDY),
    ("sunflower", "sunflower leaf", 9, SHORT, AGROCHEM),
    ("sunflower", "sunflower leaf", 50, ENOUGH, AGROCHEM),
    ("sunflower", "sunflower seedling", 96, EXCESS, AGROCHEM),
]  # fmt: skip


@pytest.mark.parametrize(("crop", "row", "leaf", "verdict", "source"), CASES)
def test_verdicts_are_those_of_the_publications(crop, row, leaf, verdict, source):
    held = leaf_range(crop, row=row)
    samples = [TissueSample(name=str(place), zone=1, leaf=leaf) for place in range(4)]
    seen = zone_leaves(1, samples, held, crop=crop, lab_relative=0.02)
    assert seen.verdict is verdict, source


def test_cabbage_of_16_had_no_deficiency_where_the_general_range_would_say_undecided():
    """Gupta and Cutcliffe saw none at 16 mg/kg: the range for vegetables in general is wider."""
    held = leaf_range("cabbage", row="vegetable leaf")
    samples = [TissueSample(name="a", zone=1, leaf=16.0)]
    seen = zone_leaves(1, samples, held, crop="cabbage", lab_relative=0.02)
    assert seen.verdict is LeafVerdict.UNDECIDED, CUTCLIFFE

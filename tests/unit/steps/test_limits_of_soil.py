"""Which rows a target and a ceiling come from, and what is said where they do not fit."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from schorl.agronomy.crops import crop_named
from schorl.agronomy.tables import limit
from schorl.errors import Refusal
from schorl.model.settings import Interpretation
from schorl.steps.limits_of_soil import (
    ceiling_for,
    class_limits_fit,
    class_limits_note,
    target_for,
    uses_class_table,
)
from support.one_soil import job, sampled

BEET = crop_named("sugar beet")
CLAYS = np.array([5.0, 10.0, 13.0, 20.0, 34.0, 50.0])
PLAIN = np.full(len(CLAYS), 2.0)
ORGANIC = limit("organic-from")


def rows(sources):
    return [row["row"] for row in sources]


def ceilings(clay, matter, next_crop="sugar beet"):
    found = ceiling_for(
        BEET, job("sugar beet", next_crop=next_crop), np.array(clay), np.array(matter), builtin=True
    )
    return found[0].tolist(), rows(found[1])


def test_rows_of_the_texture_ceiling_are_those_the_soils_lie_between():
    assert ceilings([5.0, 6.0], [2.0, 2.0]) == ([2.0, 2.0], ["texture-1"])
    assert ceilings([10.0], [2.0])[1] == ["texture-1", "texture-2"]
    assert ceilings([13.0], [2.0])[1] == ["texture-2"]  # at a point of the line: that one alone
    assert ceilings([20.0], [2.0])[1] == ["texture-2", "texture-3"]
    assert ceilings([50.0], [2.0]) == ([3.0], ["texture-4"])


def test_organic_ground_names_its_own_row_and_sensitive_crops_theirs():
    assert ceilings([20.0, 20.0], [2.0, ORGANIC + 1])[1] == ["organic", "texture-2", "texture-3"]
    assert ceilings([20.0], [ORGANIC + 1]) == ([3.0], ["organic"])
    assert ceilings([20.0], [ORGANIC])[1] == ["texture-2", "texture-3"]  # not organic yet
    assert ceilings([20.0, 50.0], [2.0, 2.0], "wheat") == ([2.0, 2.0], ["sensitive"])
    assert ceilings([5.0, 50.0], [2.0, 2.0], "wheat")[1] == ["sensitive"]
    assert ceilings([20.0], [ORGANIC + 1], "snap bean") == ([1.4], ["very-sensitive"])


def test_an_own_ceiling_is_held_to_the_lowest_of_the_field():
    def given(value, *overrides):
        settings = job("sugar beet", ceiling_mg_kg=value, overrides=overrides)
        return ceiling_for(BEET, settings, np.array([5.0, 50.0]), np.full(2, 2.0), builtin=True)

    values, sources = given(2.0)  # just the lowest of the two soils
    assert values.tolist() == [2.0, 2.0]
    assert sources[0]["key"] == "job: ceiling"
    assert sources[0]["value"] == "2"
    with pytest.raises(Refusal) as refused:
        given(2.5)
    assert "2.5 mg/kg is above the built-in 2" in refused.value.findings[0].what


def test_own_tables_name_the_soil_they_leave_out():
    own = {"interpretation": Interpretation.OWN, "own_targets": (("", 0.0, 20.0, 0.7),)}
    with pytest.raises(Refusal) as refused:
        target_for(BEET, job("sugar beet", **own), CLAYS, PLAIN)
    assert refused.value.findings[0].what == "no own target for clay 20 to 50 %"


def test_class_rows_in_use_are_all_named_and_organic_soil_has_its_own():
    settings = job("sugar beet", interpretation=Interpretation.CLASS_TABLE)
    target, sources = target_for(BEET, settings, np.array([5.0, 20.0]), np.full(2, 2.0))
    assert target.tolist() == [0.5, 0.8]
    assert rows(sources) == ["program-sand", "program-loam"]
    at_edge = target_for(BEET, settings, np.array([20.0]), np.array([ORGANIC]))[0]
    assert at_edge.tolist() == [0.8]
    organic, sources = target_for(BEET, settings, np.array([20.0]), np.array([ORGANIC + 1]))
    assert organic.tolist() == [1.0]
    assert "program-organic" in rows(sources)


def test_a_target_of_ones_own_takes_the_class_tables_place():
    table = job("sugar beet", interpretation=Interpretation.CLASS_TABLE)
    assert uses_class_table(table)
    own = replace(table, crop=replace(table.crop, target_mg_kg=0.8))
    assert not uses_class_table(own)
    assert not uses_class_table(job("sugar beet"))
    values, sources = target_for(BEET, own, CLAYS, PLAIN)
    assert set(values) == {0.8}
    assert sources[0]["key"] == "job: target"


def test_what_does_not_fit_is_said_in_words():
    named = job("sugar beet", interpretation=Interpretation.CLASS_TABLE)
    (found,) = class_limits_fit(sampled(0.5, method="mehlich-3"), named)
    assert "are for hot water, the samples for mehlich-3" in found.what
    (litre,) = class_limits_fit(sampled(0.5, per_volume=True), named)
    assert litre.what.endswith("in mg/kg, the samples are per litre of soil")
    germany = job("sugar beet", interpretation=Interpretation.CLASS_TABLE, region="germany")
    (unnamed,) = class_limits_fit(sampled(0.5, method="mehlich-3"), germany)
    assert "do not name their extraction, the samples are for mehlich-3" in unnamed.what
    assert class_limits_fit(sampled(0.5), germany) == []
    (note,) = class_limits_note(germany)
    assert note.what.startswith("class limits of germany: ")
    assert len(note.what) > len("class limits of germany: ") + 10
    assert "extraction not named" not in note.what  # its own note stands in the table
    assert class_limits_note(named) == []

"""Class limits by country: chosen, run through the assessment, refused where they do not belong."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from schorl.agronomy.tables import table
from schorl.agronomy.targets import class_rows, regions
from schorl.errors import Refusal, UsageProblem
from schorl.model.settings import CropSettings, Interpretation
from schorl.steps.assessing import assess_cells
from support.example_record import example_record

RECORD = example_record()
MG_KG_HOT_WATER = [
    name
    for name in regions()
    if class_rows(name)[0]["unit"] == "mg/kg" and class_rows(name)[0]["method"] == "hot water"
]


def crop_for(region: str) -> str:
    """A crop that a region's limits were made for."""
    crops = class_rows(region)[0]["crops"]
    return "sugar beet" if crops == "all" else crops.split("|")[0]


def assessed(region, *, crop="", method="hot water", per_volume=False, **more):
    """Cells of the example field under a region's class limits."""
    chosen = CropSettings(
        crop=crop or crop_for(region),
        interpretation=Interpretation.CLASS_TABLE,
        region=region,
        **more,
    )
    campaign = replace(RECORD.samples.campaign, method=method, per_volume=per_volume)
    return assess_cells(
        replace(RECORD.samples, campaign=campaign),
        RECORD.surfaces,
        RECORD.grid,
        replace(RECORD.settings, crop=chosen),
    )


def refused(*arguments, **named):
    with pytest.raises(Refusal) as said:
        assessed(*arguments, **named)
    assert said.value.exit_code == 4
    return {one.code: one for one in said.value.findings}


@pytest.mark.parametrize("region", MG_KG_HOT_WATER)
def test_a_region_sets_the_target_and_names_its_row(region):
    found = assessed(region)
    clay = RECORD.surfaces["clay"].estimate
    want = np.full(len(clay), np.nan)
    for row in class_rows(region):
        if row["organic"] == "no":
            low, high = float(row["clay_from_pct"]), float(row["clay_below_pct"])
            want[(clay >= low) & (clay < high)] = float(row["adequate_from"])
    held = found.need.ceiling_mg_kg - 0.25  # room under the ceiling always stays
    assert found.need.target_mg_kg == pytest.approx(np.minimum(want, held))
    keys = [row["key"] for row in found.sources if row["table"] == "class_limits"]
    assert keys
    assert set(keys) <= {f"class_limits: {row['id']}" for row in class_rows(region)}
    status = class_rows(region)[0]["status"]
    said = " ".join(one.what for one in found.findings if one.code == "RATE-STATUS")
    assert ("memory: class_limits" in said) == (status == "memory")


@pytest.mark.parametrize("region", regions())
def test_a_method_the_limits_were_not_made_for_is_refused(region):
    other = "mehlich-1"
    found = refused(region, method=other)
    assert "RATE-REGION-METHOD" in found
    assert other in found["RATE-REGION-METHOD"].what
    assert found["RATE-REGION-METHOD"].exit == 4


def test_limits_for_beet_are_not_used_for_wheat():
    assert "RATE-REGION-CROP" in refused("switzerland", crop="wheat")


def test_limits_per_litre_want_samples_per_litre():
    assert "RATE-REGION-VOLUME" in refused("ireland")
    assert "RATE-REGION-VOLUME" in refused("denmark", per_volume=True, ceiling_mg_kg=1.9)
    assert "RATE-VOLUME" in refused("ireland", per_volume=True)  # no ceiling per litre is built in
    found = assessed("ireland", per_volume=True, ceiling_mg_kg=1.9)
    assert found.need.target_mg_kg == pytest.approx(1.1)
    assert found.need.mass_need == pytest.approx(2.0)  # 20 cm of soil by volume


def test_mehlich_3_limits_set_a_target_but_never_a_ceiling():
    found = refused("new jersey", method="Mehlich 3")
    assert set(found) == {"RATE-METHOD"}
    assert "ceiling" in found["RATE-METHOD"].what
    assert "target and ceiling" not in found["RATE-METHOD"].what
    given = assessed("czech republic", method="Mehlich 3", ceiling_mg_kg=1.9)
    assert set(np.round(given.need.target_mg_kg, 2)) == {0.55, 0.70}  # light and medium soil


def test_limits_that_name_no_extraction_say_so():
    found = assessed("alberta")
    assert "RATE-REGION-UNNAMED" in {one.code for one in found.findings}
    assert "RATE-REGION-METHOD" in refused("alberta", method="mehlich-3")


def test_an_unknown_region_is_a_question_of_use():
    with pytest.raises(UsageProblem) as said:
        assessed("atlantis", crop="sugar beet")
    assert said.value.findings[0].code == "RATE-REGION"
    assert "denmark" in said.value.findings[0].what


def test_without_a_region_this_programs_classes_stand():
    found = assessed("")
    assert {row["row"] for row in found.sources if row["table"] == "class_limits"} == {
        "program-loam"
    }
    assert found.need.target_mg_kg == pytest.approx(0.8)


def test_the_cap_says_that_it_is_a_proposal():
    found = assessed("denmark")
    said = " ".join(one.what for one in found.findings if one.code == "RATE-STATUS")
    assert "proposal" in said
    assert "crops: sugar beet 2.24" in said
    assert len(table("class_limits")) > 30


def keys(found, name):
    return [row["row"] for row in found.sources if row["table"] == name]


def by_need(crop, next_crop, *, clay=None):
    surfaces = dict(RECORD.surfaces)
    if clay is not None:
        held = np.full(len(surfaces["clay"].estimate), float(clay))
        surfaces["clay"] = replace(surfaces["clay"], estimate=held)
    chosen = CropSettings(crop=crop, next_crop=next_crop)
    return assess_cells(
        RECORD.samples, surfaces, RECORD.grid, replace(RECORD.settings, crop=chosen)
    )


def test_only_rows_that_hold_some_soil_are_named():
    # Clay runs from 12 to 30 %: the line of high need is drawn between both its ends.
    assert keys(by_need("sugar beet", "sugar beet"), "targets") == ["high-1", "high-2"]
    assert keys(by_need("tomato", "sugar beet"), "targets") == ["medium-2", "medium-3"]
    assert keys(by_need("sugar beet", "sugar beet"), "ceilings") == [
        "texture-1",
        "texture-2",
        "texture-3",
    ]
    assert keys(by_need("sugar beet", "sugar beet", clay=50), "ceilings") == ["texture-4"]
    assert keys(by_need("sugar beet", "sugar beet", clay=5), "ceilings") == ["texture-1"]
    # A sensitive next crop holds every soil to 2.0, so that no texture row rules.
    assert keys(by_need("sugar beet", "maize"), "ceilings") == ["sensitive"]
    assert keys(by_need("sugar beet", ""), "ceilings") == ["sensitive"]
    assert keys(by_need("sunflower", "dry bean"), "ceilings") == ["very-sensitive"]


def test_a_declared_texture_is_named_with_its_standing_and_an_unknown_one_asked_about():
    surfaces = {name: one for name, one in RECORD.surfaces.items() if name != "clay"}
    properties = {k: v for k, v in RECORD.samples.properties.items() if k != "clay"}
    samples = replace(RECORD.samples, properties=properties)

    def declared(texture):
        chosen = CropSettings(crop="sugar beet", next_crop="sugar beet", texture=texture)
        return assess_cells(samples, surfaces, RECORD.grid, replace(RECORD.settings, crop=chosen))

    found = declared("Clay-Loam")
    assert keys(found, "textures") == ["clay loam"]
    assert found.need.target_mg_kg == pytest.approx(0.8 + 0.4 * 25 / 30)
    said = [one.what for one in found.findings if one.code == "RATE-STATUS"]
    assert any(one.startswith("memory: textures: clay loam") for one in said)
    with pytest.raises(UsageProblem) as asked:
        declared("heavy")
    assert asked.value.findings[0].code == "RATE-TEXTURE"

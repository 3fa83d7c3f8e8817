"""Agronomy against figures from outside the project, each with its source."""

from __future__ import annotations

import numpy as np
import periodictable
import pytest

from schorl.agronomy.cautions import cautions
from schorl.agronomy.crops import crop_named
from schorl.agronomy.soil_mass import bulk_density_g_cm3, kg_ha_per_mg_kg
from schorl.agronomy.tables import STATUSES, table, table_names
from schorl.agronomy.targets import crop_need_target, soil_ceiling, texture_line_target
from schorl.errors import UsageProblem
from schorl.intake.quantities import BORON_IN_B2O3
from schorl.units import KG_HA_PER_LB_ACRE

FORMULAS = {
    "boric acid": "H3BO3",
    "boric oxide": "B2O3",
    "disodium tetraborate anhydrous": "Na2B4O7",
    "disodium octaborate anhydrous": "Na2B8O13",
    "sodium pentaborate pentahydrate": "NaB5O8(H2O)5",
    "kernite": "Na2B4O7(H2O)4",
    "hydroboracite": "CaMgB6O11(H2O)6",
    "disodium tetraborate decahydrate (borax)": "Na2B4O7(H2O)10",
    "disodium tetraborate pentahydrate": "Na2B4O7(H2O)5",
    "disodium octaborate tetrahydrate": "Na2B8O13(H2O)4",
    "colemanite": "Ca2B6O11(H2O)5",
    "ulexite": "NaCaB5O9(H2O)8",
}


@pytest.mark.parametrize("row", table("compounds"), ids=lambda row: row["id"])
def test_boron_shares_from_atomic_weights(row):
    """Against the periodictable package's atomic weights."""
    formula = next(f for name, f in FORMULAS.items() if row["id"].startswith(name))
    compound = periodictable.formula(formula)
    share = 100 * compound.mass_fraction[periodictable.B]
    assert float(row["boron_pct"]) == pytest.approx(share, abs=0.02)


def test_boron_in_its_oxide():
    share = periodictable.formula("B2O3").mass_fraction[periodictable.B]
    assert pytest.approx(share, abs=2e-4) == BORON_IN_B2O3


def test_one_ppm_is_two_pounds_an_acre_in_a_furrow_slice():
    """2,000,000 lb of soil an acre: 1 ppm = 2 lb/acre = 2.24 kg/ha (Efficient Fertilizer Use
    Manual; arithmetic). The slice has 6 2/3 in at 1.32 g/cm³."""
    slice_cm, density = 2.54 * 20 / 3, 1.3235
    assert float(kg_ha_per_mg_kg(density, slice_cm)) == pytest.approx(
        2 * KG_HA_PER_LB_ACRE, rel=1e-3
    )


def test_danish_plough_layer():
    """Danish norms: 1 ppm = 2.5 kg B/ha in the plough layer (25 cm at 1.0 after preparation)."""
    assert float(kg_ha_per_mg_kg(1.25, 20.0)) == pytest.approx(2.5)


@pytest.mark.parametrize(
    ("sand", "clay", "matter", "density"),
    [
        (88, 5, 2.5, 1.43),
        (40, 20, 2.5, 1.43),
        (10, 35, 1, 1.38),
        (25, 50, 5, 1.30),
        (60, 25, 2.5, 1.50),
    ],
)
def test_bulk_density_of_texture_classes(sand, clay, matter, density):
    """Saxton & Rawls 2006 equations worked for class middles."""
    assert float(bulk_density_g_cm3(sand, clay, matter)) == pytest.approx(density, abs=0.006)


def test_target_lines():
    clay = np.array([5.0, 10, 25, 40, 60])
    assert crop_need_target("high", clay) == pytest.approx([0.8, 0.8, 1.0, 1.2, 1.2])
    # Common practice, no source: 1 in sand, 2 in heavy clay.
    assert texture_line_target(clay) == pytest.approx([1.0, 1.0, 1.375, 1.75, 2.0])


def test_ceilings_fall_with_a_sensitive_next_crop():
    clay, matter = np.array([5.0, 25.0, 45.0]), np.full(3, 2.5)
    beet = crop_named("sugar beet")
    assert soil_ceiling(beet, "texture", clay, matter) == pytest.approx([2.0, 2.5, 3.0])
    assert soil_ceiling(beet, "sensitive", clay, matter) == pytest.approx([2.0, 2.0, 2.0])
    assert soil_ceiling(beet, "very sensitive", clay, matter) == pytest.approx([1.4] * 3)


def test_crops_by_alias_and_the_nearest_names():
    assert crop_named(" Canola ").name == "oilseed rape (canola)"
    assert crop_named("corn").name == "maize"
    assert len(table("crops")) >= 50
    with pytest.raises(UsageProblem, match="beat") as problem:
        crop_named("sugar beat")
    assert "sugar beet" in problem.value.findings[0].hint


def test_every_row_has_unit_source_and_status():
    for name in table_names():
        for row in table(name):
            assert row["status"] in STATUSES
            assert row["source"]


def test_cautions_name_class_and_protection():
    said = " ".join(cautions(foliar=True))
    for words in ("H360FD", "gloves", "label", "water", "next crop", "seed"):
        assert words in said

"""Solubilities and soil densities against print, each with its source."""

from __future__ import annotations

import periodictable
import pytest

from schorl.agronomy.caps import (
    ABSOLUTE_ALFALFA_KG_HA,
    ABSOLUTE_PASS_KG_HA,
    ABSOLUTE_SEASON_KG_HA,
)
from schorl.agronomy.soil_mass import bulk_density_g_cm3
from schorl.agronomy.tables import limit, table
from schorl.machinery.solids import saturation_g_l, saturation_rows, solid_named
from schorl.machinery.tables import table as machine_table

BORAX = periodictable.formula("Na2B4O7(H2O)10").mass
ANHYDROUS = periodictable.formula("Na2B4O7").mass
ACID = periodictable.formula("H3BO3").mass
OXIDE = periodictable.formula("B2O3").mass


def share(name: str) -> float:
    """A row's % w/w of the saturated solution."""
    row = machine_table("solubility")[name]
    assert row["unit"].startswith("% w/w")
    return float(row["value"])


def grams(compound: str, celsius: float) -> float:
    solid = solid_named(compound)
    assert solid is not None
    return saturation_g_l(solid, celsius)


def test_boric_acid_from_its_oxide():
    """Fu et al. 2020, J. Chem., 6687742, table 1, point A: 3.06 % B2O3 at 25 °C (another 3.25)."""
    printed = 3.06 * 2 * ACID / OXIDE
    assert share("boric-acid-25 (system)") == pytest.approx(printed, abs=0.01)
    assert printed == pytest.approx(share("boric-acid-25"), rel=0.01)


def test_eutectics():
    """Abstract of an American Chemical Society paper in the repository of Istanbul Technical
    University: 2.37 ± 0.07 % boric acid at -0.61 °C, 1.05 % Na2B4O7 at -0.3 °C."""
    slope = (share("boric-acid-5") - share("boric-acid-0")) / 5
    assert share("boric-acid-0") == pytest.approx(2.37 + 0.61 * slope, abs=2 * 0.07)
    assert share("borax-eutectic") == pytest.approx(1.05 * BORAX / ANHYDROUS, abs=0.005)
    assert share("borax-0") == pytest.approx(share("borax-eutectic"), abs=0.02)


def test_the_octaborate_point_is_held_by_its_sodium():
    """Fu et al. 2020, point E2: 2.73 % Na2O and 12.73 % B2O3 at 25 °C. Octaborate carries one Na2O."""
    octaborate = periodictable.formula("Na2B8O13(H2O)4").mass
    by_sodium = 2.73 * octaborate / periodictable.formula("Na2O").mass
    by_boron = 12.73 * octaborate / (4 * OXIDE)
    assert share("octaborate-25") == pytest.approx(min(by_sodium, by_boron), abs=0.05)


@pytest.mark.parametrize(("celsius", "printed"), [(19, 4.52), (20, 4.71), (21, 4.94)])
def test_borax_near_room_temperature(celsius, printed):
    """A photographer's table of borax between 19 and 21 °C (second-hand; its source not named)."""
    solid = solid_named("borax")
    volume = (1 - printed / 100) + printed / 100 / solid.density_g_cm3
    assert grams("borax", celsius) == pytest.approx(10 * printed / volume, rel=0.01)


def test_borax_as_a_pharmacopoeia_has_it():
    """1 part in 16 of water at room temperature: 5.9 %."""
    assert share("borax-25 (compendium)") == pytest.approx(100 / 17, abs=0.05)
    assert grams("borax", 25) == pytest.approx(60, rel=0.05)


@pytest.mark.parametrize("celsius", [0, 10, 20, 30, 40])
def test_pentahydrate_is_the_same_salt(celsius):
    """Same boron in the same water, from atomic weights of the periodictable package."""
    pentahydrate = periodictable.formula("Na2B4O7(H2O)5").mass
    in_water = share(f"borax-{celsius}") * pentahydrate / BORAX
    assert share(f"pentahydrate-{celsius}") == pytest.approx(in_water, abs=0.02)


#: A public data base of properties of substances, entry of boric acid (second-hand): g in 100 g of
#: water by °C.
ACID_BY_DATA_BASE = {0: 2.77, 10: 3.65, 20: 4.87, 25: 5.74, 30: 6.77, 40: 8.90}


@pytest.mark.parametrize(("celsius", "printed"), ACID_BY_DATA_BASE.items())
def test_recalled_boric_acid_against_a_data_base(celsius, printed):
    """The recalled row is never more than 2 % above what another compilation has."""
    witness = 100 * printed / (100 + printed)
    assert 0.93 * witness < share(f"boric-acid-{celsius}") < 1.02 * witness


@pytest.mark.parametrize("compound", ["boric acid", "borax", "pentahydrate", "octaborate"])
def test_warmer_water_never_holds_less(compound):
    held = [grams(compound, celsius) for celsius in range(-2, 46)]
    assert held == sorted(held)


def test_the_rows_behind_a_mix_are_those_around_its_temperature():
    acid = solid_named("boric acid")
    assert saturation_rows(acid, 12) == ("boric-acid-10", "boric-acid-15")
    assert saturation_rows(acid, 10) == ("boric-acid-10",)
    assert saturation_rows(acid, 60) == ("boric-acid-40",)
    assert saturation_rows(acid, -5) == ("boric-acid-eutectic",)


#: Saxton and Rawls 2006, Soil Sci. Soc. Am. J. 70:1569-1578, table 3, matric density at 2.5 %
#: organic matter (recalled).
MATRIC = {
    "sand": 1.43, "loamy sand": 1.43, "sandy loam": 1.46, "loam": 1.43, "silt loam": 1.38,
    "silt": 1.38, "sandy clay loam": 1.50, "clay loam": 1.39, "silty clay loam": 1.30,
    "silty clay": 1.26, "sandy clay": 1.47, "clay": 1.33,
}  # fmt: skip


@pytest.mark.parametrize("row", table("textures"), ids=lambda row: row["id"])
def test_density_of_every_texture_class(row):
    ours = bulk_density_g_cm3(float(row["sand_pct"]), float(row["clay_pct"]), 2.5)
    assert float(ours) == pytest.approx(MATRIC[row["id"]], abs=0.011)


def test_the_limits_in_code_are_those_the_table_explains():
    assert limit("absolute-season") == ABSOLUTE_SEASON_KG_HA
    assert limit("absolute-pass") == ABSOLUTE_PASS_KG_HA
    assert limit("absolute-alfalfa") == ABSOLUTE_ALFALFA_KG_HA

"""Machine figures against print and against units of a reference library.

Sources beside each check. scipy.constants carries NIST's and the 1959 agreement's exact units.
"""

from __future__ import annotations

import math

import periodictable
import pytest
from scipy import constants

from schorl import units
from schorl.machinery.boom import boom_figures
from schorl.machinery.nozzles import (
    nozzle_flow_l_min,
    nozzle_size,
    nozzle_sizes,
    pressure_bar,
    water_flow_l_min,
)
from schorl.machinery.rates import boron_per_unit
from schorl.machinery.solids import most_boron_g_l, saturation_g_l, solid_named
from schorl.machinery.spreader import feed_per_min, granules_per_m2
from schorl.machinery.tables import table, table_names
from schorl.model.settings import Form, Machine, Product

GAL_L = constants.gallon * 1000.0
MPH_KM_H = constants.mph * 3.6


def test_units_are_those_of_a_reference_library():
    assert pytest.approx(constants.lb, rel=1e-12) == units.KG_PER_LB
    assert pytest.approx(constants.acre / constants.hectare, rel=1e-5) == units.HA_PER_ACRE
    assert pytest.approx(GAL_L, rel=1e-12) == units.L_PER_US_GAL
    assert pytest.approx(constants.foot, rel=1e-12) == units.M_PER_FT
    assert pytest.approx(constants.psi / constants.bar, rel=1e-12) == units.BAR_PER_PSI
    assert pytest.approx(1000 * constants.lb / (100 * GAL_L)) == units.G_L_PER_LB_100_GAL


@pytest.mark.parametrize(
    ("gal_acre", "mph", "inches"), [(20, 6, 20), (10, 12, 15), (15.5, 4.5, 30)]
)
def test_nozzle_flow_is_the_5940_formula(gal_acre, mph, inches):
    """University of Missouri Extension G1270, worksheet: gal/acre x mph x inches / 5940."""
    printed_l_min = gal_acre * mph * inches / 5940 * GAL_L
    machine = Machine(speed_km_h=mph * MPH_KM_H, nozzle_spacing_m=inches * constants.inch)
    ours = nozzle_flow_l_min(gal_acre * units.L_HA_PER_US_GAL_ACRE, machine)
    assert ours == pytest.approx(printed_l_min, rel=2e-4)


@pytest.mark.parametrize(("lb_acre", "mph", "feet"), [(100, 5, 40), (250, 10, 60)])
def test_spreader_feed_is_the_495_formula(lb_acre, mph, feet):
    """lb/min = lb/acre x mph x feet / 495, since 43,560 / 88 = 495 (arithmetic of the units)."""
    printed_kg_min = lb_acre * mph * feet / 495 * constants.lb
    ours = feed_per_min(lb_acre * units.KG_HA_PER_LB_ACRE, mph * MPH_KM_H, feet * constants.foot)
    assert ours == pytest.approx(printed_kg_min, rel=1e-5)


@pytest.mark.parametrize(
    ("gravity", "factor"),
    [(0.84, 0.92), (1.00, 1.00), (1.08, 1.04), (1.20, 1.10), (1.28, 1.13), (1.32, 1.15),
     (1.44, 1.20), (1.68, 1.30)],
)  # fmt: skip
def test_density_factors_as_nozzle_catalogues_print_them(gravity, factor):
    """Printed factors from liquid to water, e.g. 1.13 for 28 % nitrogen of specific gravity 1.28."""
    liquid = pressure_bar("03", 1.0, gravity)
    assert liquid == pytest.approx(pressure_bar("03", factor * 1.0, 1.0), rel=0.02)


@pytest.mark.parametrize(
    ("size", "psi", "ml_min"),
    [("04", 10, 769), ("04", 20, 1065), ("04", 30, 1331), ("04", 40, 1508), ("08", 10, 1508),
     ("08", 20, 2159), ("08", 30, 2602), ("08", 40, 3017)],
)  # fmt: skip
def test_flows_of_red_and_white_nozzles(size, psi, ml_min):
    """A printed nozzle chart (water, 21 °C) in an operator's manual of a turf sprayer, page 37."""
    assert table("nozzles")[size]["colour"] == {"04": "red", "08": "white"}[size]
    ours = 1000 * water_flow_l_min(size, psi * units.BAR_PER_PSI)
    assert ours == pytest.approx(ml_min, rel=0.05)  # the standard's own tolerance is 5 %


@pytest.mark.parametrize("size", nozzle_sizes())
def test_a_size_says_gallons_a_minute_at_40_psi(size):
    """The standard's naming: 04 is 0.4 US gal/min at 40 psi; 0067 and 0075 count in thousandths."""
    gallons = float(f"0.{size}") if not size.startswith("0") else float(f"0.{size[1:]}")
    if size in ("10", "12", "14", "15", "16", "18", "20"):
        gallons = int(size) / 10.0
    ours = water_flow_l_min(size, 40 * units.BAR_PER_PSI)
    assert ours == pytest.approx(gallons * GAL_L, rel=0.07)


def test_granules_on_the_ground():
    """Counted another way: mass on 1 m² over the mass of a sphere."""
    product = Product(form=Form.GRANULE, boron_pct=15, granule_mm=2.5, granule_density_g_cm3=1.7)
    sphere_g = 4 / 3 * math.pi * (0.25 / 2) ** 3 * 1.7
    on_m2_g = 10 * 1000 / 10_000
    assert granules_per_m2(10, product) == pytest.approx(on_m2_g / sphere_g)


@pytest.mark.parametrize(
    ("name", "formula"),
    [("boric acid", "H3BO3"), ("borax", "Na2B4O7(H2O)10"), ("pentahydrate", "Na2B4O7(H2O)5"),
     ("octaborate", "Na2B8O13(H2O)4")],
)  # fmt: skip
def test_boron_of_dissolved_compounds(name, formula):
    """Molar masses of the periodictable package."""
    molecule = periodictable.formula(formula)
    boron = molecule.atoms[periodictable.B] * periodictable.B.mass
    assert solid_named(name).boron_pct == pytest.approx(100 * boron / molecule.mass, rel=1e-3)


def test_the_two_tables_of_compounds_agree():
    from schorl.agronomy.tables import row_of

    for name, row in table("solids").items():
        assert float(row["boron_pct"]) == float(row_of("compounds", name)["boron_pct"])


def test_boric_acid_at_20_degrees():
    """ECHA dossier, EU method A.6: 49.2 g/L; the handbook's 4.72 % w/w is lower and counts."""
    ours = saturation_g_l(solid_named("boric acid"), 20)
    assert 0.95 * 49.2 < ours < 49.2


def test_octaborate_takes_the_lower_of_two_papers():
    """95 and 223.65 g/L at 20 °C are both in print."""
    assert saturation_g_l(solid_named("octaborate"), 20) == pytest.approx(95)


def test_hydrates_of_borax_hold_the_same_boron():
    """In water both are the same salt: at 20 °C their boron may not differ but by rounding."""
    held = [
        most_boron_g_l(Product(form=Form.SPRAY, compound=name, boron_pct=pct), 20)
        for name, pct in (("borax", 11.338), ("pentahydrate", 14.844))
    ]
    assert held[0] == pytest.approx(held[1], rel=0.02)


def test_150_grams_a_litre_is_about_11_per_cent():
    """The commonest slip with liquids: 150 g/L at 1.36 kg/L is 11 % by weight, not 15 %."""
    by_weight = Product(form=Form.SPRAY, boron_pct=11.0, density_kg_l=1.36)
    by_litre = Product(form=Form.SPRAY, boron_g_l=150)
    assert boron_per_unit(by_weight) == pytest.approx(boron_per_unit(by_litre), rel=0.003)


def test_a_whole_sprayer_by_hand():
    """24 m, 8 km/h, 0.5 m, 200 L/ha: 64 L/min, 1.333 L/min a nozzle, size 04 at 2.08 bar."""
    machine = Machine(
        working_width_m=24, speed_km_h=8, nozzle_spacing_m=0.5, nozzle_size="04", mix_g_b_l=2.0
    )
    figures = boom_figures(200, Product(form=Form.SPRAY, boron_g_l=150), machine)
    assert figures["flow_l_min"] == pytest.approx(64)
    assert figures["nozzle_l_min"] == pytest.approx(4 / 3)
    assert figures["pressure_bar"] == pytest.approx(3 * (4 / 3 / 1.6) ** 2)


@pytest.mark.parametrize(("said", "size"), [("4", "04"), ("110-04", "04"), ("2.5", "025"),
                                            ("015", "015"), ("20", "20"), (" 03 ", "03")])  # fmt: skip
def test_sizes_as_people_write_them(said, size):
    assert nozzle_size(said) == size


def test_every_row_has_a_source():
    assert set(table_names()) == {"machine_limits", "nozzles", "solids", "solubility"}
    for name in table_names():
        assert table(name)


@pytest.mark.parametrize("celsius", [0, 10, 20, 40])
def test_a_fifth_of_what_dissolves_stays_in_hand(celsius):
    """The 20 % margin, on what the saturated solution holds as boron."""
    product = Product(form=Form.SPRAY, compound="borax", boron_pct=11.338)
    held = saturation_g_l(solid_named("borax"), celsius) * 0.11338
    assert most_boron_g_l(product, celsius) == pytest.approx(0.8 * held)

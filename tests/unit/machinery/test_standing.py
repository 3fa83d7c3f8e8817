"""A mix says how far the solubility it rests on was checked."""

from __future__ import annotations

import pytest

from schorl.machinery.plan import machine_plan
from schorl.model.settings import Form, Machine, Placement, Product


@pytest.mark.parametrize(
    ("celsius", "rows"), [(12.0, ("boric-acid-10", "boric-acid-15")), (None, ("boric-acid-10",))]
)
def test_a_recalled_solubility_is_named(celsius, rows):
    acid = Product(form=Form.SPRAY, compound="boric acid", boron_pct=17.4)
    machine = Machine(water_temperature_c=celsius)
    made = machine_plan([(10.0, 0.5), (5.0, 0.0)], acid, machine, placement=Placement.BROADCAST)
    said = [one.what for one in made.findings if one.code == "MACHINE-STATUS"]
    assert len(said) == 1
    assert all(row in said[0] for row in rows)
    assert "(memory)" in said[0]
    used = [row["row"] for row in made.sources if row["table"] == "solubility"]
    assert tuple(used) == rows


def test_a_liquid_rests_on_no_solubility():
    liquid = Product(form=Form.SPRAY, boron_g_l=150.0)
    made = machine_plan([(10.0, 0.5)], liquid, Machine(), placement=Placement.BROADCAST)
    assert not [one for one in made.findings if one.code == "MACHINE-STATUS"]
    assert not [row for row in made.sources if row["table"] == "solubility"]

"""Totals, loads and what to order."""

from __future__ import annotations

import math
from dataclasses import dataclass

from schorl.machinery.blends import blend_share
from schorl.machinery.mixes import product_per_litre, strength_g_l
from schorl.machinery.tables import machine_limit
from schorl.model.settings import Form, Machine, Product

EDGE = 1e-9


@dataclass(frozen=True, slots=True, kw_only=True)
class Loads:
    """Loads of a hopper or tank; ``last`` is the part-filled one, 0 where all are full."""

    count: float
    full: int
    last: float


def loads_of(total: float, size: float | None) -> Loads:
    """How often a hopper (kg) or tank (L) is filled for a total; nothing where its size is open."""
    if not size or total <= 0:
        return Loads(count=0.0, full=0, last=0.0)
    full = math.floor(total / size + EDGE)
    return Loads(count=total / size, full=full, last=max(total - full * size, 0.0))


@dataclass(frozen=True, slots=True, kw_only=True)
class Order:
    """What to buy, spare included: whole bags where the bag's size is known."""

    amount: float
    unit: str
    bags: int | None = None


def order_of(boron_product: float, unit: str, product: Product) -> Order:
    """The boron product with spare, in bags where the job gives their size."""
    with_spare = boron_product * (1.0 + machine_limit("order-spare") / 100.0)
    if not product.bag_kg or unit != "kg":
        return Order(amount=with_spare, unit=unit)
    bags = math.ceil(with_spare / product.bag_kg - EDGE)
    return Order(amount=bags * product.bag_kg, unit=unit, bags=bags)


def product_part(product: Product, machine: Machine) -> tuple[float, str]:
    """Boron product in one kg or L of what leaves the machine, and the unit it is bought in."""
    if product.form is Form.GRANULE:
        return blend_share(product, machine), "kg"
    unit = "kg" if strength_g_l(product) is None else "L"
    if machine.mix_g_b_l is None:
        return 1.0, unit
    return product_per_litre(product, machine.mix_g_b_l), unit


def load_facts(total: float, product: Product, machine: Machine) -> dict[str, float | str]:
    """Boron product and carrier or water: in all, in a full load and in the last one."""
    part, unit = product_part(product, machine)
    order = order_of(total * part, unit, product)
    facts: dict[str, float | str] = {"order_unit": order.unit}
    if order.bags is not None:
        facts["bags"] = order.bags
    if part >= 1.0 - EDGE:
        return facts
    ends, rest = f"_{unit}", ("_kg" if product.form is Form.GRANULE else "_l")
    other = "carrier" if product.form is Form.GRANULE else "water"
    # A solid is weighed in and the tank filled up to the mark: water is said as the mix's volume.
    left = 1.0 if unit != rest[1:] and unit == "kg" else 1.0 - part
    size = machine.hopper_kg if product.form is Form.GRANULE else machine.tank_l
    loads = loads_of(total, size)
    amounts = {"in_all": total, "full_load": size or 0.0, "last_load": loads.last}
    for name, amount in amounts.items():
        if amount > 0 and not (name == "full_load" and loads.full == 0):
            facts[f"product_{name}{ends.lower()}"] = amount * part
            facts[f"{other}_{name}{rest}"] = amount * left
    return facts

"""Boron compounds that are dissolved for spraying: how much cold water holds.

Saturation comes from a table of sourced figures; where two conflict the lower counts, between two
temperatures it follows a straight line in its logarithm (below the straight line in the figure
itself), and 20 % stay in hand.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass
from functools import lru_cache

from schorl.machinery.tables import machine_limit, table
from schorl.model.settings import Form, Product

PER_LITRE = "g/L"


@dataclass(frozen=True, slots=True, kw_only=True)
class Solid:
    """A compound that is weighed into water."""

    name: str
    boron_pct: float
    density_g_cm3: float


def solid_named(text: str) -> Solid | None:
    """The compound of a name or common alias, None where the table has none."""
    wanted = " ".join(text.lower().split())
    for name, row in table("solids").items():
        if wanted and wanted in (name.lower(), *row["aliases"].split("|")):
            return Solid(
                name=name, boron_pct=float(row["boron_pct"]), density_g_cm3=float(row["value"])
            )
    return None


def dissolved_solid(product: Product) -> Solid | None:
    """The solid behind a spray that is given by its share and a known compound.

    A spray with g B/L or a density is a liquid, whatever it was made from.
    """
    if product.form is not Form.SPRAY or product.boron_g_l or product.density_kg_l:
        return None
    return solid_named(product.compound)


def solution_density_kg_l(solid: Solid, grams_l: float) -> float:
    """Density of a solution of ``grams_l`` of a solid, volumes taken as adding up."""
    return 1.0 + grams_l / 1000.0 * (1.0 - 1.0 / solid.density_g_cm3)


def _grams_l(share_w_w: float, solid: Solid) -> float:
    volume_l = (1.0 - share_w_w) + share_w_w / solid.density_g_cm3
    return 1000.0 * share_w_w / volume_l


@lru_cache(maxsize=16)
def _nodes(solid: Solid) -> tuple[tuple[float, float, str], ...]:
    """Temperature in °C, saturation in g/L and its row, the lower of conflicting figures."""
    lowest: dict[float, tuple[float, str]] = {}
    for name, row in table("solubility").items():
        if row["compound"] != solid.name:
            continue
        value = float(row["value"])
        grams = value if row["unit"] == PER_LITRE else _grams_l(value / 100.0, solid)
        celsius = float(row["temperature_c"])
        lowest[celsius] = min((grams, name), lowest.get(celsius, (math.inf, "")))
    return tuple((celsius, *lowest[celsius]) for celsius in sorted(lowest))


def saturation_rows(solid: Solid, temperature_c: float) -> tuple[str, ...]:
    """Ids of the rows of solubility that a temperature's figure is drawn between."""
    nodes = _nodes(solid)
    celsius = min(max(temperature_c, nodes[0][0]), nodes[-1][0])
    below = max(node for node in nodes if node[0] <= celsius)
    above = min(node for node in nodes if node[0] >= celsius)
    return tuple(dict.fromkeys((below[2], above[2])))


def saturation_g_l(solid: Solid, temperature_c: float) -> float:
    """Grams of the solid in a litre of saturated solution.

    Colder and warmer than the table its outermost figures stand: warmer water is not trusted to
    hold more than was looked up.
    """
    nodes = _nodes(solid)
    celsius = min(max(temperature_c, nodes[0][0]), nodes[-1][0])
    for (low, below, _), (high, above, _) in itertools.pairwise(nodes):
        if celsius <= high:
            part = (celsius - low) / (high - low)
            return math.exp((1.0 - part) * math.log(below) + part * math.log(above))
    return nodes[-1][1]


def water_temperature_c(given: float | None) -> float:
    """The water's temperature, or the cool one that is taken where none is given."""
    return machine_limit("water-temperature") if given is None else given


def most_boron_g_l(product: Product, temperature_c: float | None) -> float | None:
    """Most boron a mix of a dissolved solid may hold, g B/L with the margin off; None for liquids.

    A label with more boron than the pure compound has is not trusted here.
    """
    solid = dissolved_solid(product)
    if solid is None:
        return None
    share = min(solid.boron_pct, product.boron_pct or solid.boron_pct) / 100.0
    kept = 1.0 - machine_limit("solubility-margin") / 100.0
    return kept * share * saturation_g_l(solid, water_temperature_c(temperature_c))

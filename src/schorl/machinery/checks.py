"""What a machine cannot do, and what a mix would do, said with its cost and the way out."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

from schorl.findings import Finding, finding
from schorl.machinery.blends import blend_share, is_blended, share_range
from schorl.machinery.rates import boron_per_unit, rate_band
from schorl.machinery.saying import Saying
from schorl.machinery.solids import (
    Solid,
    dissolved_solid,
    most_boron_g_l,
    saturation_rows,
    water_temperature_c,
)
from schorl.machinery.tables import machine_limit, table
from schorl.machinery.ways_out import ways_out, ways_words
from schorl.model.prescription import MachinePoint
from schorl.model.settings import Form, Machine, Placement, Product
from schorl.model.sourced import UNSURE

EDGE = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Spread:
    """Zones with wanted and given boron, the product, and the machine before and after settling."""

    area_ha: tuple[float, ...]
    wanted_kg_ha: tuple[float, ...]
    given_kg_ha: tuple[float, ...]
    product: Product
    job: Machine  # as the job says it
    machine: Machine  # with mix and nozzle chosen
    placement: Placement
    saying: Saying

    @property
    def treated(self) -> tuple[tuple[float, float], ...]:
        """Area and given boron of zones that get any."""
        pairs = zip(self.area_ha, self.given_kg_ha, strict=True)
        return tuple((area, rate) for area, rate in pairs if rate > 0)

    @property
    def doses_wanted(self) -> tuple[tuple[float, float], ...]:
        """Area and wanted boron of all zones."""
        return tuple(zip(self.area_ha, self.wanted_kg_ha, strict=True))

    @property
    def boron_kg(self) -> float:
        """Boron given in all."""
        return sum(area * rate for area, rate in self.treated)

    @property
    def blended(self) -> bool:
        """Whether granules are thinned with a carrier."""
        return is_blended(self.product, self.machine)

    @property
    def sprayed(self) -> bool:
        """Whether a boom sprays (not granules, not injection into irrigation)."""
        return self.product.form is Form.SPRAY and self.placement is not Placement.FERTIGATION

    @property
    def solid(self) -> Solid | None:
        """The solid that is dissolved, where one is."""
        return dissolved_solid(self.product)

    @property
    def turndown(self) -> float:
        """Highest over lowest rate that one pass can do; infinite where nothing holds it."""
        least, most = rate_band(self.product, self.machine)
        return most / least if least > 0 else math.inf


def notice(spread: Spread, points: Sequence[MachinePoint]) -> tuple[Finding, ...]:
    """All findings of a plan."""
    found = [*_of_rates(spread)]
    if spread.product.form is Form.GRANULE:
        found += _of_granules(spread, points)
    else:
        found += [*_of_mix(spread), *_of_leaves(spread, points), *_of_standing(spread)]
    return tuple(found)


def _of_standing(spread: Spread) -> Iterator[Finding]:
    """Solubilities that nobody looked up and that a mix rests on."""
    if spread.solid is None:
        return
    celsius = water_temperature_c(spread.machine.water_temperature_c)
    rows = [table("solubility")[name] for name in saturation_rows(spread.solid, celsius)]
    unsure = [
        f"{row['id']} {row['value']} ({row['status']})" for row in rows if row["status"] in UNSURE
    ]
    if unsure:
        what = f"the mix rests on solubility: {', '.join(unsure)}"
        yield finding("MACHINE-STATUS", where="mix", what=what)


def _of_rates(spread: Spread) -> Iterator[Finding]:
    if not spread.machine.can_do_zero and any(rate == 0 for rate in spread.given_kg_ha):
        area = sum(
            one for one, rate in zip(spread.area_ha, spread.given_kg_ha, strict=True) if rate == 0
        )
        what = (
            f"{spread.saying.area(area)} must stay untreated, and the machine cannot shut off "
            "inside a field"
        )
        yield finding("MACHINE-ZERO", where="machine", what=what)
    ways = ways_out(spread.doses_wanted, spread.turndown) if spread.sprayed else ()
    if ways:
        yield finding(
            "MACHINE-TURNDOWN",
            where="machine",
            what=f"the zones' highest rate is {_ratio(spread):.1f} times the lowest, the sprayer "
            f"does {spread.turndown:.1f}",
            hint=" ".join(ways_words(ways, spread.saying)),
        )
    yield from _of_band(spread)


def _of_band(spread: Spread) -> Iterator[Finding]:
    """What lies under the least and over the most, with its cost."""
    _, most = rate_band(spread.product, spread.machine)
    least = _least_rate(spread)
    share = boron_per_unit(spread.product, spread.machine)
    below = _lost(spread, lambda wanted, given: wanted > 0 and given == 0 and wanted / share < most)
    above = _lost(spread, lambda wanted, given: given > 0 and wanted / share > most * (1 + EDGE))
    if below[0] > 0:
        yield finding(
            "MACHINE-BELOW",
            where="machine",
            what=f"{_cost(spread, below)}: the rate lies below the least, {spread.saying.rate(least)}",
            hint=_thinner(spread, least),
        )
    if above[0] > 0:
        yield finding(
            "MACHINE-ABOVE",
            where="machine",
            what=f"{_cost(spread, above)}: lowered to the most, {spread.saying.rate(most)}",
        )


def _least_rate(spread: Spread) -> float:
    """The lowest rate that is not 0: the least, or the first whole step at or above it."""
    least, _ = rate_band(spread.product, spread.machine)
    step = spread.machine.step
    if not step:
        return least
    return max(1.0, math.ceil(least / step - EDGE)) * step


def _lost(spread: Spread, chosen: Callable[[float, float], bool]) -> tuple[float, float]:
    """Hectares and kg of boron not given where a rule holds."""
    area = short = 0.0
    for ha, wanted, given in zip(
        spread.area_ha, spread.wanted_kg_ha, spread.given_kg_ha, strict=True
    ):
        if chosen(wanted, given):
            area, short = area + ha, short + ha * (wanted - given)
    return area, short


def _cost(spread: Spread, lost: tuple[float, float]) -> str:
    area, short = lost
    return f"{spread.saying.boron(short)} is not given on {spread.saying.area(area)}"


def _ratio(spread: Spread) -> float:
    rates = [rate for rate in spread.wanted_kg_ha if rate > 0]
    return max(rates) / min(rates)


def _thinner(spread: Spread, least: float) -> str:
    """How thin product or blend must be for the lowest wanted rate."""
    lowest = min(rate for rate in spread.wanted_kg_ha if rate > 0)
    if spread.sprayed and _ratio(spread) > spread.turndown:
        return "one of the ways out above, or leave them at 0"
    if spread.product.form is Form.SPRAY:
        most = 1000.0 * lowest / least
        return (
            f"a mix of at most {spread.saying.strength(most)}, another nozzle, or leave them at 0"
        )
    weaker = 100.0 * lowest / least
    share = 100.0 * min(1.0, weaker / (spread.product.boron_pct or math.inf))
    return (
        f"a product of at most {weaker:.2g} % boron, or a carrier that may vary with at most "
        f"{share:.2g} % of this product in the blend (`carrier`, `carrier_may_vary`, `blend_pct`), "
        "or leave them at 0"
    )


def _of_granules(spread: Spread, points: Sequence[MachinePoint]) -> Iterator[Finding]:
    machine = spread.machine
    if machine.carrier and not spread.blended:
        what = (
            f"the carrier, {machine.carrier}, has a rate of its own; boron is not varied through it"
        )
        yield finding("MACHINE-CARRIER-FIXED", where="machine", what=what)
    if spread.blended and any(rate > 0 for rate in spread.wanted_kg_ha):
        yield from _of_blend(spread)
    lowest = points[0].figures.get("granules_m2") if points else None
    if lowest is not None and lowest < machine_limit("granules-least"):
        what = f"{lowest:.0f} granules of boron product a square metre at the lowest rate"
        yield finding("MACHINE-GRANULES", where="product", what=what)


def _of_blend(spread: Spread) -> Iterator[Finding]:
    share = blend_share(spread.product, spread.machine)
    what = f"{100 * share:.3g} % boron product in the blend with {spread.machine.carrier}"
    yield finding("MACHINE-BLEND", where="product", what=what)
    rates = [rate for rate in spread.wanted_kg_ha if rate > 0]
    fit = share_range(min(rates), max(rates), spread.product, spread.machine)
    if fit.possible and not fit.least - EDGE <= share <= fit.most + EDGE:
        hint = f"`blend_pct` between {100 * fit.least:.3g} and {100 * fit.most:.3g} suits all zones"
        yield finding("MACHINE-BLEND-RANGE", where="product", what=what, hint=hint)


def _of_mix(spread: Spread) -> Iterator[Finding]:
    job, mix, saying = spread.job, spread.machine.mix_g_b_l or 0.0, spread.saying
    most = most_boron_g_l(spread.product, job.water_temperature_c)
    if most is not None and job.water_temperature_c is None:
        what = f"the water was taken as {saying.temperature(water_temperature_c(None))}"
        yield finding("MACHINE-WATER", where="mix", what=what)
    if most is not None and mix > most * (1 + EDGE):
        warmth = saying.temperature(water_temperature_c(job.water_temperature_c))
        what = f"{saying.strength(mix)}; water of {warmth} safely holds {saying.strength(most)}"
        yield finding("MACHINE-SOLUBLE", where="mix", what=what)
    if spread.sprayed and spread.treated and (job.mix_g_b_l is None or not job.nozzle_size):
        top = saying.rate(1000.0 * max(spread.given_kg_ha) / mix)
        what = f"{saying.strength(mix)}, nozzle size {spread.machine.nozzle_size}, up to {top}"
        yield finding("MACHINE-CHOSEN", where="mix", what=what)


def _of_leaves(spread: Spread, points: Sequence[MachinePoint]) -> Iterator[Finding]:
    """Leaf burn: by strength of the mix, and stricter where leaves are wetted to run-off."""
    if spread.placement is not Placement.FOLIAR or not points:
        return
    mix, saying = spread.machine.mix_g_b_l or 0.0, spread.saying
    if mix > machine_limit("foliar-most") * (1 + EDGE):
        yield finding("MACHINE-BURN", where="mix", what=f"{saying.strength(mix)} on leaves")
        return
    wet = points[-1].product_rate >= machine_limit("foliar-high-volume")
    warn = machine_limit("foliar-high-volume-warn" if wet else "foliar-warn")
    if mix > warn * (1 + EDGE):
        volume = f" at {saying.rate(points[-1].product_rate)}" if wet else ""
        yield finding(
            "MACHINE-BURN-WARN", where="mix", what=f"{saying.strength(mix)} on leaves{volume}"
        )

"""The rate of a zone under every limit, from its cells' distributions."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from schorl.agronomy.caps import ABSOLUTE_PASS_KG_HA
from schorl.agronomy.chances import (
    chance_over_ceiling,
    chance_short_of_need,
    expected_loss_kg_ha,
)
from schorl.agronomy.tables import limit
from schorl.machinery.rates import machine_rate, step_boron_kg_ha
from schorl.machinery.sprayer import settled_machine
from schorl.model.arrays import Counts, Flags, Floats
from schorl.model.prescription import CellNeed, Limit, PlanOutcome
from schorl.model.settings import Placement, RunSettings

BISECTIONS = 34  # 6.7 kg/ha halved 34 times is far below any machine's step
EXACT_KG_HA = 1e-9


@dataclass(frozen=True, kw_only=True)
class Ruled:
    """A zone's rate and what ruled it; ``limits`` holds every limit that was tried."""

    need_kg_ha: float
    wanted_kg_ha: float  # after all limits, before the machine
    boron_kg_ha: float
    by: Limit
    limits: dict[str, float]


def part_of(need: CellNeed, chosen: Flags) -> CellNeed:
    """The need of some of the cells."""
    if chosen.all():
        return need
    names = (
        "need_mean_kg_ha", "need_sd_kg_ha", "boron_mg_kg", "boron_location", "boron_sd",
        "target_mg_kg", "ceiling_mg_kg", "mass_need", "mass_ceiling", "rate_cap_kg_ha", "hot",
    )  # fmt: skip
    arrays = {name: getattr(need, name)[chosen] for name in names}
    return CellNeed(boron_log=need.boron_log, **arrays)


def best_rate_kg_ha(cells: CellNeed, *, cost_ratio: float) -> float:
    """The rate with the least expected loss before limits.

    The r at which the mean chance of being short equals 1 / (1 + c), c the cost of a kg short over
    a kg in excess; 0 where that is negative.
    """
    return _bisect(
        lambda rate: float(chance_short_of_need(cells, rate).mean()) > 1.0 / (1.0 + cost_ratio)
    )


def chance_limit_kg_ha(cells: CellNeed, *, unevenness: float) -> float:
    """The largest rate with at most 5 % of the area expected over the ceiling."""
    most = limit("chance-of-excess")
    return _bisect(
        lambda rate: float(chance_over_ceiling(cells, rate, unevenness=unevenness).mean()) <= most
    )


def _bisect(still_up: Callable[[float], bool]) -> float:
    """Largest rate at which a predicate that turns false once still holds, from 0."""
    if not still_up(0.0):
        return 0.0
    low, high = 0.0, 2.0 * ABSOLUTE_PASS_KG_HA
    if still_up(high):
        return high
    for _ in range(BISECTIONS):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if still_up(middle) else (low, middle)
    return low


def unevenness_of(settings: RunSettings) -> float:
    """Peak over mean of the swath, 1 + 2 CV: about the 97.5th percentile."""
    return 1.0 + 2.0 * settings.machine.spread_cv_pct / 100.0


def ruled_rate(cells: CellNeed, settings: RunSettings) -> Ruled:
    """A zone's rate under every limit, the lowest winning, and then the machine."""
    need = best_rate_kg_ha(cells, cost_ratio=settings.crop.cost_ratio)
    chance = chance_limit_kg_ha(cells, unevenness=unevenness_of(settings))
    cap = float(cells.rate_cap_kg_ha.min())
    limits = {
        str(Limit.NEED): need,
        str(Limit.RATE_CAP): cap,
        str(Limit.ABSOLUTE): ABSOLUTE_PASS_KG_HA,
        str(Limit.CHANCE_OF_EXCESS): chance,
    }
    if float(cells.boron_mg_kg.mean()) >= float(cells.ceiling_mg_kg.mean()):
        limits[str(Limit.SOIL_CEILING)] = 0.0
    wanted = min(limits.values())
    by = next(Limit(name) for name, value in limits.items() if value == wanted)
    by = Limit.NOTHING if need == 0.0 and by is Limit.NEED else by
    if 0.0 < wanted < least_worth(settings):
        wanted, by = 0.0, Limit.LEAST_WORTH
    given = float(machine_rate(wanted, settings.product, settings.machine))
    if given < wanted - _slack(settings) or (wanted > 0.0 and given == 0.0):
        by = Limit.MACHINE
    return Ruled(need_kg_ha=need, wanted_kg_ha=wanted, boron_kg_ha=given, by=by, limits=limits)


def _slack(settings: RunSettings) -> float:
    """Rounding down by less than one step is not what ruled a rate."""
    return step_boron_kg_ha(settings.product, settings.machine) or EXACT_KG_HA


def least_worth(settings: RunSettings) -> float:
    """Rates under this are inside the laboratory's error; leaves and bands take small doses."""
    small = (Placement.FOLIAR, Placement.BAND, Placement.FERTIGATION)
    return 0.0 if settings.placement in small else limit("least-worth")


def plan_outcome(
    labels: Counts, need: CellNeed, settings: RunSettings, *, cell_ha: float
) -> PlanOutcome:
    """Rates and expected loss of a plan with labels 0 to k - 1 (-1 untreated), ``(n_cells,)``."""
    count = int(labels.max(initial=-1)) + 1
    rates = np.zeros(max(count, 0))
    for label in range(count):
        chosen = labels == label
        if chosen.any():
            rates[label] = ruled_rate(part_of(need, chosen), settings).boron_kg_ha
    rates = _of_one_pass(rates, labels, settings)
    per_cell = np.where(labels >= 0, rates[np.maximum(labels, 0)] if count else 0.0, 0.0)
    loss = expected_loss_kg_ha(need, per_cell, cost_ratio=settings.crop.cost_ratio)
    return PlanOutcome(rates_kg_ha=rates, loss_kg=float(loss.sum()) * cell_ha)


def _of_one_pass(rates: Floats, labels: Counts, settings: RunSettings) -> Floats:
    """What is left of a plan's rates where a spray's mix and nozzle are chosen to suit it."""
    ha = np.bincount(labels[labels >= 0], minlength=len(rates)).astype(float)
    doses = list(zip(ha.tolist(), rates.tolist(), strict=True))
    machine = settled_machine(doses, settings.product, settings.machine, settings.placement)
    return machine_rate(rates, settings.product, machine)


def cell_rates_kg_ha(need: CellNeed, settings: RunSettings) -> Floats:
    """The rate of every cell by itself under the same limits, ``(n_cells,)``."""
    most = limit("chance-of-excess")
    share = 1.0 / (1.0 + settings.crop.cost_ratio)
    uneven = unevenness_of(settings)
    wanted = _bisect_cells(lambda rate: chance_short_of_need(need, rate) > share, len(need.hot))
    allowed = _bisect_cells(
        lambda rate: chance_over_ceiling(need, rate, unevenness=uneven) <= most, len(need.hot)
    )
    rate = np.minimum(np.minimum(wanted, allowed), need.rate_cap_kg_ha)
    rate = np.where(need.hot, 0.0, np.minimum(rate, ABSOLUTE_PASS_KG_HA))
    rate = np.where(rate < least_worth(settings), 0.0, rate)
    return machine_rate(rate, settings.product, settings.machine)


def _bisect_cells(still_up: Callable[[Floats], Flags], count: int) -> Floats:
    low, high = np.zeros(count), np.full(count, 2.0 * ABSOLUTE_PASS_KG_HA)
    start = still_up(low)
    for _ in range(24):
        middle = 0.5 * (low + high)
        up = still_up(middle)
        low, high = np.where(up, middle, low), np.where(up, high, middle)
    return np.where(start, low, 0.0)

"""What all ways to zones share: the field made ready, and the zones before they are cut to it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
import shapely

from schorl.findings import Finding
from schorl.model.arrays import Flags, Floats
from schorl.model.field import CellGrid, Field
from schorl.model.prescription import CellNeed
from schorl.model.samples import Measured, SampleSet
from schorl.model.settings import RunSettings, ZoneSettings
from schorl.model.surface import Surface
from schorl.model.zones import CountFigure
from schorl.zoning.cover import Fixed, LabelOf
from schorl.zoning.features import SOIL
from schorl.zoning.loss import saving_range
from schorl.zoning.plans import Judge
from schorl.zoning.structure import structure_p
from schorl.zoning.travel import Ground, TravelGrid


@dataclass(frozen=True, eq=False, kw_only=True)
class Land:
    """A field ready for zoning: fixed areas cut out, plans judged on what is left."""

    field: Field
    grid: CellGrid
    samples: SampleSet
    surfaces: Mapping[str, Surface]
    need: CellNeed
    sample_need_kg_ha: Floats
    settings: RunSettings
    seed: int
    travel: TravelGrid
    ground: Ground
    fixed: tuple[Fixed, ...]
    use: Flags
    judge: Judge

    @property
    def zoning(self) -> ZoneSettings:
        """The job's settings for zones."""
        return self.settings.zoning

    def samples_in_use(self) -> Flags:
        """Samples outside the fixed areas, shape ``(n,)``."""
        places = self.samples.east_north_m
        free = np.ones(len(places), dtype=np.bool_)
        for one in self.fixed:
            free &= ~shapely.contains_xy(one.area, places)
        return free


@dataclass(frozen=True, eq=False, kw_only=True)
class Drawn:
    """Zones before they are cut to the field, and why they are so.

    ``numbers`` are given numbers by label; None where zones are numbered afresh. ``shares`` are
    the memberships ``(n_cells, k)`` of clusters.
    """

    origin: str
    reason: str
    lines: Sequence[shapely.Geometry] = ()
    label_of: LabelOf = field(default=lambda points: np.zeros(len(points), dtype=np.intp))
    tolerance_m: float = 0.0
    small_m2: float = 0.0
    numbers: tuple[int, ...] | None = None
    shares: Floats | None = None
    structure_p: float | None = None
    classes: int | None = None
    table: tuple[CountFigure, ...] = ()
    findings: tuple[Finding, ...] = ()

    def with_findings(self, *found: Finding) -> Drawn:
        """The same zones with more findings."""
        return replace(self, findings=self.findings + found)


def need_structure_p(land: Land) -> float:
    """Chance that samples without pattern look as patterned as those in use."""
    samples, free = land.samples, land.samples_in_use()
    properties = [measured.values[free] for _, measured in varying_soil(land)]
    return structure_p(
        samples.east_north_m[free], land.sample_need_kg_ha[free], properties, seed=land.seed
    )


def varying_soil(land: Land) -> list[tuple[str, Measured]]:
    """Name and samples of every soil property that is mapped and not one value for the field."""
    return [
        (name, land.samples.properties[name])
        for name in SOIL
        if name in land.surfaces and name in land.samples.properties
        if not land.surfaces[name].constant
    ]


def count_figures(
    land: Land,
    savings: Mapping[int, float],
    indices: Mapping[int, Mapping[str, float]] | None = None,
) -> tuple[CountFigure, ...]:
    """The table behind the choice: saving and its range for each number of zones."""
    rows = []
    for count, saving in sorted(savings.items()):
        low, high = saving_range(saving, len(land.samples)) if count > 1 else (0.0, 0.0)
        rows.append(
            CountFigure(
                count=count,
                saving=saving,
                saving_low=low,
                saving_high=high,
                indices=dict((indices or {}).get(count, {})),
            )
        )
    return tuple(rows)

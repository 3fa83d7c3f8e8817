"""Everything one run knows: what the report, the summary and the pack are made from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from dataclasses import field as dataclass_field

from schorl.findings import Finding
from schorl.model.field import CellGrid, Field
from schorl.model.prescription import CellNeed, Prescription
from schorl.model.samples import SampleSet
from schorl.model.settings import RunSettings
from schorl.model.surface import Surface
from schorl.model.tissue import ZoneLeaves


@dataclass(frozen=True, slots=True, kw_only=True)
class Recognition:
    """One thing that was read from a file and how it was understood."""

    what: str  # "boron"
    where: str  # "soil.csv, column `B (ppm)`"
    how: str  # "available boron in mg/kg (1 ppm = 1 mg/kg)"


@dataclass(frozen=True, eq=False, kw_only=True)
class RunRecord:
    """One run from input to rates, before anything is written."""

    field: Field
    grid: CellGrid
    samples: SampleSet
    surfaces: Mapping[str, Surface]  # "boron", "organic_matter", "clay"
    cell_need: CellNeed
    prescription: Prescription
    settings: RunSettings
    findings: tuple[Finding, ...]
    recognised: tuple[Recognition, ...] = ()
    assumptions: tuple[str, ...] = ()
    inputs_sha256: Mapping[str, str] = dataclass_field(default_factory=dict)
    versions: Mapping[str, str] = dataclass_field(default_factory=dict)
    adapted_from: str = ""
    leaf_checks: tuple[ZoneLeaves, ...] = ()  # evidence behind a foliar pass

"""What a reader gives back: the value if there is one, and everything it noticed."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date
from pathlib import Path
from typing import Generic, TypeVar

from schorl.findings import Finding
from schorl.model.record import Recognition

T = TypeVar("T")


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading(Generic[T]):
    """A value read from files, with findings and recognitions; ``value`` None after an error."""

    value: T | None
    findings: tuple[Finding, ...] = ()
    recognised: tuple[Recognition, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class SampleHints:
    """What a person says about a laboratory file; everything else is read from the file."""

    layer: str | None = None
    crs: str | None = None
    columns: Mapping[str, str] = field(default_factory=dict)  # property -> column header
    units: Mapping[str, str] = field(default_factory=dict)  # property -> unit
    method: str | None = None
    depth_cm: float | None = None
    report_depth_cm: float | None = None  # depth basis of lb/acre and kg/ha figures
    sampled_on: date | None = None
    laboratory: str = ""
    lab_relative_sd: float | None = None  # share of the value
    clay_pct: float | None = None
    organic_matter_pct: float | None = None
    cores: int | None = None
    keep_depth: str | None = None  # which of several depths
    zone_layer: Path | None = None  # sample zones joined by name
    zone_column: str | None = None
    strike_out: tuple[str, ...] = ()  # sample names to leave out
    average_duplicates: bool = False
    confirmed: tuple[str, ...] = ()  # samples whose odd values were repeated

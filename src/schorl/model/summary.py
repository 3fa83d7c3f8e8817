"""The record as plain numbers and words: the ``--json`` result and ``summary.json``.

Numbers are not rounded. NaN never appears: an unknown figure is None.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from schorl.model.record import RunRecord
from schorl.model.samples import PROPERTY_UNITS
from schorl.model.surface import Surface
from schorl.model.zones import ZoneMap

SCHEMA = 1


def plain(value: float | None) -> float | None:
    """A number that JSON can carry: None for NaN and infinity."""
    return None if value is None or not math.isfinite(value) else float(value)


def summary(record: RunRecord) -> dict[str, Any]:
    """Everything a person or program asks of a run, as JSON-ready values."""
    prescription = record.prescription
    return {
        "schema": SCHEMA,
        "field": {
            "name": record.field.name,
            "area_ha": record.field.area_ha,
            "epsg": record.field.epsg,
            "crs": record.field.crs,
        },
        "season": record.settings.season,
        "crop": _crop(record),
        "cells": {"size_m": record.grid.cell_m, "count": record.grid.n_cells},
        "samples": _samples(record),
        "surfaces": {name: _surface(one) for name, one in record.surfaces.items()},
        "audit": _audit(record),
        "zones": [_zone(record, place) for place in range(len(prescription.rates))],
        "zoning": _zoning(prescription.zone_map),
        "totals": {
            "boron_kg": prescription.boron_kg,
            "product": prescription.product_total,
            "unit": prescription.unit,
            "boron_pct": prescription.boron_pct,
            "boron_g_l": prescription.boron_g_l,
        },
        "outlook": plain_fields(prescription.field_outlook),
        "value": [plain_fields(plan) for plan in prescription.value],
        "saving": None if prescription.saving is None else list(prescription.saving),
        "machine": _machine(record),
        "advice": list(prescription.advice),
        "findings": [finding_row(found) for found in record.findings],
        "recognised": [plain_fields(one) for one in record.recognised],
        "assumptions": list(record.assumptions),
        "overrides": [plain_fields(one) for one in record.settings.overrides],
        "sources": [dict(row) for row in prescription.sources],
        "adapted_from": record.adapted_from,
        "profile": _profile(record),
        "leaf_checks": [plain_fields(one) for one in record.leaf_checks],
    }


def finding_row(found: Any) -> dict[str, Any]:
    """A finding as JSON-ready values."""
    return {
        "code": found.code,
        "severity": str(found.severity),
        "exit": found.exit,
        "where": found.where,
        "what": found.what,
        "hint": found.hint,
    }


def plain_fields(value: Any) -> dict[str, Any]:
    """The fields of a small frozen value; NaN becomes None, enumerations become words."""
    return {name: _json(getattr(value, name)) for name in value.__dataclass_fields__}


def _json(value: Any) -> Any:
    if isinstance(value, bool) or value is None:
        return value
    if isinstance(value, str):
        return str(value)
    if isinstance(value, int | float):
        return value if isinstance(value, int) else plain(value)
    if isinstance(value, Mapping):
        return {str(key): _json(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [_json(item) for item in value]
    if hasattr(value, "isoformat"):
        return value.isoformat()
    if hasattr(value, "__dataclass_fields__"):
        return plain_fields(value)
    return float(value)


def _profile(record: RunRecord) -> dict[str, Any] | None:
    """What the controller takes, with the unit its rate column has for this product."""
    profile = record.settings.profile
    if profile is None:
        return None
    return plain_fields(profile) | {"rate_unit": profile.rate_unit(record.prescription.unit)}


def _crop(record: RunRecord) -> dict[str, Any]:
    crop, settings = record.settings.crop, record.settings
    return {
        "crop": crop.crop,
        "next_crop": crop.next_crop,
        "interpretation": str(crop.interpretation),
        "form": str(settings.product.form),
        "placement": str(settings.placement),
    }


def _samples(record: RunRecord) -> dict[str, Any]:
    samples, campaign = record.samples, record.samples.campaign
    return {
        "count": len(samples),
        "kinds": sorted(set(samples.kind)),
        "method": campaign.method,
        "depth_cm": campaign.depth_cm,
        "sampled_on": _json(campaign.sampled_on),
        "laboratory": campaign.laboratory,
        "per_volume": campaign.per_volume,
        "lab_relative_sd": campaign.lab_relative_sd,
        "properties": {
            name: {
                "unit": PROPERTY_UNITS.get(name, ""),
                "known": int(one.known.sum()),
                "below_limit": int(one.below_limit.sum()),
            }
            for name, one in samples.properties.items()
        },
        "constants": dict(samples.constants),
    }


def _surface(surface: Surface) -> dict[str, Any]:
    fit, quality = surface.fit, surface.quality
    return {
        "unit": surface.unit,
        "transform": surface.transform,
        "family": None if fit is None else fit.family,
        "nugget": None if fit is None else plain(fit.nugget),
        "partial_sill": None if fit is None else plain(fit.partial_sill),
        "practical_range_m": None if fit is None else plain(fit.practical_range_m),
        "loo": None
        if quality is None
        else {
            "rmse": plain(quality.rmse),
            "skill": plain(quality.skill),
            "msdr": plain(quality.msdr),
            "coverage_90": plain(quality.coverage_90),
        },
        "mean": float(surface.estimate.mean()),
        "lowest": float(surface.estimate.min()),
        "highest": float(surface.estimate.max()),
        "verdict": str(surface.verdict),
        "reason": surface.reason,
    }


def _audit(record: RunRecord) -> dict[str, Any]:
    audits = {name: one.audit for name, one in record.surfaces.items() if one.audit is not None}
    return {
        "cells": sum(audit.cells for audit in audits.values()),
        "largest_difference": max((a.largest_difference for a in audits.values()), default=None),
        "by": {name: audit.by for name, audit in audits.items()},
    }


def _zone(record: RunRecord, place: int) -> dict[str, Any]:
    prescription = record.prescription
    rate = prescription.rates[place]
    zone = prescription.zone_map.zones[place]
    sureness = prescription.zone_map.sureness
    row = plain_fields(rate)
    outlook = row.pop("outlook")
    row |= {
        "kind": str(zone.kind),
        "product_unit": f"{prescription.unit}/ha",
        "chance_short": outlook["short_after"],
        "chance_over": outlook["over_after"],
        "chance_short_before": outlook["short_before"],
        "chance_over_before": outlook["over_before"],
        "loss_kg": outlook["loss_kg"],
        "sureness": sureness[place] if place < len(sureness) else None,
        "soil_mass_kg_ha_per_mg_kg": soil_mass(record, place),
    }
    return row


def soil_mass(record: RunRecord, place: int) -> float | None:
    """Mean over a zone's cells of kg B/ha for 1 mg/kg; None for a zone without a cell."""
    cells = record.prescription.zone_map.labels == place
    return plain(record.cell_need.mass_need[cells].mean()) if cells.any() else None


def _zoning(zone_map: ZoneMap) -> dict[str, Any]:
    return {
        "count": zone_map.count,
        "reason": zone_map.reason,
        "origin": zone_map.origin,
        "heading_deg": plain(zone_map.heading_deg),
        "structure_p": zone_map.structure_p,
        "classes_found": zone_map.classes_found,
        "too_narrow_ha": zone_map.too_narrow_ha,
        "table": [plain_fields(row) for row in zone_map.table],
        "retired_numbers": list(zone_map.retired_numbers),
    }


def _machine(record: RunRecord) -> dict[str, Any]:
    plan = record.prescription.machine
    return plain_fields(plan)

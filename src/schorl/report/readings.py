"""The facts that the page's script reads: every cell in a few kilobytes, zones, samples."""

from __future__ import annotations

import base64
import json
import zlib
from typing import Any

import numpy as np

from schorl.model.field import CellGrid
from schorl.model.record import RunRecord
from schorl.report.layers import Readings, readings_of
from schorl.report.map_svg import Sheet
from schorl.report.markup import Safe
from schorl.report.shown import Shown, figure
from schorl.report.words import RULED, kind_words, why_words

MISSING = 65535


def packed(readings: tuple[Readings, ...]) -> str:
    """All readings as 16-bit whole numbers, each less the one before, deflated, as base64.

    65535 stands for a missing value; larger values than fit are missing rather than wrong.
    """
    blocks = []
    for one in readings:
        whole = np.rint(one.values * 10.0**one.decimals)
        good = np.isfinite(whole) & (whole >= 0) & (whole < MISSING)
        counts = np.where(good, whole, MISSING).astype(np.int64)
        steps = np.diff(counts, prepend=0) & 0xFFFF
        blocks.append(steps.astype("<u2").tobytes())
    return base64.b64encode(zlib.compress(b"".join(blocks), 9)).decode("ascii")


def _row_runs(grid: CellGrid) -> list[int]:
    """Row, first column and length of every run of cells, one after the other."""
    said: list[int] = []
    for row in range(grid.rows):
        edges = np.flatnonzero(
            np.diff(np.concatenate([[0], grid.inside[row].astype(np.int8), [0]]))
        )
        for first, last in edges.reshape(-1, 2):
            said += [row, int(first), int(last - first)]
    return said


def map_facts(record: RunRecord, shown: Shown, sheet: Sheet) -> dict[str, Any]:
    """Grid, readings, zones and samples as the script wants them."""
    readings, grid = readings_of(record), record.grid
    x, y = sheet.place(grid.west_m, grid.north_m)
    units = {name: surface.unit for name, surface in record.surfaces.items()}
    return {
        "grid": {
            "x": x, "y": y, "cell": grid.cell_m, "rows": grid.rows, "cols": grid.cols,
            "count": grid.n_cells, "runs": _row_runs(grid),
        },
        "west": sheet.west_m, "north": sheet.north_m,
        "fields": [[one.name, one.decimals] for one in readings],
        "cells": packed(readings),
        "units": units,
        "constant": [name for name, one in record.surfaces.items() if one.constant],
        "zones": _zone_facts(record, shown),
        "samples": _sample_facts(record, sheet),
        "metre": 1 / 0.3048 if shown.us else 1,
        "length": shown.length_unit,
    }  # fmt: skip


def _zone_facts(record: RunRecord, shown: Shown) -> list[dict[str, str]]:
    prescription = record.prescription
    return [
        {
            "zone": str(rate.zone),
            "kind": kind_words(zone.kind),
            "rate": shown.rate(rate.product_rate),
            "boron": shown.boron_rate(rate.boron_kg_ha),
            "ruled": RULED[rate.ruled_by],
            "why": why_words(rate, shown),
        }
        for zone, rate in zip(prescription.zone_map.zones, prescription.rates, strict=True)
    ]


def _sample_facts(record: RunRecord, sheet: Sheet) -> list[list[object]]:
    boron = record.samples.properties.get("boron")
    rows: list[list[object]] = []
    for place, name in enumerate(record.samples.ids):
        east, north = (float(v) for v in record.samples.east_north_m[place])
        x, y = sheet.place(east, north)
        said = "boron not known"
        if boron is not None and boron.known[place]:
            sign = "under " if boron.below_limit[place] else ""
            said = f"boron {sign}{figure(float(boron.values[place]), 2)}"
        rows.append([str(name), round(x, 1), round(y, 1), said])
    return rows


def facts_script(facts: dict[str, Any]) -> Safe:
    """Facts as a block of data that no text in them can end."""
    said = json.dumps(facts, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for sign in "<>&":
        said = said.replace(sign, f"\\u{ord(sign):04x}")
    return Safe(f'<script type="application/json" id="facts">{said}</script>')

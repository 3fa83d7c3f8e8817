"""ISO 11783-10 task data: the product rate as a set point, in treatment zones or a grid.

Setpoint mass per area is DDI 6 in mg/m² (1 kg/ha = 100); setpoint volume per area is DDI 1 in
0.01 mm³/m² (1 L/ha = 10,000 counts). There is no boron entry in the data dictionary: the rate is
that of the product. Rules followed beyond the schema: identifiers without minus sign, closed
rings, a customer and farm above the field, polygons or a grid but never both, and an "off" zone for
position lost and out of field.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any
from xml.sax.saxutils import quoteattr

from schorl.errors import OutputProblem
from schorl.findings import finding
from schorl.formats.shapes import TASK_DECIMALS, ZoneShape, in_degrees
from schorl.formats.task_grid import (
    GRID_NAME,
    TaskGrid,
    code_bytes,
    grid_line,
    lay_task_grid,
    rate_bytes,
)
from schorl.model.profile import Profile
from schorl.model.record import RunRecord

MASS_DDI, MASS_COUNTS = "0006", 100.0  # counts for 1 kg/ha
VOLUME_DDI, VOLUME_COUNTS = "0001", 10_000.0  # counts for 1 L/ha
MOST_COUNTS = 2**31 - 1
OFF_CODE, TEMPLATE_CODE, MOST_CODES = 0, 1, 254
LONGEST = 32
#: Version as a profile names it -> major and minor in the file.
VERSIONS = {"4": (4, 3), "3.3": (3, 3)}
#: Layout as a profile names it -> type of the grid, None for polygons.
GRID_TYPES = {"zones": None, "grid 1": 1, "grid 2": 2}
FOLDER, XML_NAME = "TASKDATA", "TASKDATA.XML"


def counts_of(rate: float, unit: str) -> int:
    """A product rate as the integer in the file, rounded to the nearest."""
    return int(rate * (MASS_COUNTS if unit == "kg" else VOLUME_COUNTS) + 0.5)


def task_place(profile: Profile) -> str:
    """Where a pack holds its task data: ready for a stick in the usual form, apart in the others.

    Two sets are never in one place, since a terminal would read either.
    """
    grid = GRID_TYPES[profile.task_data_layout]
    if profile.task_data_version == "4" and grid is None:
        return FOLDER
    kind = "zones" if grid is None else f"grid{grid}"
    return f"task_data/v{profile.task_data_version[0]}-{kind}/{FOLDER}"


def task_files(
    record: RunRecord, shapes: Sequence[ZoneShape], profile: Profile
) -> dict[str, bytes]:
    """Names and bytes of a task data set as a profile wants it.

    Raises
    ------
    OutputProblem
        More zones than codes, or a rate that does not fit (exit 5).
    """
    if len(shapes) > MOST_CODES:
        what = f"{len(shapes)} zones; the format has codes for {MOST_CODES}"
        raise OutputProblem([finding("OUT-ZONES", where="task data", what=what)])
    counts = [_counts(record, shape) for shape in shapes]
    kind = GRID_TYPES[profile.task_data_layout]
    files: dict[str, bytes] = {}
    if kind is None:
        tail = _polygon_zones(record, shapes, counts)
    else:
        grid = lay_task_grid(record, shapes)
        tail, data = _grid_zones(record, shapes, counts, grid, kind)
        files[f"{GRID_NAME}.bin"] = data
    lines = [
        *_head_lines(profile.task_data_version),
        *_field_lines(record, version=profile.task_data_version),
        *_product_lines(record),
        *_task_line(record),
        *tail,
        "</TSK>",
        "</ISO11783_TaskData>",
    ]
    return {XML_NAME: ("\n".join(lines) + "\n").encode("utf-8"), **files}


def _head_lines(version: str) -> list[str]:
    major, minor = VERSIONS[version]
    return [
        '<?xml version="1.0" encoding="UTF-8"?>',
        f'<ISO11783_TaskData VersionMajor="{major}" VersionMinor="{minor}" '
        'ManagementSoftwareManufacturer="Schorl" ManagementSoftwareVersion="0.1" '
        'DataTransferOrigin="1">',
        f'<CTR A="CTR1" B={_text("unnamed")}/>',
        f'<FRM A="FRM1" B={_text("unnamed")} I="CTR1"/>',
    ]


def _counts(record: RunRecord, shape: ZoneShape) -> int:
    counts = counts_of(shape.rate.product_rate, record.prescription.unit)
    if not 0 <= counts <= MOST_COUNTS:
        what = f"rate {shape.rate.product_rate:g} of zone {shape.zone.number} does not fit"
        raise OutputProblem([finding("OUT-RATE", where="task data", what=what)])
    return counts


def _text(text: str) -> str:
    return quoteattr("".join(one for one in text if one.isprintable())[:LONGEST])


def _field_lines(record: RunRecord, *, version: str) -> list[str]:
    area_m2 = round(record.field.area_ha * 10_000)
    name = record.settings.field_name or record.field.name
    boundary = in_degrees(record.field.boundary, crs=record.field.crs, decimals=TASK_DECIMALS)
    lines = [f'<PFD A="PFD1" C={_text(name)} D="{area_m2}" E="CTR1" F="FRM1">']
    parts = _parts(boundary)
    if version == "4":
        for part in parts:
            lines += _polygon(part, kind=1)
    else:  # version 3 has one polygon a field, with an outer ring for each part
        lines += _polygon(*parts, kind=1)
    return [*lines, "</PFD>"]


def _product_lines(record: RunRecord) -> list[str]:
    prescription, product = record.prescription, record.settings.product
    share = (
        f"{prescription.boron_pct:g} % B"
        if prescription.boron_pct is not None
        else f"{prescription.boron_g_l or 0:g} g B/L"
    )
    name = f"{product.name or 'boron product'}"[: LONGEST - len(share) - 1] + f" {share}"
    mass = prescription.unit == "kg"
    scale, unit = ("0.01", "kg/ha") if mass else ("0.0001", "L/ha")
    return [
        f'<PDT A="PDT1" B={_text(name)}/>',
        f'<VPN A="VPN1" B="0" C="{scale}" D="2" E="{unit}"/>',
    ]


def _task_line(record: RunRecord) -> list[str]:
    name = f"boron {record.settings.season}"
    return [
        f'<TSK A="TSK1" B={_text(name)} C="CTR1" D="FRM1" E="PFD1" G="1" '
        f'H="{OFF_CODE}" I="{OFF_CODE}" J="{OFF_CODE}">',
        f'<TZN A="{OFF_CODE}" B="off">',
        _value(0, record.prescription.unit),
        "</TZN>",
    ]


def _polygon_zones(
    record: RunRecord, shapes: Sequence[ZoneShape], counts: Sequence[int]
) -> list[str]:
    lines = []
    for code, (shape, count) in enumerate(zip(shapes, counts, strict=True), start=1):
        lines.append(f'<TZN A="{code}" B="zone {shape.zone.number}">')
        for part in shape.parts:
            lines += _polygon(part, kind=2)
        lines += [_value(count, record.prescription.unit), "</TZN>"]
    return lines


def _grid_zones(
    record: RunRecord,
    shapes: Sequence[ZoneShape],
    counts: Sequence[int],
    grid: TaskGrid,
    kind: int,
) -> tuple[list[str], bytes]:
    """Zones by code (type 1), or one template whose rates stand in the cells (type 2)."""
    unit = record.prescription.unit
    if kind == 2:
        data = rate_bytes(grid, counts)
        template = [f'<TZN A="{TEMPLATE_CODE}" B="rates of cells">', _value(0, unit), "</TZN>"]
        line = grid_line(grid, kind=2, data=data, zone_code=TEMPLATE_CODE)
        return [*template, line], data
    lines = []
    for code, (shape, count) in enumerate(zip(shapes, counts, strict=True), start=1):
        lines += [
            f'<TZN A="{code}" B="zone {shape.zone.number}">', _value(count, unit), "</TZN>",
        ]  # fmt: skip
    data = code_bytes(grid, off_code=OFF_CODE)
    return [*lines, grid_line(grid, kind=1, data=data)], data


def _value(counts: int, unit: str) -> str:
    ddi = MASS_DDI if unit == "kg" else VOLUME_DDI
    return f'<PDV A="{ddi}" B="{counts}" C="PDT1" E="VPN1"/>'


def _parts(geometry: Any) -> list[Any]:
    import shapely

    return list(shapely.get_parts(geometry))


def _polygon(*parts: Any, kind: int) -> list[str]:
    lines = [f'<PLN A="{kind}">']
    rings = [
        (place, ring)
        for part in parts
        for place, ring in enumerate([part.exterior, *part.interiors])
    ]
    for place, ring in rings:
        lines.append(f'<LSG A="{1 if place == 0 else 2}">')
        lines += [
            f'<PNT A="2" C="{north:.{TASK_DECIMALS}f}" D="{east:.{TASK_DECIMALS}f}"/>'
            for east, north in ring.coords
        ]
        lines.append("</LSG>")
    return [*lines, "</PLN>"]

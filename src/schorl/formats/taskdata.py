"""ISO 11783-10 task data: treatment zones with the product rate as a set point.

Setpoint mass per area is DDI 6 in mg/m² (1 kg/ha = 100); setpoint volume per area is DDI 1 in
0.01 mm³/m² (1 L/ha = 10,000 counts). There is no boron entry in the data dictionary: the rate is
that of the product. Rules followed beyond the schema: identifiers without minus sign, closed
rings, a customer and farm above the field, and an "off" zone for position lost and out of field.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any
from xml.sax.saxutils import quoteattr

from schorl.errors import OutputProblem
from schorl.findings import finding
from schorl.formats.shapes import TASK_DECIMALS, ZoneShape, in_degrees
from schorl.model.record import RunRecord

MASS_DDI, MASS_COUNTS = "0006", 100.0  # counts for 1 kg/ha
VOLUME_DDI, VOLUME_COUNTS = "0001", 10_000.0  # counts for 1 L/ha
MOST_COUNTS = 2**31 - 1
OFF_CODE, MOST_CODES = 0, 254
LONGEST = 32
VERSIONS = {"4": (4, 3), "3": (3, 3)}


def counts_of(rate: float, unit: str) -> int:
    """A product rate as the integer in the file, rounded to the nearest."""
    return int(rate * (MASS_COUNTS if unit == "kg" else VOLUME_COUNTS) + 0.5)


def taskdata_bytes(record: RunRecord, shapes: Sequence[ZoneShape], *, version: str = "4") -> bytes:
    """TASKDATA.XML with one treatment zone a zone.

    Raises
    ------
    OutputProblem
        More zones than codes, or a rate that does not fit.
    """
    if len(shapes) > MOST_CODES:
        what = f"{len(shapes)} zones; the format has codes for {MOST_CODES}"
        raise OutputProblem([finding("OUT-ZONES", where="task data", what=what)])
    major, minor = VERSIONS[version]
    lines = [
        '<?xml version="1.0" encoding="UTF-8"?>',
        f'<ISO11783_TaskData VersionMajor="{major}" VersionMinor="{minor}" '
        'ManagementSoftwareManufacturer="Schorl" ManagementSoftwareVersion="0.1" '
        'DataTransferOrigin="1">',
        f'<CTR A="CTR1" B={_text("unnamed")}/>',
        f'<FRM A="FRM1" B={_text("unnamed")} I="CTR1"/>',
        *_field_lines(record),
        *_product_lines(record),
        *_task_lines(record, shapes),
        "</ISO11783_TaskData>",
    ]
    return ("\n".join(lines) + "\n").encode("utf-8")


def _text(text: str) -> str:
    return quoteattr("".join(one for one in text if one.isprintable())[:LONGEST])


def _field_lines(record: RunRecord) -> list[str]:
    area_m2 = round(record.field.area_ha * 10_000)
    name = record.settings.field_name or record.field.name
    boundary = in_degrees(record.field.boundary, crs=record.field.crs, decimals=TASK_DECIMALS)
    lines = [f'<PFD A="PFD1" C={_text(name)} D="{area_m2}" E="CTR1" F="FRM1">']
    for part in _parts(boundary):
        lines += _polygon(part, kind=1)
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


def _task_lines(record: RunRecord, shapes: Sequence[ZoneShape]) -> list[str]:
    unit = record.prescription.unit
    name = f"boron {record.settings.season}"
    lines = [
        f'<TSK A="TSK1" B={_text(name)} C="CTR1" D="FRM1" E="PFD1" G="1" '
        f'H="{OFF_CODE}" I="{OFF_CODE}" J="{OFF_CODE}">',
        f'<TZN A="{OFF_CODE}" B="off">',
        _value(0, unit),
        "</TZN>",
    ]
    for code, shape in enumerate(shapes, start=1):
        counts = counts_of(shape.rate.product_rate, unit)
        if not 0 <= counts <= MOST_COUNTS:
            what = f"rate {shape.rate.product_rate:g} of zone {shape.zone.number} does not fit"
            raise OutputProblem([finding("OUT-RATE", where="task data", what=what)])
        lines.append(f'<TZN A="{code}" B="zone {shape.zone.number}">')
        for part in shape.parts:
            lines += _polygon(part, kind=2)
        lines += [_value(counts, unit), "</TZN>"]
    return [*lines, "</TSK>"]


def _value(counts: int, unit: str) -> str:
    ddi = MASS_DDI if unit == "kg" else VOLUME_DDI
    return f'<PDV A="{ddi}" B="{counts}" C="PDT1" E="VPN1"/>'


def _parts(geometry: Any) -> list[Any]:
    import shapely

    return list(shapely.get_parts(geometry))


def _polygon(part: Any, *, kind: int) -> list[str]:
    lines = [f'<PLN A="{kind}">']
    for place, ring in enumerate([part.exterior, *part.interiors]):
        lines.append(f'<LSG A="{1 if place == 0 else 2}">')
        lines += [
            f'<PNT A="2" C="{north:.{TASK_DECIMALS}f}" D="{east:.{TASK_DECIMALS}f}"/>'
            for east, north in ring.coords
        ]
        lines.append("</LSG>")
    return [*lines, "</PLN>"]

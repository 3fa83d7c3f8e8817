"""Pictures and paper through one engraver (typst): the rate map to send, the job sheet's PDF."""

from __future__ import annotations

import json
from functools import lru_cache
from importlib.resources import as_file, files
from typing import Any

from schorl.model.record import RunRecord
from schorl.report.words import shown_of, what_to_do
from schorl.report.zones_svg import rate_map_svg

PICTURE_PPI = 150.0


@lru_cache(maxsize=4)
def template(name: str) -> bytes:
    """A template of the package."""
    return (files("schorl.report") / "templates" / name).read_bytes()


def engrave(name: str, facts: dict[str, Any], *, kind: str, ppi: float | None = None) -> bytes:
    """Set a template with facts; the same bytes from the same facts.

    Facts go in as one JSON text and are shown as text, so that nothing in them is a command.
    System fonts are not looked at, and the time in the file is fixed.
    """
    import typst

    said = json.dumps(facts, ensure_ascii=False, allow_nan=False, sort_keys=True)
    with as_file(files("schorl.report") / "fonts") as fonts:
        made = typst.compile(
            template(name),
            format=kind,  # type: ignore[call-overload]
            ppi=ppi,
            font_paths=[str(fonts)],
            ignore_system_fonts=True,
            sys_inputs={"facts": said},
            pdf_standards=["ua-1"] if kind == "pdf" else [],
            timestamp=0,
        )
    return bytes(made)


def rate_map_png(record: RunRecord) -> bytes:
    """The rate map as a picture to send: title, rates in their zones, what to spread.

    PNG, about 1,000 pixels wide; the same bytes from the same record.
    """
    shown = shown_of(record)
    aside = any(zone.kind != "zone" for zone in record.prescription.zone_map.zones)
    hatched = "; hatched: keep-off area or hot spot" if aside else ""
    facts = {
        "title": f"{record.settings.field_name}, {record.settings.season}",
        "what": f"Rates of product in {shown.rate_unit}{hatched}",
        "words": what_to_do(record, shown),
        "decides": "The product label, local codes and a licensed adviser decide.",
        "map": rate_map_svg(record, shown),
    }
    return engrave("rate_map.typ", facts, kind="png", ppi=PICTURE_PPI)

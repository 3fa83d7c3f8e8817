"""Sections of the page about trust: surfaces, inputs, assumptions, findings, sources."""

from __future__ import annotations

from dataclasses import fields, is_dataclass
from enum import StrEnum
from typing import Any

from schorl.agronomy.laboratory import lab_relative_sd
from schorl.findings import Severity
from schorl.model.record import RunRecord
from schorl.model.samples import PROPERTY_UNITS
from schorl.model.sourced import STATUSES
from schorl.model.surface import Surface
from schorl.report import charts
from schorl.report.markup import Safe, join, table, tag
from schorl.report.sections_answer import section
from schorl.report.shown import Shown, figure, percent
from schorl.report.words import PROPERTY, fit_words, verdict_words


def surface_section(record: RunRecord, shown: Shown) -> Safe:
    """How far each surface may be trusted: words, figures, two drawings."""
    cards = [_surface(name, one, shown) for name, one in record.surfaces.items()]
    return section("trust", "How far the maps may be trusted", *cards)


def _surface(name: str, surface: Surface, shown: Shown) -> Safe:
    title = PROPERTY.get(name, name.replace("_", " ").capitalize())
    head = tag("h3", title, " ", tag("span", str(surface.verdict), class_="verdict"))
    parts: list[object] = [head, tag("p", verdict_words(surface))]
    if surface.reason:
        parts.append(tag("p", f"Why this verdict: {surface.reason}.".replace("..", ".")))
    drawn = []
    if surface.fit is not None:
        plot = charts.variogram_plot(surface, shown)
        drawn.append(tag("figure", plot, tag("figcaption", fit_words(surface, shown))))
    if surface.quality is not None:
        drawn.append(_loo_figure(surface))
    if drawn:
        parts.append(tag("div", *drawn, class_="pair"))
    if surface.audit is not None:
        audit = surface.audit
        said = (
            f"Second opinion by {audit.by} on {audit.cells} cells: largest difference "
            f"{audit.largest_difference:.1g} of the data's standard deviation."
        )
        parts.append(tag("p", said, class_="soft"))
    return tag("article", *parts, class_="surface")


def _loo_figure(surface: Surface) -> Safe:
    quality = surface.quality
    assert quality is not None
    said = (
        f"Left out in turn: skill {figure(quality.skill, 2)}, typical error {quality.rmse:.2g} "
        f"{surface.unit}, squared error over kriging variance {figure(quality.msdr, 2)} (1 is right), "
        f"{percent(quality.coverage_90)} inside their 90 % range"
    )
    return tag("figure", charts.loo_plot(surface), tag("figcaption", said))


def input_section(record: RunRecord, shown: Shown) -> Safe:
    """What was read and how it was understood; every assumption and every setting."""
    return section(
        "inputs", "Inputs and assumptions",
        _recognised(record), _sample_table(record), _assumptions(record),
        tag("h3", "Settings"), _settings_table(record, shown),
        tag("h3", "Files and versions"), _files_table(record),
    )  # fmt: skip


def _recognised(record: RunRecord) -> Safe:
    rows = [[one.what, tag("span", one.where), tag("span", one.how)] for one in record.recognised]
    field = record.field
    place = f"EPSG:{field.epsg}" if field.epsg else field.crs
    said = (
        f"Field {field.name}: {field.area_ha:.2f} ha on the ellipsoid, worked in {place}, "
        f"{record.grid.n_cells:,} cells of {record.grid.cell_m:g} m."
    )
    made = table(["What", "Where", "Understood as"], rows, caption="What was read") if rows else ""
    return join([tag("p", said), made])


def _sample_table(record: RunRecord) -> Safe:
    samples, campaign = record.samples, record.samples.campaign
    rows = []
    for name, one in samples.properties.items():
        rows.append(
            [
                PROPERTY.get(name, name.replace("_", " ").capitalize()),
                tag("span", PROPERTY_UNITS.get(name, "")),
                str(int(one.known.sum())),
                str(int(one.below_limit.sum())),
                tag("span", charts.spread_of(one.values)),
            ]
        )
    when = "" if campaign.sampled_on is None else f", {campaign.sampled_on.isoformat()}"
    assumed = " (not said: assumed)" if campaign.lab_relative_sd is None else ""
    said = (
        f"{len(samples)} samples ({', '.join(sorted(set(samples.kind)))}), boron by "
        f"{campaign.method}, 0 to {campaign.depth_cm:g} cm{when}"
        f"{', ' + campaign.laboratory if campaign.laboratory else ''}; laboratory repeatability "
        f"{100 * lab_relative_sd(campaign):.0f} % of the value{assumed}."
    )
    declared = ", ".join(f"{name} {value:g}" for name, value in samples.constants.items())
    more = tag("p", f"Declared, not measured: {declared}.") if declared else ""
    head = ["Property", "Unit", "Known", "Below the reporting limit", "Values"]
    return join([tag("h3", "Samples"), tag("p", said), table(head, rows, caption="Samples"), more])


def _assumptions(record: RunRecord) -> Safe:
    said = [tag("li", one) for one in record.assumptions]
    said = said or [tag("li", "None: everything was given.")]
    return join([tag("h3", "Assumed, because nobody said otherwise"), tag("ul", *said)])


def _settings_table(record: RunRecord, shown: Shown) -> Safe:
    settings = record.settings
    rows = [
        ("season", settings.season),
        ("placement", str(settings.placement)),
        ("seed", str(settings.seed)),
        ("units shown", str(shown.system)),
    ]
    for group, value in (
        ("crop", settings.crop),
        ("product", settings.product),
        ("machine", settings.machine),
        ("zones", settings.zoning),
    ):
        rows += [
            (name if name == group else f"{group}: {name}", said)
            for name, said in _plain_fields(value)
        ]
    pairs = [tag("div", tag("dt", name), tag("dd", said)) for name, said in rows]
    return tag("dl", *pairs, class_="settings")


def _plain_fields(value: Any) -> list[tuple[str, str]]:
    """Settings that were given or have a default, as words; empty ones are left out."""
    said = []
    for one in fields(value):
        held = getattr(value, one.name)
        if held is None or held is False or held in ("", ()):
            continue
        name, unit = _name_and_unit(one.name)
        if isinstance(held, tuple):
            words = f"{len(held)} given"
        elif isinstance(held, StrEnum | str):
            words = str(held)
        elif isinstance(held, bool):
            words = "yes"
        elif is_dataclass(held):
            continue
        else:
            words = f"{held:g} {unit}".strip()
        said.append((name, words))
    return said


UNIT_ENDS = {
    "_mg_kg": "mg/kg", "_mg_l": "mg/L", "_kg_ha": "kg/ha", "_t_ha": "t/ha", "_g_l": "g/L",
    "_kg_l": "kg/L", "_g_cm3": "g/cm³", "_km_h": "km/h", "_l_ha": "L/ha", "_pct": "%", "_ha": "ha",
    "_mm": "mm", "_cm": "cm", "_bar": "bar", "_deg": "°", "_kg": "kg", "_l": "L", "_m": "m", "_s": "s",
}  # fmt: skip


def _name_and_unit(name: str) -> tuple[str, str]:
    for end, unit in UNIT_ENDS.items():
        if name.endswith(end):
            return name[: -len(end)].replace("_", " "), unit
    return name.replace("_", " "), ""


def _files_table(record: RunRecord) -> Safe:
    rows = [[name, tag("code", digest)] for name, digest in sorted(record.inputs_sha256.items())]
    versions = ", ".join(f"{name} {said}" for name, said in record.versions.items())
    adapted = tag("p", f"Adapted from {record.adapted_from}.") if record.adapted_from else ""
    files = table(["Input", "SHA-256"], rows, caption="Input files") if rows else ""
    return join([files, tag("p", f"Made with {versions}.", class_="soft"), adapted])


def finding_section(record: RunRecord) -> Safe:
    """Everything the checks noticed, the gravest first."""
    order = {Severity.ERROR: 0, Severity.WARNING: 1, Severity.NOTE: 2}
    found = sorted(record.findings, key=lambda one: order[one.severity])
    rows = [
        [
            tag("span", str(one.severity), class_=f"grade {one.severity}"),
            tag("span", one.where),
            tag("span", one.what),
            tag("span", one.hint),
            tag("code", one.code),
        ]
        for one in found
    ]
    if not rows:
        return section("findings", "Findings", tag("p", "The checks noticed nothing."))
    head = ["Grade", "Where", "What", "Way out", "Code"]
    return section("findings", "Findings", table(head, rows, caption="Findings"))


def source_section(record: RunRecord) -> Safe:
    """Every figure that was used, where it comes from and how far it was checked."""
    rows = []
    for row in record.prescription.sources:
        value = f"{row['value']} {row['unit']}".strip()
        rows.append(
            [
                tag("span", row.get("key") or f"{row['table']}: {row['row']}"),
                tag("span", value),
                tag("span", row["status"]),
                tag("span", row["source"], *_address(row.get("address", ""))),
            ]
        )
    if not rows:
        return section("sources", "Sources", tag("p", "No built-in figure was used."))
    head = ["Table: row", "Value", "Standing", "Source"]
    met = dict.fromkeys(row["status"] for row in record.prescription.sources)
    words = [f"{name}: {STATUSES[name]}" for name in STATUSES if name in met]
    note = f"Standing of a figure. {'; '.join(words)}. `schorl tables` prints every row."
    return section(
        "sources", "Sources of the figures", table(head, rows, caption="Sources"),
        tag("p", note, class_="soft"),
    )  # fmt: skip


def _address(address: str) -> tuple[object, ...]:
    return (" ", tag("span", address, class_="soft address")) if address else ()

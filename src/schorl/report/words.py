"""Plain sentences about a run, and the closing table of the terminal."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence

from schorl.model.prescription import Limit, ZoneRate
from schorl.model.record import RunRecord
from schorl.model.settings import Form
from schorl.model.surface import Surface, Verdict
from schorl.model.tissue import ZoneLeaves
from schorl.model.zones import ZoneKind
from schorl.report.shown import UNKNOWN, Shown, figure, percent

WIDTH = 80

#: What ruled a rate, as the end of "held by ...".
RULED: Mapping[Limit, str] = {
    Limit.NEED: "what is asked for",
    Limit.RATE_CAP: "the rate cap of crop and placement",
    Limit.ABSOLUTE: "the absolute limit of one pass",
    Limit.CARRY_OVER: "boron given earlier",
    Limit.CHANCE_OF_EXCESS: "the chance of passing the soil ceiling",
    Limit.SOIL_CEILING: "soil already at its ceiling",
    Limit.HOT_SPOT: "a hot spot, kept untreated",
    Limit.KEEP_OFF: "a keep-off area",
    Limit.MACHINE: "what the machine can do",
    Limit.LEAST_WORTH: "a need too small to be worth a pass",
    Limit.LOWERED: "a person who lowered it",
    Limit.NOTHING: "nothing needed",
}

#: The same in one or two words where they alone would be unclear.
SHORTLY: Mapping[Limit, str] = {
    Limit.NEED: "what is needed",
    Limit.NOTHING: "no need",
    Limit.LEAST_WORTH: "too little to give",
}

PROPERTY = {"boron": "Boron", "organic_matter": "Organic matter", "clay": "Clay", "ph": "pH"}


def shown_of(record: RunRecord) -> Shown:
    """The units of a record's report."""
    return Shown(record.settings.units, record.prescription.unit)


def product_words(record: RunRecord) -> str:
    """The product by name and strength, or what the mix holds."""
    product, prescription = record.settings.product, record.prescription
    name = product.name or ("boron granules" if product.form is Form.GRANULE else "boron spray")
    if prescription.boron_pct is not None:
        return f"{name} ({prescription.boron_pct:g} % boron)"
    if prescription.boron_g_l is not None:
        strength = f"{prescription.boron_g_l:.3g} g boron a litre"
        mixed = record.settings.machine.mix_g_b_l is not None
        return f"tank mix of {name} ({strength})" if mixed else f"{name} ({strength})"
    return name


def treated(record: RunRecord) -> tuple[ZoneRate, ...]:
    """Zones that get boron."""
    return tuple(rate for rate in record.prescription.rates if rate.boron_kg_ha > 0)


def areas_ha(record: RunRecord) -> tuple[float, float]:
    """Treated and untreated hectares."""
    fed = sum(rate.area_ha for rate in treated(record))
    return fed, sum(rate.area_ha for rate in record.prescription.rates) - fed


def listed(words: Sequence[object]) -> str:
    """Words as in 1, 2 and 3."""
    said = [str(word) for word in words]
    return said[0] if len(said) == 1 else f"{', '.join(said[:-1])} and {said[-1]}" if said else ""


def what_to_do(record: RunRecord, shown: Shown) -> str:
    """One paragraph: what to load, where it goes, where nothing goes, what it does."""
    prescription, rates = record.prescription, treated(record)
    fed_ha, left_ha = areas_ha(record)
    if not rates:
        return f"Spread nothing: {_why_nothing(record)}. {outlook_words(record)}"
    verb = "Spray" if record.settings.product.form is Form.SPRAY else "Spread"
    figures = sorted({shown.rate_figure(rate.product_rate) for rate in rates}, key=_number)
    span = figures[0] if len(figures) == 1 else f"{figures[0]} to {figures[-1]}"
    said = (
        f"{verb} {shown.amount(prescription.product_total)} of {product_words(record)} on "
        f"{shown.area(fed_ha)} at {span} {shown.rate_unit}; that is "
        f"{shown.boron(prescription.boron_kg)} of boron."
    )
    if left_ha > 0.005:
        numbers = [rate.zone for rate in prescription.rates if rate.boron_kg_ha == 0]
        word = "zone" if len(numbers) == 1 else "zones"
        said += f" Leave {shown.area(left_ha)} untreated ({word} {listed(numbers)})."
    return f"{said} {outlook_words(record)}"


def _number(said: str) -> float:
    return float(said.replace(",", ""))


def _why_nothing(record: RunRecord) -> str:
    kinds = Counter(rate.ruled_by for rate in record.prescription.rates)
    if not kinds:
        return "there are no zones"
    return f"every zone is held at nothing, most often by {RULED[kinds.most_common(1)[0][0]]}"


def outlook_words(record: RunRecord) -> str:
    """What is likely short before and after, and over after, as shares of the area."""
    look = record.prescription.field_outlook
    said = f"As it is, {percent(look.short_before)} of the area is likely short of its target"
    if not treated(record):
        return f"{said}, and {percent(look.over_before)} over the soil ceiling."
    return (
        f"{said}. The next soil test shows only about 30 % of a dose: by it "
        f"{percent(look.short_after)} would still read short, and if all of the dose stays, "
        f"{percent(look.over_after)} would be over the soil ceiling."
    )


def verdict_words(surface: Surface) -> str:
    """How far a surface may be trusted, for people who do not krige."""
    if surface.verdict is Verdict.CONSTANT:
        return (
            f"One figure, {figure(float(surface.estimate.mean()), 1)} {surface.unit}, was declared "
            "for the whole field and not measured. The map cannot show differences in it."
        )
    opening = {
        Verdict.PATTERN: "A pattern was found: the map can be used to tell places apart.",
        Verdict.WEAK: (
            "Only a weak pattern was found: the map hints at where values are lower or higher, "
            "and its ranges are wide."
        ),
        Verdict.NONE: (
            "No pattern was found: samples close together are no more alike than samples far "
            "apart. The field mean stands everywhere; do not read differences into the map."
        ),
    }[surface.verdict]
    return f"{opening} {_skill_words(surface)}".strip()


def _skill_words(surface: Surface) -> str:
    quality = surface.quality
    if quality is None:
        return ""
    held = f"{percent(quality.coverage_90)} of the samples lie inside their range (90 % expected)"
    if quality.skill <= 0:
        return f"Left out in turn, the samples are told no better than by the field mean; {held}."
    share = percent(quality.skill)
    return (
        "Each sample was left out in turn and told from the others: the map explains "
        f"{share} of the differences, is typically off by {quality.rmse:.2g} {surface.unit}, "
        f"and {held}."
    )


def fit_words(surface: Surface, shown: Shown) -> str:
    """The fitted variogram in one line."""
    fit = surface.fit
    if fit is None:
        return ""
    family = {"matern32": "Matérn 3/2"}.get(fit.family, fit.family)
    scale = "logarithm" if fit.transform == "log" else surface.unit
    turned = ""
    if fit.stretch != 1.0:
        turned = f", stretched {fit.stretch:.2g} times towards {fit.stretch_deg:.0f}°"
    return (
        f"{family}, nugget {fit.nugget:.3g}, partial sill {fit.partial_sill:.3g} (scale: {scale}), "
        f"practical range {shown.length(fit.practical_range_m)}{turned}; "
        "fitted by restricted maximum likelihood to all samples at once; the dots are for the eye"
    )


def why_words(rate: ZoneRate, shown: Shown) -> str:
    """Why a zone gets its rate; the reason of the rating itself where units are metric."""
    if not shown.us:
        return rate.why
    return (
        f"boron {figure(rate.boron_mean_mg_kg, 2)} ± {figure(rate.boron_sd_mg_kg, 2)} ppm against a "
        f"target of {figure(rate.target_mg_kg, 2)}: the test asks for "
        f"{shown.boron_rate(rate.need_kg_ha)}; given {shown.boron_rate_figure(rate.boron_kg_ha)} "
        f"({RULED[rate.ruled_by]})"
    )


def kind_words(kind: ZoneKind) -> str:
    """What sort of zone."""
    return {
        ZoneKind.ZONE: "management zone",
        ZoneKind.HOT_SPOT: "hot spot",
        ZoneKind.KEEP_OFF: "keep-off area",
    }[kind]


def shortened(said: str, width: int) -> str:
    """A text in at most ``width`` characters."""
    said = " ".join(said.split())
    return said if len(said) <= width else said[: width - 1].rstrip() + "…"


def closing_table(record: RunRecord) -> str:
    """What a run came to, in at most 80 columns, for the terminal."""
    shown, settings = shown_of(record), record.settings
    heading = (
        f"{settings.field_name}, {settings.season}: {settings.crop.crop}, "
        f"{shown.area(record.field.area_ha)}, {len(record.samples)} samples"
    )
    lines = [shortened(heading, WIDTH), *_wrapped(what_to_do(record, shown)), ""]
    lines += _zone_lines(record, shown)
    lines += ["", *_quality_lines(record)]
    counts = Counter(str(found.severity) for found in record.findings)
    said = [f"{counts[word]} {word}{'s' if counts[word] > 1 else ''}" for word in counts]
    if said:
        lines += _wrapped(f"Findings: {listed(sorted(said))}; the report lists them.")
    return "\n".join(lines)


def leaf_table(zones: Sequence[ZoneLeaves]) -> str:
    """What leaves say of each zone, in at most 80 columns, for the terminal."""
    import textwrap

    lines = []
    for one in zones:
        head = f"zone {one.zone}: {one.verdict}"
        lines += [
            head,
            *textwrap.wrap(one.why, WIDTH - 2, initial_indent="  ", subsequent_indent="  "),
        ]
    return "\n".join(lines)


def _wrapped(said: str) -> list[str]:
    import textwrap

    return textwrap.wrap(said, WIDTH)


def _zone_lines(record: RunRecord, shown: Shown) -> list[str]:
    layout = "{:>4} {:>7} {:>11} {:>6} {:>11} {:>7} {:>6}  {}"
    unit = record.surfaces["boron"].unit if "boron" in record.surfaces else "mg/kg"
    lines = [
        layout.format("zone", "area", "boron", "target", "short", "rate", "boron", "held by"),
        layout.format(
            "", shown.area_unit, unit, unit, "now→after", shown.rate_unit,
            shown.boron_rate_unit, "",
        ),
    ]  # fmt: skip
    for rate in record.prescription.rates:
        look = rate.outlook
        lines.append(
            layout.format(
                rate.zone,
                shown.area_figure(rate.area_ha),
                f"{figure(rate.boron_mean_mg_kg, 2)} ± {figure(rate.boron_sd_mg_kg, 2)}",
                figure(rate.target_mg_kg, 2),
                f"{100 * look.short_before:.0f} → {100 * look.short_after:.0f} %",
                shown.rate_figure(rate.product_rate),
                shown.boron_rate_figure(rate.boron_kg_ha),
                SHORTLY.get(rate.ruled_by, str(rate.ruled_by)),
            ).rstrip()
        )
    return [line if len(line) <= WIDTH else shortened_end(line) for line in lines]


def shortened_end(line: str) -> str:
    """A line cut at 80 columns, its spacing kept."""
    return line[: WIDTH - 1] + "…"


def _quality_lines(record: RunRecord) -> list[str]:
    said = []
    for name, surface in record.surfaces.items():
        skill = "" if surface.quality is None else f", skill {percent(surface.quality.skill)}"
        said.append(f"{PROPERTY.get(name, name).lower()} {surface.verdict}{skill}")
    return _wrapped("Surfaces: " + "; ".join(said or [UNKNOWN]) + ".")

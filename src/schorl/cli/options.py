"""Options that say the same facts as a job file, in one table for `new` and `prescribe`."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from datetime import date
from pathlib import Path
from typing import Any

import click

from schorl.errors import UsageProblem
from schorl.findings import finding
from schorl.jobs import check_job, lay_over, load_job

FILE = click.Path(path_type=Path)
DAY = click.DateTime(formats=["%Y-%m-%d"])
PLACEMENTS = click.Choice(
    ["broadcast", "incorporated", "band", "seed row", "foliar", "fertigation"]
)
INTERPRETATIONS = click.Choice(["crop need", "texture line", "class table", "own"])


class NameOrFile(click.ParamType):  # type: ignore[type-arg]
    """The name of a profile, or a TOML file, whose path counts from here."""

    name = "NAME|FILE"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> str | Path:
        """A path where it ends like one."""
        return Path(value) if str(value).lower().endswith(".toml") else str(value)


#: flag, place in the job, type, help
FACTS: tuple[tuple[str, str, Any, str], ...] = (
    ("--boundary", "boundary.file", FILE, "Field boundary: GeoJSON, shapefile, GeoPackage, KML."),
    ("--boundary-layer", "boundary.layer", str, "Layer of the boundary file."),
    ("--boundary-crs", "boundary.crs", str, "Coordinate system of the boundary, e.g. EPSG:32633."),
    (
        "--samples",
        "samples.file",
        FILE,
        "Laboratory file: CSV, XLSX, GeoJSON, shapefile, GeoPackage.",
    ),
    ("--samples-layer", "samples.layer", str, "Layer or sheet of the laboratory file."),
    ("--samples-crs", "samples.crs", str, "Coordinate system of the samples."),
    ("--sampled-on", "samples.sampled_on", DAY, "Day of sampling, YYYY-MM-DD."),
    ("--depth-cm", "samples.depth_cm", float, "Sampling depth."),
    ("--method", "samples.method", str, 'Boron extraction: "hot water", "mehlich-3", ...'),
    ("--laboratory", "samples.laboratory", str, "Name of the laboratory, for the record."),
    (
        "--lab-sd-pct",
        "samples.lab_relative_sd_pct",
        float,
        "Laboratory repeatability, % [`schorl tables limits`].",
    ),
    ("--clay-pct", "samples.clay_pct", float, "One clay figure for the whole field."),
    ("--organic-matter-pct", "samples.organic_matter_pct", float, "One organic matter figure."),
    ("--cores", "samples.cores", int, "Cores in each composite."),
    (
        "--report-depth-cm",
        "samples.report_depth_cm",
        float,
        "Depth that lb/acre or kg/ha stand for.",
    ),
    ("--keep-depth", "samples.keep_depth", str, "Which of several sampled depths to use."),
    ("--zone-layer", "samples.zone_layer", FILE, "Sample zones that the table names."),
    ("--zone-column", "samples.zone_column", str, "Column of the zone layer with the names."),
    ("--crop", "crop.name", str, "Crop that gets the boron."),
    ("--next-crop", "crop.next", str, "Crop after it [counts as sensitive]."),
    (
        "--interpretation",
        "crop.interpretation",
        INTERPRETATIONS,
        "How a test becomes a target [crop need].",
    ),
    (
        "--region",
        "crop.region",
        str,
        "Class limits of a country, with --interpretation 'class table' (`schorl tables`).",
    ),
    ("--target-mg-kg", "crop.target_mg_kg", float, "Your own target for available boron."),
    ("--ceiling-mg-kg", "crop.ceiling_mg_kg", float, "Your own soil ceiling."),
    ("--drainage-mm", "crop.drainage_mm", float, "Water draining through before uptake."),
    ("--water-boron-mg-l", "crop.water_boron_mg_l", float, "Boron in irrigation water."),
    ("--irrigation-mm", "crop.irrigation_mm", float, "Irrigation this season."),
    ("--form", "product.form", click.Choice(["granule", "spray"]), "What leaves the machine."),
    ("--placement", "product.placement", PLACEMENTS, "Where it lands; must be given with a spray."),
    ("--boron-pct", "product.boron_pct", float, "Boron in the product, % by weight."),
    ("--boron-g-l", "product.boron_g_l", float, "Boron in a liquid product, g/L."),
    ("--density-kg-l", "product.density_kg_l", float, "Density of a liquid product."),
    ("--product-name", "product.name", str, "Name of the product, for the sheet."),
    ("--working-width-m", "machine.working_width_m", float, "Working width [24]."),
    ("--least-rate", "machine.least_rate", float, "Least product rate the machine can do."),
    ("--most-rate", "machine.most_rate", float, "Most product rate the machine can do."),
    ("--step", "machine.step", float, "Step of the product rate."),
    ("--speed-km-h", "machine.speed_km_h", float, "Speed [10]."),
    ("--spread-cv", "machine.spread_cv_pct", float, "Unevenness of the spreader, CV % [15]."),
    ("--hopper-kg", "machine.hopper_kg", float, "Hopper load."),
    ("--tank-l", "machine.tank_l", float, "Tank volume."),
    ("--keep-off", "zoning.keep_off", FILE, "Areas that must not be treated."),
    ("--keep-off-m", "zoning.keep_off_m", float, "Untreated strip inside the boundary."),
    ("--zones", "zoning.count", int, "Number of zones [the checks decide]."),
    ("--heading-deg", "zoning.heading_deg", float, "Direction of travel, degrees from north."),
    ("--keep-zones-of", "zoning.keep_zones_of", FILE, "Earlier pack whose zones are kept."),
    ("--profile", "profile", NameOrFile(), "What the controller takes: a name, or a TOML file."),
    ("--cell-m", "cell_m", float, "Cell size [a quarter of the working width]."),
    ("--units", "units", click.Choice(["metric", "us"]), "Units on report and sheet [metric]."),
    ("--seed", "seed", int, "Seed of everything random [0]."),
    ("--field", "field", str, "Name of the field."),
    ("--season", "season", str, "Season, e.g. 2026 [undated]."),
)

#: flags that may be given more than once, KEY=VALUE
PAIRS: tuple[tuple[str, str, str], ...] = (
    ("--column", "samples.columns", 'Column of a property, e.g. --column boron="B (ppm)".'),
    ("--unit", "samples.units", "Unit of a property, e.g. --unit boron=mg/kg."),
)
LISTS: tuple[tuple[str, str, str], ...] = (
    ("--strike-out", "samples.strike_out", "Sample to leave out, by name; may be repeated."),
    ("--confirmed-high", "crop.confirmed_high", "Sample at the ceiling that was repeated."),
)


def with_facts(command: Callable[..., Any]) -> Callable[..., Any]:
    """Add an option for every fact of the tables above."""
    command = click.option(
        "--average-duplicates",
        "samples__average_duplicates",
        is_flag=True,
        default=None,
        help="Average samples at one place instead of stopping.",
    )(command)
    for flag, place, text in reversed(LISTS):
        command = click.option(flag, _name(place), multiple=True, help=text)(command)
    for flag, place, text in reversed(PAIRS):
        command = click.option(flag, _name(place), multiple=True, metavar="KEY=VALUE", help=text)(
            command
        )
    for flag, place, kind, text in reversed(FACTS):
        command = click.option(flag, _name(place), type=kind, default=None, help=text)(command)
    return command


#: Options of a product and machine that a written pack is taken to, by key of a job's [product].
PRODUCT: tuple[tuple[str, str, Any, str], ...] = (
    ("--boron-pct", "boron_pct", float, "Boron in the product, % by weight."),
    ("--boron-g-l", "boron_g_l", float, "Boron in a liquid product, g/L."),
    ("--density-kg-l", "density_kg_l", float, "Density of a liquid product."),
    ("--product-name", "name", str, "Name of the product, for the sheet."),
)


def with_product(command: Callable[..., Any]) -> Callable[..., Any]:
    """Add the options of a product, and a file with a machine's figures."""
    said = "TOML file with a job's [machine], and [product]."
    command = click.option("--machine", type=FILE, help=said)(command)
    for flag, key, kind, text in reversed(PRODUCT):
        command = click.option(flag, f"product__{key}", type=kind, help=text)(command)
    return command


def product_said(options: Mapping[str, Any]) -> dict[str, Any]:
    """Keys of a job's [product] that were given."""
    keys = [key for _, key, _, _ in PRODUCT]
    said = {key: options[f"product__{key}"] for key in keys} | {"form": options.get("form")}
    return {key: value for key, value in said.items() if value is not None}


def _name(place: str) -> str:
    return place.replace(".", "__")


def given_facts(options: Mapping[str, Any], *, relative_to: Path) -> dict[str, Any]:
    """The options that were given, by their dotted place in a job.

    Paths are made absolute: they count from where the command runs, while paths in a job file
    count from the job file's folder (``relative_to`` is only used to keep them short).
    """
    pairs = {_name(place) for _, place, _ in PAIRS}
    facts: dict[str, Any] = {}
    for name, value in options.items():
        if value is None or value == ():
            continue
        place = name.replace("__", ".")
        facts[place] = _fact(name, value, pairs, relative_to)
    return facts


def _fact(name: str, value: Any, pairs: set[str], relative_to: Path) -> Any:
    if name in pairs:
        return dict(_pair(one) for one in value)
    if isinstance(value, tuple):
        return list(value)
    if isinstance(value, Path):
        return _short_path(value, relative_to)
    if hasattr(value, "date"):
        day: date = value.date()
        return day
    return value


def _pair(text: str) -> tuple[str, str]:
    key, equals, value = text.partition("=")
    if not equals or not key or not value:
        raise UsageProblem(
            [finding("JOB-VALUE", where="options", what=f"`{text}` is not of the form KEY=VALUE")]
        )
    return key.strip(), value.strip()


def _short_path(path: Path, folder: Path) -> str:
    """A path as a job in ``folder`` would name it: relative where it lies close by."""
    import os

    absolute, base = path.resolve(), folder.resolve()
    try:
        relative = Path(os.path.relpath(absolute, base))
    except ValueError:  # another drive on Windows
        return absolute.as_posix()
    return relative.as_posix() if len(relative.parts) <= 6 else absolute.as_posix()


def job_of(job_path: Path | None, options: Mapping[str, Any]) -> tuple[Any, Path]:
    """The checked job of a command, and the folder its paths count from."""
    folder = Path.cwd()
    base: dict[str, Any] = {}
    where = "options"
    if job_path is not None:
        base = load_job(job_path)
        folder = job_path if job_path.is_dir() else job_path.parent
        where = str(job_path)
    facts = given_facts(options, relative_to=folder)
    return check_job(lay_over(base, facts), where=where), folder

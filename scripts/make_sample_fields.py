"""Make the sample fields: one invented farm, three invented fields, fixed seed.

    python scripts/make_sample_fields.py

Nothing here was measured. Boron is tied to clay and organic matter, with patches and noise of the
size that field data show; names are invented.
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import shapely
from pyproj import Transformer
from shapely.geometry import Polygon, box, mapping

ROOT = Path(__file__).resolve().parents[1]
OUT = ROOT / "sample_fields"
SYSTEM = "EPSG:32633"
TO_DEGREES = Transformer.from_crs(SYSTEM, "EPSG:4326", always_xy=True)


class Soil:
    """A smooth random soil: sums of cosines for each property, boron tied to the others."""

    def __init__(self, random: np.random.Generator, *, origin: tuple[float, float]) -> None:
        self.random = random
        self.origin = np.array(origin)
        self.waves = {name: self._waves() for name in ("clay", "matter", "boron")}

    def _waves(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        length = self.random.uniform(350, 900, 14)
        angle = self.random.uniform(0, 2 * np.pi, 14)
        vector = 2 * np.pi / length[:, None] * np.column_stack([np.cos(angle), np.sin(angle)])
        return vector, self.random.uniform(0, 2 * np.pi, 14), self.random.uniform(0.5, 1, 14)

    def _smooth(self, name: str, points: np.ndarray) -> np.ndarray:
        vector, phase, height = self.waves[name]
        waves = height * np.cos((points - self.origin) @ vector.T + phase)
        return waves.sum(axis=1) / np.sqrt((height**2).sum() / 2)

    def clay_pct(self, points: np.ndarray) -> np.ndarray:
        """From sandy in the west to loam in the east."""
        east = (points[:, 0] - self.origin[0]) / 900.0
        return np.clip(9 + 16 * east + 3.0 * self._smooth("clay", points), 4, 42)

    def matter_pct(self, points: np.ndarray) -> np.ndarray:
        """Organic matter, a little higher on heavier soil."""
        clay = self.clay_pct(points)
        return np.clip(1.2 + 0.06 * clay + 0.25 * self._smooth("matter", points), 0.8, 6)

    def boron_mg_kg(self, points: np.ndarray, *, level: float = 1.0) -> np.ndarray:
        """Available boron of the soil itself, without sampling or laboratory error."""
        clay, matter = self.clay_pct(points), self.matter_pct(points)
        plain = 0.26 + 0.026 * clay + 0.12 * (matter - 1.5)
        return level * np.clip(plain, 0.08, None) * np.exp(0.14 * self._smooth("boron", points))

    def measured(self, truth: np.ndarray, *, short: float, lab: float) -> np.ndarray:
        """A laboratory's figures: short-range variation and laboratory error, both relative."""
        noise = self.random.normal(0, np.hypot(short, lab), len(truth))
        return truth * np.exp(noise - 0.5 * (short**2 + lab**2))


def degrees(points: np.ndarray) -> np.ndarray:
    """Longitude and latitude, seven decimals."""
    return np.column_stack(TO_DEGREES.transform(points[:, 0], points[:, 1])).round(7)


def write_geojson(path: Path, rows: list[tuple[dict[str, object], Polygon]]) -> None:
    """Polygons in longitude and latitude."""
    features = [
        {"type": "Feature", "properties": properties,
         "geometry": mapping(shapely.transform(shapely.normalize(shape), degrees))}
        for properties, shape in rows
    ]  # fmt: skip
    document = {"type": "FeatureCollection", "features": features}
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(json.dumps(document, indent=1) + "\n", encoding="utf-8", newline="\n")


def write_text(path: Path, text: str, *, encoding: str = "utf-8") -> None:
    """Text with the same line ends on every system."""
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(text.encode(encoding))


def grid_points(field: Polygon, count: int, random: np.random.Generator) -> np.ndarray:
    """About ``count`` points of a jittered grid inside the field, rows from the north."""
    west, south, east, north = field.bounds
    step = np.sqrt(field.area / count)
    while True:
        columns, rows = (
            np.arange(west + step / 2, east, step),
            np.arange(north - step / 2, south, -step),
        )
        points = np.array([(x, y) for y in rows for x in columns])
        jitter = random.uniform(-0.15, 0.15, points.shape) * step
        inside = shapely.contains_xy(shapely.buffer(field, -8), *(points + jitter).T)
        if inside.sum() >= count:
            return (points + jitter)[inside][:count]
        step *= 0.99


#: Where ash was tipped long ago: one sample there is over every ceiling.
OLD_HEAP = np.array([860.0, 110.0])


#: What the spreader did in 2025: it ran empty in this corner, metres from the field's origin.
EMPTY = box(-40, 300, 300, 660)
#: Share of the boron given that the next test finds, and kg B/ha for 1 mg/kg over 20 cm.
SHOWN_AGAIN, SOIL_MASS = 0.50, 2.8


def write_log(path: Path, soil: Soil, field: Polygon, place: np.ndarray) -> None:
    """What the spreader logged in 2025: points along its passes, product in kg/ha."""
    west, south, east, north = field.bounds
    grid = np.meshgrid(np.arange(west + 12, east, 24), np.arange(north - 12, south, -24))
    points = np.column_stack([one.ravel() for one in grid])
    points = points[shapely.contains_xy(shapely.buffer(field, 6), *points.T)]
    rates = (20 * spread_kg_ha(soil, points, place)).round() / 2
    features = [
        {"type": "Feature", "properties": {"product_kg_ha": rate},
         "geometry": {"type": "Point", "coordinates": [round(lon, 6), round(lat, 6)]}}
        for (lon, lat), rate in zip(degrees(points).tolist(), rates.tolist(), strict=True)
    ]  # fmt: skip
    rows = ",\n".join(json.dumps(one) for one in features)
    write_text(path, f'{{"type": "FeatureCollection", "features": [\n{rows}\n]}}\n')


def spread_kg_ha(soil: Soil, points: np.ndarray, place: np.ndarray) -> np.ndarray:
    """Boron that was spread in 2025, not by the prescription: more where the soil held less.

    None on the old heap, and none where the hopper had run out.
    """
    rate = np.clip(1.25 - 2.0 * (soil.boron_mg_kg(points, level=0.80) - 0.42), 0.0, 1.25)
    none = shapely.contains_xy(EMPTY, *(points - place).T)
    none |= np.hypot(*(points - place - OLD_HEAP).T) < 65
    return np.where(none, 0.0, rate.round(2))


def _nearest(points: np.ndarray, place: np.ndarray) -> int:
    return int(np.hypot(*(points - place).T).argmin())


def long_acre(random: np.random.Generator) -> None:
    """50 ha with a pond, 60 grid samples in two seasons."""
    origin = (412_300.0, 5_768_400.0)
    outer = [
        (0, 40),
        (310, 0),
        (905, 30),
        (930, 320),
        (880, 590),
        (420, 640),
        (35, 560),
        (-20, 300),
    ]
    pond = [(520, 300), (560, 285), (600, 310), (590, 350), (545, 360), (515, 335)]
    place = np.array(origin)
    field = Polygon(place + np.array(outer), [place + np.array(pond)])
    soil = Soil(random, origin=origin)
    points = grid_points(field, 60, random)
    for season in (2025, 2026):
        folder = OUT / "long_acre" / str(season)
        write_geojson(folder / "boundary.geojson", [({"field": "Long Acre"}, field)])
        truth = soil.boron_mg_kg(points, level=0.80)
        if season == 2026:
            truth = truth + SHOWN_AGAIN * spread_kg_ha(soil, points, place) / SOIL_MASS
        boron = soil.measured(truth, short=0.08, lab=0.08)
        boron[_nearest(points, place + OLD_HEAP)] = 2.35 if season == 2026 else 2.41
        clay = soil.measured(soil.clay_pct(points), short=0.05, lab=0.03)
        matter = soil.measured(soil.matter_pct(points), short=0.05, lab=0.03)
        lines = ["Sample,Longitude,Latitude,B hot water (mg/kg),OM (%),Clay (%),pH"]
        for number, (lon, lat) in enumerate(degrees(points)):
            ph = 6.2 + 0.15 * random.normal()
            lines.append(
                f"LA{number + 1:02d},{lon:.7f},{lat:.7f},{boron[number]:.2f},"
                f"{matter[number]:.1f},{clay[number]:.0f},{ph:.1f}"
            )
        write_text(folder / "soil.csv", "\n".join(lines) + "\n")
        if season == 2026:
            write_log(folder / "spread_2025.geojson", soil, field, place)
        write_text(
            folder / "job.toml", LONG_ACRE_JOB.format(season=season, more=MORE.get(season, ""))
        )


LONG_ACRE_JOB = """\
# Long Acre is an invented field of an invented farm.
field = "Long Acre"
season = "{season}"

[boundary]
file = "boundary.geojson"

[samples]
file = "soil.csv"
sampled_on = {season}-02-20
depth_cm = 20
laboratory = "north bench"

[crop]
name = "sugar beet"
next = "maize"
drainage_mm = 60

[product]
form = "granule"
name = "granular borate"
boron_pct = 10.0
bulk_density_kg_l = 0.95
granule_mm = 1.2
granule_density_g_cm3 = 1.3
bag_kg = 25

[machine]
working_width_m = 24
speed_km_h = 10
rate_change_s = 3
spread_cv_pct = 12
least_rate = 4.0
most_rate = 40.0
step = 0.5
hopper_kg = 800
{more}"""
MORE = {
    2026: """
# What the spreader logged last season: it is in this season's test already, and only takes room
# under the rate caps.
[[applied]]
on = 2025-04-10
file = "spread_2025.geojson"
column = "product_kg_ha"
unit = "kg/ha"
boron_pct = 10.0
form = "granule"
"""
}


def kiln_close(random: np.random.Generator) -> None:
    """18 ha sampled as 12 zones, one composite each; a spray on the soil before sowing."""
    origin = (414_100.0, 5_767_200.0)
    place = np.array(origin)
    field = Polygon(place + np.array([(0, 0), (520, 20), (540, 345), (20, 330)]))
    soil = Soil(random, origin=origin)
    west, south, east, north = field.bounds
    zones = []
    for row in range(3):
        for column in range(4):
            width, height = (east - west) / 4, (north - south) / 3
            cell = box(
                west + column * width, north - (row + 1) * height,
                west + (column + 1) * width, north - row * height,
            )  # fmt: skip
            zones.append(shapely.intersection(field, cell))
    folder = OUT / "kiln_close" / "2026"
    names = [f"K{number + 1}" for number in range(len(zones))]
    write_geojson(folder / "boundary.geojson", [({"field": "Kiln Close"}, field)])
    write_geojson(
        folder / "sample_zones.geojson",
        [({"zone": name}, zone) for name, zone in zip(names, zones, strict=True)],
    )
    lines = ["zone;B (ppm);Humus (%);Clay (%);cores"]
    for name, zone in zip(names, zones, strict=True):
        inside = grid_points(zone, 40, random)
        truth = [f(inside).mean() for f in (soil.boron_mg_kg, soil.matter_pct, soil.clay_pct)]
        boron, matter, clay = soil.measured(np.array(truth), short=0.03, lab=0.08)
        lines.append(f"{name};{boron:.2f};{matter:.1f};{clay:.0f};15")
    write_text(folder / "soil.csv", "\n".join(lines) + "\n")
    write_text(folder / "job.toml", KILN_CLOSE_JOB)


KILN_CLOSE_JOB = """\
# Kiln Close is an invented field of an invented farm.
field = "Kiln Close"
season = "2026"

[boundary]
file = "boundary.geojson"

[samples]
file = "soil.csv"
zone_layer = "sample_zones.geojson"
sampled_on = 2026-02-24
depth_cm = 20
method = "hot water"
laboratory = "north bench"

[crop]
name = "oilseed rape"
next = "wheat"

[product]
form = "spray"
placement = "broadcast"
name = "soluble borate"
boron_g_l = 150

[machine]
working_width_m = 24
speed_km_h = 8
rate_change_s = 1
spread_cv_pct = 8
mix_g_b_l = 2.5
step = 1.0
least_rate = 40
most_rate = 400
tank_l = 3000
nozzle_size = "04"
"""


def marl_pit(random: np.random.Generator) -> None:
    """9 ha with the sheet of a careless laboratory: decimal comma, <0,1, lb/acre, a preamble."""
    origin = (415_700.0, 5_769_800.0)
    place = np.array(origin)
    field = Polygon(place + np.array([(0, 0), (330, -15), (345, 270), (10, 285)]))
    soil = Soil(random, origin=(origin[0] - 120, origin[1]))
    points = grid_points(field, 28, random)
    boron = soil.measured(soil.boron_mg_kg(points, level=1.0), short=0.08, lab=0.10)
    matter = soil.measured(soil.matter_pct(points), short=0.05, lab=0.03)
    clay = soil.measured(soil.clay_pct(points), short=0.05, lab=0.03)
    limit = float(np.quantile(boron, 0.12))
    lines = [
        "Prüfbericht Boden;;;;;",
        "Untersuchung: Bor, Heißwasser;;;;;",
        ";;;;;",
        "Probe;Rechtswert;Hochwert;Bor (lb/acre);Humus (%);Ton (%)",
    ]
    for number, (x, y) in enumerate(points):
        value = f"{2 * boron[number]:.2f}" if boron[number] >= limit else f"<{2 * limit:.2f}"
        row = f"M{number + 1};{x:.1f};{y:.1f};{value};{matter[number]:.1f};{clay[number]:.0f}"
        lines.append(row.replace(".", ","))
    folder = OUT / "marl_pit" / "2026"
    write_geojson(folder / "boundary.geojson", [({"field": "Marl Pit"}, field)])
    write_text(folder / "Bericht.csv", "\r\n".join(lines) + "\r\n", encoding="latin-1")
    write_text(folder / "job.toml", MARL_PIT_JOB)
    write_text(folder / "leaves.csv", MARL_PIT_LEAVES)


MARL_PIT_JOB = """\
# Marl Pit is an invented field of an invented farm.
field = "Marl Pit"
season = "2026"

[boundary]
file = "boundary.geojson"

[samples]
file = "Bericht.csv"
crs = "EPSG:32633"
sampled_on = 2026-03-02
depth_cm = 17
method = "hot water"

[crop]
name = "alfalfa"
next = "alfalfa"

[product]
form = "granule"
name = "borate on humate"
boron_pct = 3.0

[machine]
working_width_m = 18
speed_km_h = 9
hopper_kg = 600
step = 1.0
"""

READ_ME = """\
# Sample fields

Three invented fields of one invented farm, made by `scripts/make_sample_fields.py` from a fixed
seed. Nothing was measured, and no place, person or farm is meant.

| field | what it shows |
|---|---|
| long_acre | 50 ha with a pond, 60 grid samples in two seasons, granules; `spread_2025.geojson` logs what was really spread (rates by a map of the driver's own, and the hopper ran empty in the north-west) |
| kiln_close | 12 zone composites joined to a zone layer by name, a spray on the soil |
| marl_pit | a messy laboratory sheet: Latin-1, decimal comma, `<`, lb/acre, a preamble; leaf checks |
"""


MARL_PIT_LEAVES = """\
check,zone,leaf boron (mg/kg),young leaf boron (mg/kg),old leaf boron (mg/kg),brix evening,brix morning
L1,1,15,12,22,9.0,9.5
L2,1,16,13,20,8.5,8.6
L3,2,36,34,36,9.0,7.0
L4,2,38,36,39,9.5,7.2
"""


def main() -> None:
    """Write all of sample_fields."""
    random = np.random.default_rng(20_260_301)
    long_acre(random)
    kiln_close(random)
    marl_pit(random)
    write_text(OUT / "README.md", READ_ME)


if __name__ == "__main__":
    main()

"""The fields that map quality is judged on: real ones by name, simulated ones by seed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from schorl.geostat import Support

#: Every LimeSoDa 0.1.5 set with coordinates, and the name of its organic carbon or matter column.
#: SL.125 and UL.120 come in degrees and are laid out in metres about their middle.
REAL_FIELDS = (
    ("B.204", "SOC_target"),
    ("BB.250", "SOC_target"),
    ("BB.30_1", "SOC_target"),
    ("BB.30_2", "SOC_target"),
    ("BB.51", "SOC_target"),
    ("BB.72", "SOC_target"),
    ("G.104", "SOC_target"),
    ("G.150", "SOC_target"),
    ("H.138", "SOC_target"),
    ("MG.112", "SOC_target"),
    ("MG.44", "SOC_target"),
    ("MGS.101", "SOC_target"),
    ("MWP.36", "SOC_target"),
    ("NSW.52", "SOC_target"),
    ("SC.50", "SOC_target"),
    ("SC.93", "SOC_target"),
    ("SL.125", "SOM_target"),
    ("SM.40", "SOC_target"),
    ("SP.231", "SOM_target"),
    ("UL.120", "SOM_target"),
)


def _pairs() -> tuple[tuple[str, str], ...]:
    return tuple((name, one) for name, carbon in REAL_FIELDS
                 for one in ("Clay_target", carbon, "pH_target"))  # fmt: skip


REAL = _pairs()


def real_field(name: str, column: str):
    """Places, values and the set's own ten folds; rows without a value are left out."""
    import LimeSoDa

    loaded = LimeSoDa.load_dataset(name)
    places = np.asarray(loaded["Coordinates"], dtype=float)
    if np.ptp(places, axis=0).max() < 1:
        middle = places.mean(axis=0)
        per_degree = np.array([111_320.0 * np.cos(np.deg2rad(middle[1])), 110_574.0])
        places = (places - middle) * per_degree
    values = loaded["Dataset"][column].to_numpy(float)
    known = np.isfinite(values)
    return places[known], values[known], np.asarray(loaded["Folds"])[known]


def _gaussian_field(random, places, *, share, reach):
    """Standard normal values: share of variance exponential with this practical range."""
    gap = np.linalg.norm(places[:, None] - places[None], axis=2)
    covariance = share * np.exp(-3 * gap / reach)
    covariance[np.diag_indices_from(covariance)] += 1 - share + 1e-9
    return np.linalg.cholesky(covariance) @ random.normal(size=len(places))


def simulated_field(random):
    """Places, values, supports and kind: n 15 to 150, half of the fields without structure."""
    count = int(np.exp(random.uniform(np.log(15), np.log(150))))
    kind = ("structure", "no structure", "lognormal", "composites")[int(random.integers(4))]
    reach, share = random.uniform(100, 500), random.uniform(0.4, 0.9)
    if kind == "composites":
        return *_composites(random, count=min(count, 60), share=share, reach=reach), kind
    places = random.uniform(0, 600, (count, 2))
    values = _gaussian_field(
        random, places, share=0.0 if kind == "no structure" else share, reach=reach
    )
    if kind == "lognormal":
        return places, np.exp(-0.4 + random.uniform(0.3, 0.9) * values), None, kind
    return places, 10 + values, None, kind


def _zones(count: int, side_m: float = 600.0, points: int = 5):
    """Square sample zones that fill a square field: centres and offsets of their points."""
    across = max(round(np.sqrt(count)), 3)
    step = side_m / across
    middle = (np.arange(across) + 0.5) * step
    centres = np.column_stack([one.ravel() for one in np.meshgrid(middle, middle)])
    offset = ((np.arange(points) + 0.5) / points - 0.5) * step
    return centres, np.column_stack([one.ravel() for one in np.meshgrid(offset, offset)]), step


def _cores(random, centres, step, cores):
    """Random core positions in each zone, ``(zones * cores, 2)``."""
    return (
        centres[:, None] + random.uniform(-step / 2, step / 2, (len(centres), cores, 2))
    ).reshape(-1, 2)


def _composites(random, *, count, share, reach, cores=15):
    centres, offsets, step = _zones(count)
    soil = _gaussian_field(random, _cores(random, centres, step, cores), share=share, reach=reach)
    supports = [Support(points_m=one + offsets, cores=cores, kind="zone") for one in centres]
    return centres, 10 + soil.reshape(-1, cores).mean(axis=1), supports


@dataclass(frozen=True, eq=False, kw_only=True)
class Lognormal:
    """A lognormal field with its true mean over the targets."""

    places: np.ndarray
    values: np.ndarray
    supports: list[Support] | None
    targets: np.ndarray
    truth: float


def lognormal_field(random, *, cores: int = 15) -> Lognormal:
    """Log SD 0.3 to 0.9; every other field is sampled as zone composites."""
    log_sd, reach, share = (
        random.uniform(0.3, 0.9),
        random.uniform(150, 500),
        random.uniform(0.5, 0.9),
    )
    middle = (np.arange(30) + 0.5) * 20
    targets = np.column_stack([one.ravel() for one in np.meshgrid(middle, middle)])
    composite = bool(random.integers(2))
    centres, offsets, step = _zones(36)
    places = _cores(random, centres, step, cores) if composite else random.uniform(0, 600, (80, 2))
    soil = np.exp(
        -0.4
        + log_sd * _gaussian_field(random, np.vstack([targets, places]), share=share, reach=reach)
    )
    values, supports = soil[len(targets) :], None
    if composite:
        values = values.reshape(-1, cores).mean(axis=1)
        supports = [Support(points_m=one + offsets, cores=cores, kind="zone") for one in centres]
        places = centres
    return Lognormal(
        places=places, values=values, supports=supports, targets=targets,
        truth=float(soil[: len(targets)].mean()),
    )  # fmt: skip

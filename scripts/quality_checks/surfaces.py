"""Map quality side by side: Schorl, PyKrige with its own fit, and a least-squares variogram.

python scripts/quality.py surfaces                   real and simulated fields, all of it
python scripts/quality.py surfaces --part real       fields of LimeSoDa (CC BY-SA 4.0)
python scripts/quality.py surfaces --part simulated --fields 200
python scripts/quality.py surfaces --part lognormal --fields 200     mean of log maps

Leave-one-out: one fit to all samples. Ten folds: LimeSoDa's own, everything refitted nine-tenths
at a time; the verdict comes from the nine folds, the skill from the tenth. Aims: mean squared
deviation ratio 0.9 to 1.1, coverage 87 to 93 %, RMSE best or within 1 % of best on 90 % of fields.
"""

from __future__ import annotations

import argparse
import sys
import time
import warnings
from concurrent.futures import ProcessPoolExecutor

import numpy as np

from quality_checks.surface_data import (
    REAL,
    lognormal_field,
    real_field,
    simulated_field,
)
from quality_checks.surface_fits import WAYS, Scores, schorl, scores
from schorl.geostat import krige
from schorl.geostat.support import layout_of, log_mean_shift


def main(argv: list[str]) -> int:
    """Print the figures asked for."""
    parser = argparse.ArgumentParser(prog="quality.py surfaces", description=__doc__)
    parser.add_argument("--part", choices=("real", "simulated", "lognormal"))
    parser.add_argument("--fields", type=int, default=200)
    parser.add_argument("--seed", type=int, default=2026)
    parser.add_argument("--workers", type=int, default=1)
    asked = parser.parse_args(argv)
    with ProcessPoolExecutor(max_workers=asked.workers) as pool:
        if asked.part in (None, "real"):
            real_report(pool)
        if asked.part in (None, "simulated"):
            simulated_report(pool, asked.fields, asked.seed)
        if asked.part in (None, "lognormal"):
            lognormal_report(pool, asked.fields, asked.seed)
    return 0


def left_out(places, values, supports=None) -> dict[str, Scores]:
    """Leave-one-out scores of each way, one fit to all samples."""
    found = {}
    for name, way in WAYS.items():
        model = way(places, values, supports)
        supports_used = supports if name == "schorl" else None
        location, sd = model.left_out(places, values, supports_used)
        found[name] = scores(values, location, sd, log=model.log, verdict=model.verdict)
    return found


def folded(places, values, folds) -> dict[str, Scores]:
    """Ten-fold scores, pooled over the folds; the verdict is that of most folds."""
    found = {}
    for name, way in WAYS.items():
        parts, verdicts = [], []
        for fold in np.unique(folds):
            test = folds == fold
            model = way(places[~test], values[~test])
            location, sd = model.predict(places[~test], values[~test], None, places[test])
            parts.append((values[test], location, sd, model.log))
            verdicts.append(model.verdict)
        found[name] = _pooled(parts, max(sorted(set(verdicts)), key=verdicts.count))
    return found


def _pooled(parts, verdict: str) -> Scores:
    """Scores over folds of differing scale: the sums of squares of all, not means of roots."""
    each = [scores(t, m, s, log=log) for t, m, s, log in parts]
    size = np.array([len(part[0]) for part in parts]) / sum(len(part[0]) for part in parts)
    truth = np.concatenate([part[0] for part in parts])
    mse = float(size @ [one.rmse**2 for one in each])
    return Scores(
        rmse=float(np.sqrt(mse)),
        crps=float(size @ [one.crps for one in each]),
        msdr=float(size @ [one.msdr for one in each]),
        coverage=float(size @ [one.coverage for one in each]),
        skill=1 - mse / float(np.var(truth, ddof=1)),
        verdict=verdict,
    )


def _real(key: tuple[str, str]):
    warnings.simplefilter("ignore")
    places, values, folds = real_field(*key)
    return key, left_out(places, values), folded(places, values, folds)


def real_report(pool) -> None:
    """Each field-property a line, then the summary."""
    started = time.perf_counter()
    print(f"\nLimeSoDa, {len(REAL)} field-properties: ten-fold RMSE, and Schorl's own figures")
    print(f"{'field':<10}{'property':<13}{'n':>4}" + "".join(f"{way:>11}" for way in WAYS)
          + f"{'skill':>8}{'msdr':>7}{'cover':>7}  verdict on nine folds")  # fmt: skip
    one_out, ten = [], []
    for key, first, second in pool.map(_real, REAL):
        one_out.append(first)
        ten.append(second)
        ours = second["schorl"]
        print(f"{key[0]:<10}{key[1]:<13}{len(real_field(*key)[1]):>4}"
              + "".join(f"{second[way].rmse:>11.4g}" for way in WAYS)
              + f"{ours.skill:>8.3f}{ours.msdr:>7.2f}{ours.coverage:>7.2f}  {ours.verdict}",
              flush=True)  # fmt: skip
    summary("leave-one-out", one_out)
    summary("ten folds", ten)
    wrong = [one["schorl"] for one in ten if one["schorl"].verdict == "pattern found"]
    print(f"  'pattern found' on nine folds with skill below 0 on the tenth: "
          f"{sum(one.skill < 0 for one in wrong)} of {len(wrong)}")  # fmt: skip
    print(f"  {time.perf_counter() - started:.0f} s")


def summary(name: str, results: list[dict[str, Scores]]) -> None:
    """Means and spreads over fields, and how often each way was best or within 1 %."""
    print(f"\n{name}, {len(results)} fields")
    print(f"  {'':<10}{'skill':>8}{'msdr':>7}{'+-':>7}{'cover %':>9}{'best or within 1 %':>20}"
          f"{'crps vs schorl':>16}")  # fmt: skip
    best = np.array([min(one[way].rmse for way in WAYS) for one in results])
    own = np.array([one["schorl"].crps for one in results])
    for way in WAYS:
        some = [one[way] for one in results]
        msdr = np.array([one.msdr for one in some])
        near = np.mean(np.array([one.rmse for one in some]) <= 1.01 * best)
        ratio = np.exp(np.mean(np.log(np.array([one.crps for one in some]) / own)))
        print(f"  {way:<10}{np.mean([one.skill for one in some]):>8.3f}{msdr.mean():>7.3f}"
              f"{msdr.std():>7.3f}{100 * np.mean([one.coverage for one in some]):>9.1f}"
              f"{100 * near:>18.0f} %{ratio:>16.3f}")  # fmt: skip


def _simulated(seed: list[int]):
    warnings.simplefilter("ignore")
    places, values, supports, kind = simulated_field(np.random.default_rng(seed))
    return kind, left_out(places, values, supports)


def simulated_report(pool, fields: int, seed: int) -> None:
    """Leave-one-out on simulated fields, by kind."""
    found = list(pool.map(_simulated, [[seed, one] for one in range(fields)]))
    for kind in sorted({one[0] for one in found}):
        summary(f"simulated: {kind}", [one[1] for one in found if one[0] == kind])
    summary("simulated, all", [one[1] for one in found])
    none = [one[1]["schorl"].verdict for one in found if "no structure" in one[0]]
    print(f"  'pattern found' where there is none: {none.count('pattern found')} of {len(none)}")


def _lognormal(seed: list[int]):
    warnings.simplefilter("ignore")
    field = lognormal_field(np.random.default_rng(seed))
    model = schorl(field.places, field.values, field.supports)
    scaled = np.log(field.values)
    if field.supports is not None:
        layout = layout_of(field.places, field.supports)
        scaled = scaled - log_mean_shift(layout, model.variogram)
    location, variance = krige(
        field.places, scaled, field.targets, model.variogram, support=field.supports
    )
    if not model.log:
        location, variance = krige(
            field.places, field.values, field.targets, model.variogram, support=field.supports
        )
        return field.supports is not None, location.mean() / field.truth
    mapped = np.exp(location + 0.5 * (variance + model.variogram.micro_variance)).mean()
    return field.supports is not None, mapped / field.truth


def lognormal_report(pool, fields: int, seed: int) -> None:
    """Mean of the map over the mean of the truth, points and zone composites."""
    found = list(pool.map(_lognormal, [[seed, 7, one] for one in range(fields)]))
    print("\nlognormal fields: mean of the map over the truth (aim: within 2 %)")
    for composite, name in ((False, "points"), (True, "zone composites")):
        ratio = np.array([one[1] for one in found if one[0] == composite])
        error = ratio.std(ddof=1) / np.sqrt(len(ratio))
        print(f"  {name:<16}{len(ratio):>4} fields{100 * (ratio.mean() - 1):>8.2f} %"
              f"  +- {100 * error:.2f}")  # fmt: skip


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

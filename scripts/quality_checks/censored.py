"""Values below the limit: our draws against half the limit, on simulated lognormal fields.

python scripts/quality.py censored                 12 settings, 60 fields each
python scripts/quality.py censored --fields 20

Bias: mean of the whole map over the field's true mean, averaged over fields. Error: root mean
square over all cells between map and truth, as a share of the true mean. Also the bias of the
mean with every value known, which no treatment of the limit can beat.
"""

from __future__ import annotations

import argparse
import sys
from concurrent.futures import ProcessPoolExecutor

import numpy as np

from schorl.geostat import fit_reml, krige
from schorl.geostat.censored import complete, pooled

SHARES = (0.2, 0.3, 0.4)
LOG_SDS = (0.3, 0.5, 0.7, 0.9)
SAMPLES, SIDE_M = 60, 600.0
WAYS = ("drawn", "half limit", "all known")


def main(argv: list[str]) -> int:
    """Print one row for each share below the limit and each log SD."""
    parser = argparse.ArgumentParser(prog="quality.py censored", description=__doc__)
    parser.add_argument("--fields", type=int, default=60)
    parser.add_argument("--seed", type=int, default=2026)
    parser.add_argument("--workers", type=int, default=1)
    asked = parser.parse_args(argv)
    print("below  log SD" + "".join(f"{way:>13} bias %  error" for way in WAYS))
    rows = []
    with ProcessPoolExecutor(max_workers=asked.workers) as pool:
        for share in SHARES:
            for log_sd in LOG_SDS:
                jobs = [(share, log_sd, [asked.seed, one]) for one in range(asked.fields)]
                found = np.array(list(pool.map(_one, jobs)))
                bias, error = 100 * found[:, :, 0].mean(axis=0), found[:, :, 1].mean(axis=0)
                rows.append((bias, error))
                print(f"{share:>5.0%}{log_sd:>8.1f}"
                      + "".join(f"{b:>20.2f}{e:>7.3f}" for b, e in zip(bias, error, strict=True)),
                      flush=True)  # fmt: skip
    bias, error = (np.array(one) for one in zip(*rows, strict=True))
    print("largest |bias| %" + "".join(f"{way} {one:.2f}  " for way, one in
          zip(WAYS, np.abs(bias).max(axis=0), strict=True)))  # fmt: skip
    print(f"mean bias %: {bias.mean(axis=0).round(2)}; settings where the drawn error is not above "
          f"half-limit's: {(error[:, 0] <= error[:, 1]).sum()} of {len(error)}")  # fmt: skip
    return 0


def _one(job):
    """Bias and error of the map for each way, ``(3, 2)``."""
    share, log_sd, seed = job
    random = np.random.default_rng(seed)
    places, logs, targets, truth = _field(random, log_sd)
    limit = np.quantile(logs, share)
    below = logs < limit
    seen = np.maximum(logs, limit)
    done = complete(places, seen, below, random=random)
    drawn, common = krige(places, done.draws, targets, done.fit.variogram)
    location, variance = pooled(drawn, common)
    maps = [np.exp(location + 0.5 * (variance + done.fit.variogram.micro_variance))]
    for values in (np.where(below, seen - np.log(2), seen), logs):
        model = fit_reml(places, values).variogram
        location, variance = krige(places, values, targets, model)
        maps.append(np.exp(location + 0.5 * (variance + model.micro_variance)))
    level = truth.mean()
    return [[one.mean() / level - 1, np.sqrt(np.mean((one - truth) ** 2)) / level] for one in maps]


def _field(random, log_sd):
    """Samples, logs, cell centres and the truth there; 30 % of the log variance is nugget."""
    middle = (np.arange(25) + 0.5) * SIDE_M / 25
    targets = np.column_stack([one.ravel() for one in np.meshgrid(middle, middle)])
    places = random.uniform(0, SIDE_M, (SAMPLES, 2))
    every = np.vstack([places, targets])
    gap = np.linalg.norm(every[:, None] - every[None], axis=2)
    covariance = 0.7 * np.exp(-3 * gap / 300.0) + 0.3 * np.eye(len(every))
    logs = -0.4 + log_sd * np.linalg.cholesky(covariance) @ random.normal(size=len(every))
    return places, logs[:SAMPLES], targets, np.exp(logs[SAMPLES:])


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))

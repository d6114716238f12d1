"""Thresholds of the change chart on independent normal days: the tables of rhovane.stats.budget.

Run from the repository root with src on the path: ``python tests/studies/alerting/thresholds.py [paths] [seed]``;
about one minute for 40,000 paths. Each path is one chart over a baseline and one year of nights, through the
very functions that the watch uses; the threshold for a rate is the quantile exp(-rate) of the year's highest
evidence.
"""

from __future__ import annotations

import sys

import numpy as np

from rhovane.stats.budget import RATES
from rhovane.stats.chart import MIN_REFERENCE_DAYS, chart_alone

BASELINES = (30, 60, 90, 180, 365)
YEAR = 365
GUARD = 14


def highest_evidence(n_paths: int, baseline: int, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """The year's highest two-sided and one-sided log evidence of each path."""
    out = np.empty((2, n_paths))
    first = max(baseline, MIN_REFERENCE_DAYS + GUARD)
    for i in range(n_paths):
        score = 1.0 + 0.2 * rng.standard_normal(first + YEAR)
        _, both, rising = chart_alone(score, baseline, GUARD, first)
        out[:, i] = np.nanmax(both), np.nanmax(rising)
    return out[0], out[1]


def main() -> None:
    """Print the two tables."""
    given = [int(a) for a in sys.argv[1:]]
    n_paths, seed = given[0] if given else 40_000, given[1] if len(given) > 1 else 5
    top = {b: highest_evidence(n_paths, b, np.random.default_rng(seed)) for b in BASELINES}
    for side, name in enumerate(("TWO_SIDED", "ONE_SIDED")):
        print(f"{name} = {{")
        for baseline in BASELINES:
            values = ", ".join(f"{np.quantile(top[baseline][side], np.exp(-r)):.2f}" for r in RATES)
            print(f"    {baseline}: ({values}),")
        print("}")


if __name__ == "__main__":
    main()

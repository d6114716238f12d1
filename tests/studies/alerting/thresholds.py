"""Thresholds of the change chart when nothing changes: the tables of rhovane.stats.budget.

Run from the repository root with src on the path: ``python tests/studies/alerting/thresholds.py [paths] [seed]``;
about three minutes for 5,000 paths. Each path is one pair on its own over a baseline and one year of nights,
replayed by the watch itself with a budget so small that it never alarms; the threshold for a rate is the quantile
exp(-rate) of the year's highest evidence. A day's score is atanh of the uncentred correlation of 24 independent
hours: its tails are a little heavier than a normal's, which costs a tenth more false alarms if it is neglected.
"""

from __future__ import annotations

import sys

import numpy as np

from rhovane.stats.budget import RATES
from rhovane.stats.chart import NODE_SHIFTS, gather
from rhovane.stats.decisions import Decisions
from rhovane.stats.network import structure_of
from rhovane.stats.replay import Replay, Spans

BASELINES = (30, 60, 90, 180, 365)
YEAR = 365
GUARD = 14
HOURS = 24
RELATION = 0.6
NEVER = 1e-9


def quiet_scores(n_days: int, rng: np.random.Generator) -> np.ndarray:
    """Daily scores of two series whose innovations have correlation .6 on every day."""
    x, other = rng.standard_normal((2, n_days, HOURS))
    y = RELATION * x + np.sqrt(1 - RELATION**2) * other
    return np.arctanh((x * y).sum(axis=1) / np.sqrt((x**2).sum(axis=1) * (y**2).sum(axis=1)))


def highest_evidence(n_paths: int, baseline: int, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """The year's highest two-sided and one-sided log evidence of each path."""
    out = np.empty((2, n_paths))
    first = max(baseline, 20 + GUARD)
    n_days = first + YEAR
    structure, spans = structure_of([("x", "y")], stations=False), Spans(baseline, GUARD, n_days)
    weight, lagged = np.full((1, n_days), HOURS - 2.0), np.zeros((1, n_days, 5))
    for i in range(n_paths):
        score = quiet_scores(n_days, rng)[None]
        replay = Replay(score, weight, lagged, np.array([first]), structure, spans, NEVER, Decisions())
        if replay.run():
            raise ArithmeticError(f"path {i} alarmed; choose a smaller rate for NEVER.")
        node, rising = np.zeros((2, len(NODE_SHIFTS))), 0.0
        for z in replay.scaled[0, first:]:
            gather(node, z, NODE_SHIFTS)
            rising = max(rising, node[0, 0] + node[0, 1] + node[0, 2])
        out[:, i] = replay.values[0, first:].max(), np.log(rising / 3)
    return out[0], out[1]


def main() -> None:
    """Print the two tables."""
    given = [int(a) for a in sys.argv[1:]]
    n_paths, seed = given[0] if given else 5_000, given[1] if len(given) > 1 else 5
    top = {b: highest_evidence(n_paths, b, np.random.default_rng(seed)) for b in BASELINES}
    for side, name in enumerate(("TWO_SIDED", "ONE_SIDED")):
        print(f"{name} = {{")
        for baseline in BASELINES:
            values = ", ".join(f"{np.quantile(top[baseline][side], np.exp(-r)):.2f}" for r in RATES)
            print(f"    {baseline}: ({values}),")
        print("}")


if __name__ == "__main__":
    main()

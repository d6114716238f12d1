"""Realised against nominal false alarms of single pairs over all rates at once, pooled over stationary families.

Run from the repository root with src on the path: ``python tests/studies/alerting/stationary.py [pair_years]``;
about three minutes for 300 pair-years a family. A year alarms at a rate where its highest evidence is above that
rate's threshold, so one replay without alarms serves all rates.
"""

from __future__ import annotations

import sys

import numpy as np
from families import BASELINE, START, YEAR, Family, make_pair

from rhovane.stats.budget import threshold
from rhovane.stats.monitor import monitor_pair

RATES = (0.05, 0.1, 0.2, 0.5, 1.0)
NEVER = 1e-9
STATIONARY = {
    "AR(1) .5, rho .6": Family(phi=0.5),
    "AR(1) .9, rho .6": Family(),
    "AR(1) .95, rho .6": Family(phi=0.95),
    "rho 0": Family(rho=0.0),
    "rho .3": Family(rho=0.3),
    "rho .8": Family(rho=0.8),
    "rho .9": Family(rho=0.9),
    "15 % in gaps": Family(gaps=0.15),
    "gappy cyclic lognormal": Family(margin="lognormal", cycle=True, gaps=0.08),
}


def highest_evidence(family: Family, n_years: int, seed: int) -> np.ndarray:
    """The highest evidence of each year of one pair."""
    rng = np.random.default_rng(seed)
    out = np.empty(n_years)
    for i in range(n_years):
        x, y = make_pair(family, BASELINE + YEAR, rng)
        out[i] = np.nanmax(monitor_pair(x, y, start=START, false_alarms_per_year=NEVER).watch.evidence)
    return out


def main() -> None:
    """Print the table."""
    n_years = int(sys.argv[1]) if len(sys.argv) > 1 else 300
    limits = np.array([threshold(r) for r in RATES])
    highest = {}
    for i, (name, family) in enumerate(STATIONARY.items()):
        highest[name] = highest_evidence(family, n_years, 500 + i)
    highest["pooled"] = np.concatenate(list(highest.values()))
    print(f"| family, {n_years} years | " + " | ".join(f"at {r:g}" for r in RATES) + " |")
    for name, values in highest.items():
        quiet = np.array([(values <= h).mean() for h in limits])
        error = np.sqrt((1 - quiet) / quiet / len(values)) / RATES
        cells = (f"{-np.log(q) / r:.2f} ± {e:.2f}" for q, r, e in zip(quiet, RATES, error, strict=True))
        print(f"| {name} | " + " | ".join(cells) + " |", flush=True)


if __name__ == "__main__":
    main()

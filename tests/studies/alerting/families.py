"""The engine on one pair of stationary series: realised false alarms, and delays after a sharp change."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter
from scipy.special import ndtri

from rhovane.stats.monitor import monitor_pair

START = np.datetime64("2025-01-01T00:00")
BASELINE = 90
YEAR = 365
CHANGE_AFTER = 40


@dataclass(frozen=True)
class Family:
    """A kind of data: persistence, Spearman correlation, margin, cycle, gaps, and what changes that must not alarm."""

    phi: float = 0.9
    rho: float = 0.6
    margin: str = "normal"
    cycle: bool = False
    gaps: float = 0.0
    nuisance: str = ""


REAL = {"margin": "lognormal", "cycle": True, "gaps": 0.08}
FAMILIES = {
    "AR(1) .9, rho .6": Family(),
    "AR(1) .95": Family(phi=0.95),
    "rho 0": Family(rho=0.0),
    "rho .8": Family(rho=0.8),
    "gappy cyclic lognormal": Family(**REAL),
    "the same, variance doubles": Family(**REAL, nuisance="variance"),
    "the same, level steps by 1 sd": Family(**REAL, nuisance="level"),
    "the same, a season": Family(**REAL, nuisance="season"),
    "80 % zeros": Family(margin="rain"),
    "40 % at the limit, both": Family(margin="censored"),
}


def make_pair(
    family: Family, n_days: int, rng: np.random.Generator, change: tuple[int, float] | None = None
) -> tuple[np.ndarray, np.ndarray]:
    """Two hourly series; ``change`` is (day, new Spearman correlation)."""
    n = 24 * n_days
    noise = np.sqrt(1 - family.phi**2) * rng.standard_normal((2, n + 500))
    x, other = lfilter([1.0], [1.0, -family.phi], noise, axis=1)[:, 500:]
    rho = np.full(n, family.rho)
    if change is not None:
        rho[24 * change[0] :] = change[1]
    r = 2 * np.sin(np.pi * rho / 6)  # of a bivariate normal with this Spearman correlation: Kruskal (1958)
    y = r * x + np.sqrt(1 - r**2) * other
    late = np.arange(n) >= 24 * 150
    if family.nuisance == "variance":
        x = np.where(late, 2 * x, x)
    elif family.nuisance == "level":
        x = np.where(late, x + 1, x)
    elif family.nuisance == "season":
        x = x + np.sin(2 * np.pi * np.arange(n) / (24 * YEAR))
    if family.cycle:
        hour = 2 * np.pi * np.arange(n) / 24
        x, y = (v + np.cos(hour - p) + 0.5 * np.cos(2 * (hour - p)) for v, p in ((x, 2.1), (y, 3.7)))
    out = []
    for v in (x, y):
        if family.margin == "lognormal":
            v = np.exp(v)
        elif family.margin == "rain":
            v = np.where(v > ndtri(0.8), np.expm1(2 * np.maximum(v - ndtri(0.8), 0)), 0.0)
        elif family.margin == "censored":
            v = np.maximum(v, ndtri(0.4))
        if family.gaps:
            v = v.copy()
            for begin in rng.integers(0, n - 12, int(family.gaps * n / 12)):
                v[begin : begin + 12] = np.nan
        out.append(v)
    return out[0], out[1]


def realised_rate(family: Family, n_years: int, rate: float, seed: int) -> float:
    """Alarms a pair-year over independent years, from the share of years without an alarm."""
    rng = np.random.default_rng(seed)
    loud = 0
    for _ in range(n_years):
        x, y = make_pair(family, BASELINE + YEAR, rng)
        loud += bool(monitor_pair(x, y, start=START, false_alarms_per_year=rate).alarms)
    return float(-np.log(max(1 - loud / n_years, 0.5 / n_years)))


def delays(family: Family, after: float, n: int, rate: float, seed: int) -> np.ndarray:
    """Days from a sharp change to its alarm, counted from 1; 100 where it takes longer."""
    rng = np.random.default_rng(seed)
    change_day = BASELINE + CHANGE_AFTER
    out = []
    for _ in range(n):
        x, y = make_pair(family, change_day + 100, rng, (change_day, after))
        days = [a.day for a in monitor_pair(x, y, start=START, false_alarms_per_year=rate).alarms]
        if not any(d < change_day for d in days):
            out.append(min((d - change_day + 1 for d in days), default=100))
    return np.array(out)

"""The engine on one pair of stationary series: realised false alarms, and delays after a sharp change."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter
from scipy.special import ndtri

from rhovane.stats.daily_scores import daily_scores
from rhovane.stats.monitor import monitor_network, monitor_pair

START = np.datetime64("2025-01-01T00:00")
BASELINE = 90
YEAR = 365
CHANGE_AFTER = 40


@dataclass(frozen=True)
class Family:
    """A kind of data: persistence, Spearman correlation, margin, cycle, gaps, and what changes that must not alarm.

    ``wander`` is the standard deviation with which atanh of the correlation moves from day to day, ``memory`` its
    autocorrelation at one day, ``volatility`` the standard deviation of the logarithm of ``wander``, itself with an
    autocorrelation of .8; ``weekend`` the correlation on two days of seven; ``lag`` the hours by which x leads.
    """

    phi: float = 0.9
    rho: float = 0.6
    margin: str = "normal"
    cycle: bool = False
    gaps: float = 0.0
    nuisance: str = ""
    wander: float = 0.0
    memory: float = 0.0
    volatility: float = 0.0
    weekend: float | None = None
    lag: int = 0


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
DEPENDENT = {
    "relation wanders, memory .5": Family(wander=0.3, memory=0.5),
    "relation wanders, memory .8": Family(wander=0.3, memory=0.8),
    "the same, half as far": Family(wander=0.15, memory=0.8),
    "relation wanders more at times": Family(wander=0.25, volatility=0.4),
}
WEEKLY = Family(rho=0.7, weekend=0.35)
LAGGED = Family(lag=3)


def make_pair(
    family: Family, n_days: int, rng: np.random.Generator, change: tuple[int, float] | None = None
) -> tuple[np.ndarray, np.ndarray]:
    """Two hourly series; ``change`` is (day, new Spearman correlation)."""
    n = 24 * n_days
    day = np.arange(-500, n) // 24
    rho = np.full(n + 500, family.rho)
    if family.weekend is not None:
        rho[day % 7 >= 5] = family.weekend
    if change is not None:
        rho[day >= change[0]] = change[1]
    r = 2 * np.sin(np.pi * rho / 6)  # of a bivariate normal with this Spearman correlation: Kruskal (1958)
    if family.wander:
        moves = family.wander * _sticky(family.memory, n_days + 22, rng)
        moves *= np.exp(family.volatility * _sticky(0.8, n_days + 22, rng))
        r = np.tanh(np.arctanh(r) + moves[day + 21])
    # Related are the shocks, so that a relation that changes at midnight leaves no jump in a series.
    shock = np.sqrt(1 - family.phi**2) * rng.standard_normal((2, n + 500))
    shock[1] = r * shock[0] + np.sqrt(1 - r**2) * shock[1]
    x, y = lfilter([1.0], [1.0, -family.phi], shock, axis=1)[:, 500:]
    y = np.roll(y, family.lag)
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


def _sticky(phi: float, n: int, rng: np.random.Generator) -> np.ndarray:
    """A stationary AR(1) process of unit variance."""
    noise = np.sqrt(1 - phi**2) * rng.standard_normal(n + 100)
    return np.asarray(lfilter([1.0], [1.0, -phi], noise))[100:]


def realised_rate(family: Family, n_years: int, rate: float, seed: int) -> float:
    """Alarms a pair-year over independent years, from the share of years without an alarm."""
    rng = np.random.default_rng(seed)
    loud = 0
    for _ in range(n_years):
        x, y = make_pair(family, BASELINE + YEAR, rng)
        values = np.stack([x, y], axis=1)
        loud += bool(
            monitor_network(values, [(0, 1, family.lag)], start=START, false_alarms_per_year=rate).alarms
        )
    return float(-np.log(max(1 - loud / n_years, 0.5 / n_years)))


def oracle_delay(shift: float, rate: float, n: int, seed: int) -> float:
    """Mean days to the alarm of who knows everything: CUSUM for a known shift of independent normal days.

    Its threshold is that of Siegmund (1985) for one false alarm in 1 / ``rate`` years.
    """
    wanted = YEAR / rate
    limits = np.linspace(0.0, 20.0, 4001)
    b = shift * limits + 1.166 * shift
    run_length = 2 * (np.exp(b) - b - 1) / shift**2
    limit = float(np.interp(wanted, run_length, limits))
    rng = np.random.default_rng(seed)
    chart, open_ = np.zeros(n), np.ones(n, dtype=bool)
    for _ in range(60):  # what the chart holds when the change comes
        chart = np.maximum(0.0, chart + rng.standard_normal(n) - shift / 2)
        chart[chart > limit] = 0.0
    total = 0
    while open_.any():
        total += int(open_.sum())
        chart = np.maximum(0.0, chart + rng.standard_normal(n) + shift / 2)
        open_ &= chart <= limit
    return total / n


def daily_shift(family: Family, after: float, seed: int) -> float:
    """Shift of the daily innovation score by a change of the relation, in its own standard deviations."""
    rng = np.random.default_rng(seed)
    x, y = make_pair(family, 600, rng, (300, after))
    score = daily_scores(x, y).innovation
    before, later = score[60:300], score[302:]
    sd = np.sqrt((np.nanvar(before) + np.nanvar(later)) / 2)
    return float(abs(np.nanmean(later) - np.nanmean(before)) / sd)


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

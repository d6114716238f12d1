"""What an AR(2) process, fitted afresh for every day on the days before it, could not foresee of that day.

Fit and scale need only moments of neighbouring levels, so each day's are summed once and added up, always
in the order of the days: a day alone and a day in bulk agree to the last bit. Gaps are bridged by the exact
Kalman filter, which needs no more of the past than the last two levels in a row.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.compiled import compiled

Floats = NDArray[np.float64]

MAX_BRIDGED_VARIANCE = 2.5
"""An innovation after a gap is kept while its forecast variance is at most this multiple of the usual one."""
CLIP = 3.5
"""Innovations beyond this many standard deviations count as that many."""
MAX_PARTIAL_AUTOCORRELATION = 0.99
"""Fitted partial autocorrelations are kept inside this, so that the process is stationary."""
LEAST_TRIPLE_SHARE = 0.3
"""The scale comes from levels without a gap in the two steps before. Where fewer than this share are (readings
every other hour, say), it comes from all errors of the filter."""
LAGS = 3


@compiled
def day_moments(level: Floats) -> tuple[Floats, Floats]:
    """Moments of each day's levels, those inside the day and those that reach into the day before.

    Shapes (2, n_days, 3, 2, 2): sums of (1, now) x (1, then) at lags 0, 1 and 2 where both levels exist;
    and (2, n_days, 4, 4): sums of (1, now, one step before, two steps before) with itself where all do.
    """
    n_days, steps = level.shape
    flat = level.reshape(n_days * steps)
    pairs, triples = np.zeros((2, n_days, LAGS, 2, 2)), np.zeros((2, n_days, LAGS + 1, LAGS + 1))
    row = np.ones(LAGS + 1)
    for t in range(len(flat)):
        if np.isnan(flat[t]):
            continue
        day = t // steps
        known = 0
        for lag in range(min(LAGS, t + 1)):
            row[lag + 1] = flat[t - lag]
            if not np.isnan(flat[t - lag]):
                known += 1
                sums = pairs[int(t - lag < day * steps), day, lag]
                sums[0, 0] += 1.0
                sums[1, 0] += flat[t]
                sums[0, 1] += flat[t - lag]
                sums[1, 1] += flat[t] * flat[t - lag]
        if known == LAGS:
            sums = triples[int(t - LAGS + 1 < day * steps), day]
            for i in range(LAGS + 1):
                for j in range(LAGS + 1):
                    sums[i, j] += row[i] * row[j]
    return pairs, triples


@compiled
def add_up(moments: Floats, begin: int, end: int, out: Floats) -> None:
    """Moments of days ``begin`` to ``end`` together, without what reaches back before them.

    ``moments`` has shape (2, n_days, n_sums), ``out`` (n_sums,).
    """
    out[:] = 0.0
    for day in range(begin, end):
        for i in range(len(out)):
            out[i] += moments[0, day, i]
            if day > begin:
                out[i] += moments[1, day, i]


@compiled
def fit_ar2(pairs: Floats) -> tuple[float, float]:
    """AR(2) coefficients by Yule-Walker from the moments at lags 0 to 2, shape (3, 2, 2); kept stationary."""
    count = pairs[0, 0, 0]
    mean = pairs[0, 1, 0] / count
    covariance = np.zeros(LAGS)
    for lag in range(LAGS):
        m = pairs[lag]
        total = m[1, 1] - mean * (m[1, 0] + m[0, 1]) + mean * mean * m[0, 0]
        covariance[lag] = total / max(m[0, 0], 1.0)
    if covariance[0] <= 1e-12:
        return 0.0, 0.0
    limit = MAX_PARTIAL_AUTOCORRELATION
    r1 = min(max(covariance[1] / covariance[0], -limit), limit)
    r2 = covariance[2] / covariance[0]
    partial = min(max((r2 - r1 * r1) / (1.0 - r1 * r1), -limit), limit)
    return r1 * (1.0 - partial), partial


@compiled
def error_sd(triples: Floats, a1: float, a2: float) -> float:
    """Standard deviation of one-step forecast errors, from the moments of whole triples, shape (4, 4)."""
    count = triples[0, 0]
    total = triples[0, 1] - a1 * triples[0, 2] - a2 * triples[0, 3]
    squares = 0.0
    for i in range(1, LAGS + 1):
        for j in range(1, LAGS + 1):
            c = (1.0 if i == 1 else -a1 if i == 2 else -a2) * (1.0 if j == 1 else -a1 if j == 2 else -a2)
            squares += c * triples[i, j]
    return float(np.sqrt(max(squares / count - (total / count) ** 2, 1e-12)))


@compiled
def filter_ar2(level: Floats, a1: float, a2: float, out: Floats) -> None:
    """Forecast errors of an AR(2) process over a gappy series, each in units of its own forecast error.

    State: forecasts of this and the last level with their covariance, in units of the innovation variance.
    """
    unknown = 1e4  # forecast variance before the first reading: nothing is known
    now, last, v11, v12, v22 = 0.0, 0.0, unknown, 0.0, unknown
    for t in range(len(level)):
        forecast = a1 * now + a2 * last
        f11 = a1 * a1 * v11 + 2.0 * a1 * a2 * v12 + a2 * a2 * v22 + 1.0
        f12 = a1 * v11 + a2 * v12
        f22 = v11
        if np.isnan(level[t]):
            last, now = now, forecast
            v11, v12, v22 = f11, f12, f22
            out[t] = np.nan
        else:
            error = level[t] - forecast
            gain = f12 / f11
            out[t] = error / np.sqrt(f11) if f11 <= MAX_BRIDGED_VARIANCE else np.nan
            last = now + gain * error
            now = level[t]
            v11, v12, v22 = 0.0, 0.0, f22 - gain * f12


@compiled
def filtered_sd(level: Floats, a1: float, a2: float) -> float:
    """Standard deviation of the filter's scaled errors; NaN with fewer than two."""
    errors = np.empty(len(level))
    filter_ar2(level, a1, a2, errors)
    n, total, squares = 0, 0.0, 0.0
    for error in errors:
        if not np.isnan(error):
            n += 1
            total += error
    if n < 2:
        return np.nan
    for error in errors:
        if not np.isnan(error):
            squares += (error - total / n) ** 2
    return max(math.sqrt(squares / n), 1e-6)


@compiled
def run_in(level: Floats, begin: int, end: int) -> int:
    """Row at which a filter may start to be exact from row ``end`` on: at the last two levels in a row."""
    for t in range(end - 2, begin - 1, -1):
        if not np.isnan(level[t]) and not np.isnan(level[t + 1]):
            return t
    return begin


@compiled
def whiten(level: Floats, first: int, fit_days: int, min_fit: int) -> Floats:
    """Innovations of the rows ``first`` to the last, each day from a process fitted to the days before it."""
    n_days, steps = level.shape
    out = np.full((n_days - first, steps), np.nan)
    flat = level.reshape(n_days * steps)
    errors = np.empty((fit_days + 1) * steps)
    pairs, triples = day_moments(level)
    flat_pairs, flat_triples = pairs.reshape(2, n_days, -1), triples.reshape(2, n_days, -1)
    pair_sum, triple_sum = np.zeros((LAGS, 2, 2)), np.zeros((LAGS + 1, LAGS + 1))
    for day in range(first, n_days):
        begin = max(0, day - fit_days)
        add_up(flat_pairs, begin, day, pair_sum.reshape(-1))
        known = pair_sum[0, 0, 0]
        if known < min_fit:
            continue
        add_up(flat_triples, begin, day, triple_sum.reshape(-1))
        a1, a2 = fit_ar2(pair_sum)
        if triple_sum[0, 0] >= LEAST_TRIPLE_SHARE * known:
            sd = error_sd(triple_sum, a1, a2)
        else:
            sd = filtered_sd(flat[begin * steps : day * steps], a1, a2)
        start = run_in(flat, begin * steps, day * steps)
        ahead = day * steps - start
        filter_ar2(flat[start : (day + 1) * steps], a1, a2, errors)
        for t in range(steps):
            out[day - first, t] = min(max(errors[ahead + t] / sd, -CLIP), CLIP)
    return out

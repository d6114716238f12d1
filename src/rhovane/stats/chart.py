"""The change chart of one pair: today's score against a moving reference, gathered into evidence.

*Reference*: the last 90 valid days up to 14 days before today, weighted by joint hours. *Deviation*:
today's distance from it as a t statistic, made normal, divided by the scale that the pair's own past
deviations had out of sample, kept within ±3.5. *Evidence*: a Shiryaev-Roberts statistic, averaged over
shifts of several sizes and over the two directions; its logarithm is compared with a threshold that
depends on nothing but the wanted number of false alarms.

References
----------
A. N. Shiryaev (1963), Theory of Probability and its Applications 8, 22-46; S. W. Roberts (1966),
Technometrics 8, 411-430 (the statistic). D. L. Wallace (1959), Annals of Mathematical Statistics 30,
1121-1130 (t to normal). Moving reference, guard and scale: our own measurements, tests/studies/alerting.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.compiled import compiled

Floats = NDArray[np.float64]

SHIFTS = np.array([1.5, 2.5, 4.0])
"""Shifts of a pair's mean, in standard deviations, that its evidence is averaged over: sharp changes, not
the slow turning of a season."""
NODE_SHIFTS = np.array([1.0, 2.0, 4.0])
"""The same for a series or station: seasons leave these alone, drifting instruments do not."""
LOSS_SHARE = 0.65
"""Share of the evidence given to a relationship growing weaker; the rest to its growing stronger."""
NO_RELATION = 0.1
"""Below this absolute reference correlation neither direction is a loss, and both have half."""
MIN_REFERENCE_DAYS = 20
"""Fewest valid days in a reference; with fewer a day is not judged."""
MAX_DEVIATION = 3.5
"""Deviations beyond this many standard deviations count as that many: one odd day is not an alarm."""
WEIGHT_OFFSET = 2.0
"""Joint hours that a daily score costs before it counts: its weight is hours - 2, at least 1."""
SCALE_DAYS = 200
"""Days of past deviations from which their out-of-sample scale is estimated."""
LEAST_SCALE_DAYS = 90
"""Reference days before the first judged one tell of autocorrelation until there are this many days."""
SCALE_PRIOR_DAYS = 75.0
"""Weight, in days, of the network's pooled variance in a pair's own."""
POOL_PRIOR_DAYS = 300.0
"""Weight, in days, of variance 1 in the variance pooled over all charts."""
SCALE_LAGS = 6
"""Days over which autocorrelation of deviations widens their scale: most of a week, as weather lasts."""
AUTOCORRELATION_PRIOR_DAYS = 200.0
"""Weight, in days, of the network's pooled autocorrelation in a pair's own."""
MAX_AUTOCORRELATION_SUM = 4.0
"""The sum of autocorrelations counts up to this."""
LARGEST_STATISTIC = 1e12
"""The Shiryaev-Roberts statistic stops here; far above any threshold."""


@compiled
def normal_from_t(t: float, df: float) -> float:
    """Normal deviate with the tail probability of a t statistic, after Wallace (1959); within 0.005 from df = 19 for |t| ≤ 6."""
    size = (8.0 * df + 1.0) / (8.0 * df + 3.0) * math.sqrt(df * math.log1p(t * t / df))
    return size if t > 0.0 else -size


@compiled
def gather(statistic: Floats, z: float, shifts: Floats) -> None:
    """Add one day's deviation to the Shiryaev-Roberts statistics, shape (2, n_shifts): up, down; in place."""
    for k in range(len(shifts)):
        shift = shifts[k]
        up = (1.0 + statistic[0, k]) * math.exp(shift * z - shift * shift / 2.0)
        down = (1.0 + statistic[1, k]) * math.exp(-shift * z - shift * shift / 2.0)
        statistic[0, k] = min(up, LARGEST_STATISTIC)
        statistic[1, k] = min(down, LARGEST_STATISTIC)


@compiled
def mean_of(values: Floats) -> float:
    """Mean of a few values."""
    total = 0.0
    for value in values:
        total += value
    return total / len(values)


@compiled
def evidence(statistic: Floats, mean: float) -> float:
    """Logarithm of the averaged statistic, the direction of loss weighing more; ``mean`` is the reference."""
    up, down = mean_of(statistic[0]), mean_of(statistic[1])
    share = LOSS_SHARE if abs(math.tanh(mean)) >= NO_RELATION else 0.5
    mixed = share * down + (1.0 - share) * up if mean >= 0.0 else share * up + (1.0 - share) * down
    return math.log(max(mixed, 1e-12))


@compiled
def scale_from(
    judged: Floats, sums: Floats, counts: Floats, pool_judged: Floats, pool: Floats, pool_counts: Floats
) -> float:
    """Out-of-sample standard deviation of a chart's deviations from sums of their products.

    ``judged`` holds sum and number of the squares of days that were judged, ``sums`` and ``counts`` (shape
    (SCALE_LAGS + 1,)) those of the products at lags 0 to 6, reference days included. All are shrunk to the
    pool of all charts. Autocorrelation widens the scale, summed up to the lag where the sum is largest: what
    chance takes away at later lags would otherwise narrow the scale of a pair that is persistent.
    """
    pooled = (pool_judged[0] + POOL_PRIOR_DAYS) / (pool_judged[1] + POOL_PRIOR_DAYS)
    variance = (judged[0] + SCALE_PRIOR_DAYS * pooled) / (judged[1] + SCALE_PRIOR_DAYS)
    common = (pool[0] + POOL_PRIOR_DAYS) / (pool_counts[0] + POOL_PRIOR_DAYS)
    own = (sums[0] + SCALE_PRIOR_DAYS * common) / (counts[0] + SCALE_PRIOR_DAYS)
    total, largest = 0.0, 0.0
    for lag in range(1, SCALE_LAGS + 1):
        shared = pool[lag] / max(pool_counts[lag], 1.0) / common
        total += (sums[lag] / own + AUTOCORRELATION_PRIOR_DAYS * shared) / (
            counts[lag] + AUTOCORRELATION_PRIOR_DAYS
        )
        largest = max(largest, total)
    return math.sqrt(variance * (1.0 + 2.0 * min(largest, MAX_AUTOCORRELATION_SUM)))


@compiled
def scales(
    z: Floats, known: Floats, barred: NDArray[np.bool_], first: NDArray[np.int64], day: int, guard_days: int
) -> Floats:
    """Out-of-sample standard deviation of each chart's deviations, see :func:`scale_from`.

    ``z`` has shape (n_charts, n_days), ``known`` is 1 for the days that count; both are 0 elsewhere. Days that
    are ``barred`` do not count either; no rows: none are. The 200 days before ``day`` up to the guard are used,
    or those from a chart's ``first`` on. Where these are fewer than 90, reference days before them fill up.
    """
    n_charts = len(z)
    begin, end = max(0, day - SCALE_DAYS), max(0, day - guard_days)
    sums, counts = np.zeros((n_charts, SCALE_LAGS + 1)), np.zeros((n_charts, SCALE_LAGS + 1))
    judged = np.zeros((n_charts, 2))
    pool, pool_counts, pool_judged = np.zeros(SCALE_LAGS + 1), np.zeros(SCALE_LAGS + 1), np.zeros(2)
    n = max(0, end - begin)
    for h in range(n_charts):
        start = max(0, min(first[h], end - LEAST_SCALE_DAYS) - begin)
        past, seen = z[h, begin:end], known[h, begin:end]
        if len(barred) and barred[h, begin:end].any():
            past, seen = past * ~barred[h, begin:end], seen * ~barred[h, begin:end]
        for lag in range(min(SCALE_LAGS + 1, n - start)):
            sums[h, lag] = np.dot(past[start + lag :], past[start : n - lag])
            counts[h, lag] = np.dot(seen[start + lag :], seen[start : n - lag])
            pool[lag] += sums[h, lag]
            pool_counts[lag] += counts[h, lag]
        for t in range(max(0, first[h] - begin), n):
            judged[h, 0] += past[t] * past[t]
            judged[h, 1] += seen[t]
        pool_judged[0] += judged[h, 0]
        pool_judged[1] += judged[h, 1]
    out = np.empty(n_charts)
    for h in range(n_charts):
        out[h] = scale_from(judged[h], sums[h], counts[h], pool_judged, pool, pool_counts)
    return out


@compiled
def gather_all(z: Floats, mean: Floats, statistic: Floats, values: Floats) -> None:
    """Add one day to every chart and read its log evidence; in place.

    The first ``len(mean)`` charts are pairs, read in both directions; the others are nodes, whose evidence
    is the rising side alone. A chart without a deviation today keeps its statistic.
    """
    for h in range(len(z)):
        if not np.isnan(z[h]):
            gather(statistic[h], z[h], SHIFTS if h < len(mean) else NODE_SHIFTS)
        if h < len(mean):
            values[h] = evidence(statistic[h], mean[h])
        else:
            values[h] = math.log(max(mean_of(statistic[h, 0]), 1e-12))

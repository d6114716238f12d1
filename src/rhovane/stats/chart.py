"""The change chart of one pair: today's score against a moving reference, gathered into evidence.

*Reference*: the last 90 valid days up to 14 days before today, weighted by joint hours. *Deviation*:
today's distance from it as a t statistic, made normal, divided by the scale that the pair's own past
deviations had out of sample, kept within ±3.5. *Evidence*: a Shiryaev-Roberts statistic, averaged over
shifts of 1, 2 and 4 standard deviations and over the two directions; its logarithm is compared with a
threshold that depends on nothing but the wanted number of false alarms.

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

SHIFTS = np.array([1.0, 2.0, 4.0])
"""Shifts of the mean, in standard deviations, that the evidence is averaged over."""
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
SCALE_PRIOR_DAYS = 150.0
"""Weight, in days, of the network's pooled variance in a pair's own."""
POOL_PRIOR_DAYS = 300.0
"""Weight, in days, of variance 1 in the variance pooled over all charts."""
SCALE_LAGS = 10
"""Days over which autocorrelation of deviations widens their scale."""
AUTOCORRELATION_PRIOR_DAYS = 400.0
"""Weight, in days, of the network's pooled autocorrelation in a pair's own."""
MAX_AUTOCORRELATION_SUM = 3.0
"""The sum of autocorrelations counts from 0 to this."""
LARGEST_STATISTIC = 1e12
"""The Shiryaev-Roberts statistic stops here; far above any threshold."""


@compiled
def normal_from_t(t: float, df: float) -> float:
    """Normal deviate with the tail probability of a t statistic, after Wallace (1959); within 0.003 from df = 19."""
    size = (8.0 * df + 1.0) / (8.0 * df + 3.0) * math.sqrt(df * math.log1p(t * t / df))
    return size if t > 0.0 else -size


@compiled
def gather(statistic: Floats, z: float) -> None:
    """Add one day's deviation to the Shiryaev-Roberts statistics, shape (2, n_shifts): up, down; in place."""
    for k in range(len(SHIFTS)):
        shift = SHIFTS[k]
        up = (1.0 + statistic[0, k]) * math.exp(shift * z - shift * shift / 2.0)
        down = (1.0 + statistic[1, k]) * math.exp(-shift * z - shift * shift / 2.0)
        statistic[0, k] = min(up, LARGEST_STATISTIC)
        statistic[1, k] = min(down, LARGEST_STATISTIC)


@compiled
def evidence(statistic: Floats, mean: float) -> float:
    """Logarithm of the averaged statistic, the direction of loss weighing more; ``mean`` is the reference."""
    up = statistic[0].mean()
    down = statistic[1].mean()
    share = LOSS_SHARE if abs(math.tanh(mean)) >= NO_RELATION else 0.5
    mixed = share * down + (1.0 - share) * up if mean >= 0.0 else share * up + (1.0 - share) * down
    return math.log(max(mixed, 1e-12))


@compiled
def standardised(t: Floats, n: NDArray[np.int64], judged: NDArray[np.bool_]) -> Floats:
    """t statistics on n - 1 degrees of freedom as normal deviates; NaN where not judged or n is too small."""
    out = np.full(len(t), np.nan)
    for h in range(len(t)):
        if judged[h] and n[h] >= MIN_REFERENCE_DAYS:
            out[h] = normal_from_t(t[h], n[h] - 1.0)
    return out


@compiled
def scales(z: Floats, day: int, guard_days: int) -> Floats:
    """Out-of-sample standard deviation of each chart's deviations, shrunk to that of all charts.

    ``z`` has shape (n_charts, n_days), NaN on days that do not count; the 200 days before ``day`` up to the
    guard are used. Autocorrelation over three days widens the scale.
    """
    n_charts = len(z)
    begin, end = max(0, day - SCALE_DAYS), max(0, day - guard_days)
    sums, counts = np.zeros((n_charts, SCALE_LAGS + 1)), np.zeros((n_charts, SCALE_LAGS + 1))
    for h in range(n_charts):
        for lag in range(SCALE_LAGS + 1):
            for t in range(begin + lag, end):
                product = z[h, t] * z[h, t - lag]
                if not np.isnan(product):
                    sums[h, lag] += product
                    counts[h, lag] += 1.0
    pool, pool_counts = sums.sum(axis=0), counts.sum(axis=0)
    pooled = (pool[0] + POOL_PRIOR_DAYS) / (pool_counts[0] + POOL_PRIOR_DAYS)
    out = np.empty(n_charts)
    for h in range(n_charts):
        variance = (sums[h, 0] + SCALE_PRIOR_DAYS * pooled) / (counts[h, 0] + SCALE_PRIOR_DAYS)
        total = 0.0
        for lag in range(1, SCALE_LAGS + 1):
            common = pool[lag] / max(pool_counts[lag], 1.0) / pooled
            total += (sums[h, lag] / variance + AUTOCORRELATION_PRIOR_DAYS * common) / (
                counts[h, lag] + AUTOCORRELATION_PRIOR_DAYS
            )
        out[h] = math.sqrt(variance * (1.0 + 2.0 * min(max(total, 0.0), MAX_AUTOCORRELATION_SUM)))
    return out


@compiled
def gather_all(z: Floats, mean: Floats, statistic: Floats, values: Floats) -> None:
    """Add one day to every chart and read its log evidence; in place.

    The first ``len(mean)`` charts are pairs, read in both directions; the others are nodes, whose evidence
    is the rising side alone. A chart without a deviation today keeps its statistic.
    """
    for h in range(len(z)):
        if not np.isnan(z[h]):
            gather(statistic[h], z[h])
        if h < len(mean):
            values[h] = evidence(statistic[h], mean[h])
        else:
            values[h] = math.log(max(statistic[h, 0].mean(), 1e-12))


@compiled
def chart_alone(
    score: Floats, baseline_days: int, guard_days: int, first: int
) -> tuple[Floats, Floats, Floats]:
    """One pair's chart without incidents: scaled deviations, two-sided and one-sided log evidence by day.

    What the watch makes of a pair that no other is related to, with equal weights, before its first alarm;
    the thresholds were simulated with it. ``score`` has shape (n_days,); the chart begins on day ``first``.
    """
    n_days = len(score)
    raw = np.full((1, n_days), np.nan)
    scaled, both, rising = np.full(n_days, np.nan), np.full(n_days, np.nan), np.full(n_days, np.nan)
    statistic = np.zeros((2, len(SHIFTS)))
    for day in range(first, n_days):
        n = 0
        total, squares = 0.0, 0.0
        at = day - guard_days - 1
        while at >= 0 and n < baseline_days:
            if not np.isnan(score[at]):
                n += 1
                total += score[at]
                squares += score[at] * score[at]
            at -= 1
        if n >= MIN_REFERENCE_DAYS and not np.isnan(score[day]):
            mean = total / n
            variance = (squares - n * mean * mean) / (n - 1)
            t = (score[day] - mean) / math.sqrt(max(variance, 1e-12) * (1.0 + 1.0 / n))
            z = normal_from_t(t, n - 1.0)
            raw[0, day] = min(max(z, -MAX_DEVIATION), MAX_DEVIATION)
            scaled[day] = min(max(z / scales(raw, day, guard_days)[0], -MAX_DEVIATION), MAX_DEVIATION)
            gather(statistic, scaled[day])
            both[day] = evidence(statistic, mean)
            rising[day] = math.log(max(statistic[0].mean(), 1e-12))
    return scaled, both, rising

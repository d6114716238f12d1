"""Following the lag of a pair through time: a clock that slips moves the lag, not the relationship.

Hour-to-hour persistence smears the correlation of levels over many lags. What each series does beyond what its
own past foretells (its innovations) peaks sharply at the true lag: in our trials the best lag of hourly changes
was right in all 7-day windows of ozone, temperature and wind speed.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from rhovane.stats.arguments import Floats, Integers, as_pair, as_series
from rhovane.stats.compiled import compiled
from rhovane.stats.cycle import checked_steps_per_day, trailing_scores
from rhovane.stats.dependence import spearman_p_value
from rhovane.stats.rolling import rolling_rank_correlation

FIT_DAYS = 28  # days before a day from whose scores its AR(2) process is fitted
MIN_FIT_DAYS = 4  # days' worth of products at each lag, below which a day has no innovations
LARGEST_PARTIAL = 0.99  # fitted partial autocorrelations are kept inside, so that the process is stationary
CLEAR = 0.01  # corrected p-value below which a lag is taken as found


@dataclass(frozen=True)
class LagTrack:
    """The lag of a pair, window by window.

    Attributes
    ----------
    end : ndarray of int64, shape (n_windows,)
        Row at which each window ends.
    lag : ndarray of float64, shape (n_windows,)
        Rows by which x leads y where the innovations show it clearly (corrected p below .01); NaN elsewhere.
    best_lag : ndarray of float64, shape (n_windows,)
        Lag with the largest absolute correlation of innovations, clear or not; NaN where none is computable.
    statistic : ndarray of float64, shape (n_windows,)
        Spearman's rho of the innovations at ``best_lag``.
    p_value : ndarray of float64, shape (n_windows,)
        Two-sided, corrected for having looked at all lags (Šidák); NaN where not assessable.
    lags : ndarray of int64, shape (n_lags,)
    profile : ndarray of float64, shape (n_windows, n_lags)
        Spearman's rho of the innovations at every lag.
    """

    end: Integers
    lag: Floats
    best_lag: Floats
    statistic: Floats
    p_value: Floats
    lags: Integers
    profile: Floats


def track_lag(
    x: ArrayLike,
    y: ArrayLike,
    *,
    window: int = 168,
    step: int = 24,
    lags: Iterable[int] = range(-6, 7),
    min_pairs: int | None = None,
    steps_per_day: int = 24,
) -> LagTrack:
    """Return the lag at which the innovations of x and y agree best, in rolling windows; uses nothing later.

    Parameters
    ----------
    x, y : array-like of float or int, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one. Give 58 days before the rows that matter.
    window, step, lags, min_pairs
        As for :func:`rolling_rank_correlation`; a pair counts where both have an innovation. ``min_pairs`` None
        takes half of the window.
    steps_per_day : int
        Rows a day.

    Raises
    ------
    ValueError
        As for :func:`rolling_rank_correlation`.

    Notes
    -----
    Decided by ranks only: a strictly increasing transform of a series changes nothing. A clock slip of less than
    one row cannot be seen.
    """
    first, second = as_pair(x, y)
    wanted = window // 2 if min_pairs is None else min_pairs
    table = rolling_rank_correlation(
        innovations(first, steps_per_day=steps_per_day),
        innovations(second, steps_per_day=steps_per_day),
        window=window,
        step=step,
        lags=lags,
        min_pairs=wanted,
    )
    strength = np.where(np.isnan(table.statistic), -1.0, np.abs(table.statistic))
    # Among equals the shorter lag.
    order = np.lexsort((table.lags, np.abs(table.lags)))
    best = order[strength[:, order].argmax(axis=1)]
    rows = np.arange(len(best))
    statistic = table.statistic[rows, best]
    computed = ~np.isnan(statistic)
    best_lag = np.where(computed, table.lags[best], np.nan)
    pairs = np.where(computed, table.n_pairs[rows, best], np.nan)
    n_lags = (~np.isnan(table.statistic)).sum(axis=1)
    single = spearman_p_value(statistic, pairs)
    p_value = -np.expm1(n_lags * np.log1p(-np.minimum(single, 1.0 - 1e-16)))
    return LagTrack(
        end=table.end,
        lag=np.where(p_value < CLEAR, best_lag, np.nan),
        best_lag=best_lag,
        statistic=statistic,
        p_value=p_value,
        lags=table.lags,
        profile=table.statistic,
    )


def innovations(x: ArrayLike, *, steps_per_day: int = 24) -> Floats:
    """Return what an AR(2) process, fitted to the 28 days before each day, could not foretell of the scores of x.

    Parameters
    ----------
    x : array-like of float, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one.
    steps_per_day : int
        Rows a day; days are counted from row 0.

    Returns
    -------
    ndarray of float64, shape (n_rows,)
        In units of normal scores among the last 30 days; NaN where the row or one of the two before it has no
        score, and where the 28 days hold too little to fit.

    References
    ----------
    Yule (1927); Walker (1931), Proceedings of the Royal Society A 131 (from memory): AR coefficients from
    autocorrelations, here each over its observed products.
    """
    per_day = checked_steps_per_day(steps_per_day)
    score = trailing_scores(as_series(x, "x"), per_day)
    result = np.full(len(score), np.nan)
    _fill_innovations(score, per_day, FIT_DAYS * per_day, MIN_FIT_DAYS * per_day, result)
    return result


@compiled
def _fill_innovations(score: Floats, per_day: int, history: int, fewest: int, result: Floats) -> None:
    n = len(score)
    for day_start in range(0, n, per_day):
        since = max(0, day_start - history)
        total = 0.0
        count = 0
        for t in range(since, day_start):
            if score[t] == score[t]:
                total += score[t]
                count += 1
        if count < fewest:
            continue
        mean = total / count
        correlation = np.zeros(3)
        enough = True
        for k in range(3):
            products = 0.0
            found = 0
            for t in range(since, day_start - k):
                if score[t] == score[t] and score[t + k] == score[t + k]:
                    products += (score[t] - mean) * (score[t + k] - mean)
                    found += 1
            if found < fewest:
                enough = False
            else:
                correlation[k] = products / found
        if not enough or correlation[0] <= 0.0:
            continue
        first = min(LARGEST_PARTIAL, max(-LARGEST_PARTIAL, correlation[1] / correlation[0]))
        second = (correlation[2] / correlation[0] - first * first) / (1.0 - first * first)
        second = min(LARGEST_PARTIAL, max(-LARGEST_PARTIAL, second))
        a1 = first * (1.0 - second)
        for t in range(max(2, day_start), min(n, day_start + per_day)):
            # NaN in any of the three makes the innovation NaN.
            result[t] = score[t] - mean - a1 * (score[t - 1] - mean) - second * (score[t - 2] - mean)

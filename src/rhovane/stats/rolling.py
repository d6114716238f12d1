"""Rank correlation in every window and at every lag of one pair of series."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rhovane.stats.arguments import (
    Floats,
    Integers,
    as_pair,
    checked_lags,
    checked_method,
    checked_min_pairs,
    checked_step,
    checked_window,
)
from rhovane.stats.correlation_table import correlation_table
from rhovane.stats.rolling_reasons import describe_reason


@dataclass(frozen=True)
class RollingCorrelation:
    """Rank correlation of a pair, by window and lag.

    Attributes
    ----------
    end : ndarray of int64, shape (n_windows,)
        Row at which each window ends: window - 1, window - 1 + step, …
    lags : ndarray of int64, shape (n_lags,)
        Steps by which x leads y, in the order asked for.
    statistic : ndarray of float64, shape (n_windows, n_lags)
        Spearman's rho or Kendall's tau-b in [-1, 1]; NaN where not computable.
    n_pairs : ndarray of int64, shape (n_windows, n_lags)
        Rows of the window in which both values are present; given whether or not there is a statistic.
    reason_code : ndarray of int8, shape (n_windows, n_lags)
        0 computed, 1 too few pairs, 2 x constant, 3 y constant; in words from :meth:`reason`.
    method : str
        "spearman" or "kendall".
    window, step, min_pairs : int
        As used, in rows, rows and pairs.
    """

    end: Integers
    lags: Integers
    statistic: Floats
    n_pairs: Integers
    reason_code: NDArray[np.int8]
    method: str
    window: int
    step: int
    min_pairs: int

    def reason(self, row: int, column: int) -> str | None:
        """Why window ``row`` has no statistic at lag ``column``; None where it has one."""
        return describe_reason(
            int(self.reason_code[row, column]), int(self.n_pairs[row, column]), self.min_pairs
        )


def rolling_rank_correlation(
    x: ArrayLike,
    y: ArrayLike,
    *,
    window: int,
    step: int = 1,
    lags: Iterable[int] = (0,),
    method: str = "spearman",
    min_pairs: int | None = None,
) -> RollingCorrelation:
    """Return the rank correlation of x and y in rolling windows, at each lag.

    At lag L ≥ 0 the value x[t-L] is paired with y[t], at L < 0 the value x[t] with y[t-|L|]: a pair belongs
    to its later row, and the window that ends at row e holds the pairs of rows e-window+1 … e. So a value at
    e uses nothing after e, and lag -L of (x, y) is lag L of (y, x). Ranks are taken afresh inside every window
    over its complete pairs, ties as midranks.

    Parameters
    ----------
    x, y : array-like of float or int, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one.
    window : int
        Rows, 8 to 4096, at most n_rows.
    step : int
        Rows between the ends of neighbouring windows.
    lags : iterable of int
        Rows by which x leads y; each within ±(n_rows - 1).
    method
        "spearman" (rho) or "kendall" (tau-b).
    min_pairs : int, optional
        Fewest complete pairs for a statistic, 2 to ``window``. None takes 75 % of the window, rounded up.

    Returns
    -------
    RollingCorrelation
        NaN with a reason where there are fewer pairs or one side is constant.

    Raises
    ------
    ValueError
        Infinite values, unequal lengths, more than one dimension, or a parameter out of range.

    Notes
    -----
    All sums are whole numbers; one division and one root at the very end are the only roundings. The result
    does not depend on the number of threads.

    References
    ----------
    Spearman (1904), American Journal of Psychology 15; Kendall (1945), Biometrika 33 (tau-b).

    Examples
    --------
    >>> result = rolling_rank_correlation(range(10), range(10), window=8, lags=(0, 1))
    >>> result.statistic[-1]
    array([1., 1.])
    """
    first, second = as_pair(x, y)
    length = checked_window(window, len(first))
    stride = checked_step(step)
    leads = checked_lags(lags, len(first))
    chosen = checked_method(method)
    fewest = checked_min_pairs(min_pairs, length)
    table = correlation_table(first, second, leads, length, stride, fewest, chosen)
    return RollingCorrelation(
        end=np.arange(length - 1, len(first), stride, dtype=np.int64),
        lags=leads,
        statistic=np.ascontiguousarray(table.statistic.T),
        n_pairs=np.ascontiguousarray(table.n_pairs.T, dtype=np.int64),
        reason_code=np.ascontiguousarray(table.code.T),
        method=chosen,
        window=length,
        step=stride,
        min_pairs=fewest,
    )

"""What a night needs of one pair: all lags of the one window that ends at the last row."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from rhovane.stats.arguments import (
    Floats,
    as_pair,
    checked_lags,
    checked_method,
    checked_min_pairs,
    checked_window,
)
from rhovane.stats.dependence import MIN_EFFECTIVE, autocorrelation, inflation
from rhovane.stats.interval import rank_interval
from rhovane.stats.rank_kernels import Ranks, dense_ranks
from rhovane.stats.scan_lags import DEFAULT_SEED, LagScan, Scan, scan_lags


@dataclass(frozen=True)
class WindowScan(LagScan):
    """Rank correlation of one window at each lag; see :class:`LagScan` for the shared fields.

    Attributes
    ----------
    low, high : ndarray of float64, shape (n_lags,)
        Bounds of the 95 % interval at lag 0 and at the lag with the largest absolute statistic; NaN at the
        other lags and where not assessable.
    tie_share : float
        Largest share of the pairs that one value takes, at lag 0 (else at the lag with most pairs); NaN
        without a computable lag.
    """

    low: Floats
    high: Floats
    tie_share: float


def window_scan(
    x: ArrayLike,
    y: ArrayLike,
    *,
    window: int,
    lags: Iterable[int],
    method: str = "spearman",
    min_pairs: int | None = None,
    min_effective: float = MIN_EFFECTIVE,
    interval: bool = True,
    seed: int = DEFAULT_SEED,
) -> WindowScan:
    """Return the rank correlations of the window that ends at the last row, with significance and intervals.

    Parameters
    ----------
    x, y : array-like of float or int, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one. ``window`` + max |lag| rows are used if
        they are there; with fewer, the earliest lagged values count as missing.
    window : int
        Rows, 8 to 4096.
    lags : iterable of int
        Rows by which x leads y.
    method
        "spearman" or "kendall".
    min_pairs : int, optional
        Fewest complete pairs for a statistic; None takes 75 % of the window, rounded up.
    min_effective : float
        Fewest effective pairs for a p-value, 4 or more.
    interval
        Whether to compute intervals.
    seed
        Of the draws that judge the best lag.

    Raises
    ------
    ValueError
        As for :func:`rolling_rank_correlation`; ``min_effective`` below 4.

    Examples
    --------
    >>> import numpy as np
    >>> x = np.random.default_rng(1).normal(size=103)
    >>> scan = window_scan(x, np.roll(x, 2), window=100, lags=range(-3, 4))
    >>> scan.best_lag, float(scan.statistic[5])
    (2, 1.0)
    """
    first, second = as_pair(x, y)
    length = checked_window(window)
    leads = checked_lags(lags, length)
    chosen = checked_method(method)
    fewest = checked_min_pairs(min_pairs, length)
    checked_min_effective(min_effective)
    reach = int(np.abs(leads).max())
    ranks_x, n_x = dense_ranks(last_rows(first, length + reach))
    ranks_y, n_y = dense_ranks(last_rows(second, length + reach))
    scan = scan_lags(
        _window_at(ranks_x, ranks_y, length), (n_x, n_y), leads, chosen, fewest, min_effective, seed
    )
    low, high = _intervals(scan) if interval else (np.full(len(leads), np.nan), np.full(len(leads), np.nan))
    tie_share = float("nan") if scan.base is None else scan.ranks[scan.base].tie_share
    return WindowScan(**vars(scan.result), low=low, high=high, tie_share=tie_share)


def checked_min_effective(min_effective: float) -> None:
    """Refuse a limit at which no t distribution is left."""
    if not 4 <= min_effective < np.inf:
        raise ValueError(
            f"min_effective={min_effective} is out of range; choose a number of pairs from 4 up."
        )


def last_rows(values: Floats, rows: int) -> Floats:
    """Return the last ``rows`` values; where there are fewer, the earliest are missing (NaN)."""
    if len(values) >= rows:
        return values[len(values) - rows :]
    return np.concatenate((np.full(rows - len(values), np.nan), values))


def _window_at(x: Ranks, y: Ranks, window: int) -> Callable[[int], tuple[Ranks, Ranks]]:
    n = len(x)

    def aligned(lag: int) -> tuple[Ranks, Ranks]:
        start_x, start_y = n - window - max(lag, 0), n - window - max(-lag, 0)
        return x[start_x : start_x + window], y[start_y : start_y + window]

    return aligned


def _intervals(scan: Scan) -> tuple[Floats, Floats]:
    found: LagScan = scan.result
    low, high = np.full(len(found.lags), np.nan), np.full(len(found.lags), np.nan)
    if scan.base is None or scan.acf is None:
        return low, high
    strongest = int(np.nanargmax(np.abs(found.statistic)))
    wanted: set[int] = {strongest, *np.flatnonzero(found.lags == 0).tolist()}
    for i in sorted(wanted):
        if np.isnan(found.statistic[i]):
            continue
        acf, factor = scan.acf, scan.factor
        if i != scan.base:
            acf = autocorrelation(scan.ranks[i])
            factor = inflation(acf)
        bounds = rank_interval(scan.ranks[i], acf, factor, scan.sums.get(i))
        low[i], high[i] = bounds.low, bounds.high
    return low, high

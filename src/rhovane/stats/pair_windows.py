"""What the night needs of one pair: many windows at all lags, with significance and an interval at lag 0.

The numbers are those of :func:`rhovane.stats.window_scan`, window by window; here the ranks of a series are
made once for all its windows, and the exact sums of all lags of a window by one compiled call.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rhovane.stats.arguments import Floats, Integers, as_pair, checked_lags, checked_method, checked_window
from rhovane.stats.compiled import compiled
from rhovane.stats.dependence import (
    MIN_EFFECTIVE,
    autocorrelation,
    effective_pairs,
    inflation,
    joint_ranks,
    spearman_p_value,
)
from rhovane.stats.interval import rank_interval
from rhovane.stats.rank_kernels import Ranks, centre_joint_ranks, dense_ranks
from rhovane.stats.rank_test import too_little_reason
from rhovane.stats.rolling_reasons import COMPUTED, CONSTANT_X, CONSTANT_Y, TOO_FEW_PAIRS, describe_reason
from rhovane.stats.scan_window import WindowScan, checked_min_effective, window_scan


@dataclass(frozen=True)
class WindowTable:
    """Rank correlations of one pair by window and lag.

    Attributes
    ----------
    end : ndarray of int64, shape (n_windows,)
        Row at which each window ends.
    lags : ndarray of int64, shape (n_lags,)
        Rows by which x leads y.
    statistic, n_effective, p_value : ndarray of float64, shape (n_windows, n_lags)
        NaN where not computable or not assessable.
    n_pairs : ndarray of int64, shape (n_windows, n_lags)
        Rows with both values.
    low, high : ndarray of float64, shape (n_windows, n_lags)
        Bounds of the 95 % interval at lag 0; NaN at other lags and where not assessable.
    reason : list of list of str or None
        By window and lag: why there is no statistic, or no p-value.
    """

    end: Integers
    lags: Integers
    statistic: Floats
    n_pairs: Integers
    n_effective: Floats
    p_value: Floats
    low: Floats
    high: Floats
    reason: list[list[str | None]]


def window_table(
    x: ArrayLike,
    y: ArrayLike,
    *,
    window: int,
    end: ArrayLike,
    min_pairs: ArrayLike,
    lags: ArrayLike = (0,),
    method: str = "spearman",
    min_effective: float = MIN_EFFECTIVE,
) -> WindowTable:
    """Return the rank correlations of the windows that end at the given rows.

    Parameters
    ----------
    x, y : array-like of float or int, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one.
    window : int
        Rows, 8 to 4096.
    end : array-like of int, shape (n_windows,)
        Rows at which windows end. Rows before the first count as missing.
    min_pairs : int or array-like of int, shape (n_windows,)
        Fewest complete pairs for a statistic, for all windows or each.
    lags : array-like of int
        Rows by which x leads y.
    method
        "spearman" or "kendall".
    min_effective : float
        Fewest effective pairs for a p-value, 4 or more.

    Raises
    ------
    ValueError
        As for :func:`rhovane.stats.window_scan`; an ``end`` outside the rows.
    """
    first, second = as_pair(x, y)
    length = checked_window(window)
    leads = checked_lags(list(np.atleast_1d(np.asarray(lags)).tolist()), length)
    chosen = checked_method(method)
    checked_min_effective(min_effective)
    ends = np.atleast_1d(np.asarray(end, dtype=np.int64))
    if len(ends) and (ends.min() < 0 or ends.max() >= len(first)):
        raise ValueError(
            f"end reaches from {ends.min()} to {ends.max()}; rows 0 to {len(first) - 1} are allowed."
        )
    fewest = np.broadcast_to(np.asarray(min_pairs, dtype=np.int64), ends.shape)
    if len(fewest) and (fewest.min() < 2 or fewest.max() > length):
        raise ValueError(
            f"min_pairs reaches from {fewest.min()} to {fewest.max()}; 2 to {length} is allowed."
        )
    if chosen == "kendall":
        return _scanned(first, second, length, ends, fewest, leads, min_effective)
    reach = length + int(np.abs(leads).max(initial=0))
    before = np.full(reach, -1, np.int32)
    ranks_x, ranks_y = (np.concatenate((before, dense_ranks(side)[0])) for side in (first, second))
    shape = (len(ends), len(leads))
    sums = np.zeros((*shape, 4), dtype=np.int64)
    n_x, n_y = int(ranks_x.max(initial=0)) + 1, int(ranks_y.max(initial=0)) + 1
    fill_lag_sums(ranks_x, ranks_y, n_x, n_y, ends + reach, length, leads, sums)
    n_pairs, xx, yy, xy = (sums[:, :, i] for i in range(4))
    code = np.select(
        [n_pairs < fewest[:, None], xx == 0, yy == 0], [TOO_FEW_PAIRS, CONSTANT_X, CONSTANT_Y], COMPUTED
    )
    computed = code == COMPUTED
    root = np.sqrt(np.maximum(xx, 1).astype(np.float64) * np.maximum(yy, 1))
    statistic = np.where(computed, np.clip(xy / root, -1.0, 1.0), np.nan)
    n_effective = np.full(shape, np.nan)
    low, high = np.full(shape, np.nan), np.full(shape, np.nan)
    for row in np.flatnonzero(computed.any(axis=1)).tolist():
        base = _base_lag(leads, n_pairs[row], computed[row])
        sides = _aligned(ranks_x, ranks_y, int(ends[row]) + reach, length, int(leads[base]))
        joint = joint_ranks(*sides)
        acf = autocorrelation(joint)
        factor = inflation(acf)
        n_effective[row, computed[row]] = effective_pairs(n_pairs[row, computed[row]], factor)
        if leads[base] == 0:
            bounds = rank_interval(joint, acf, factor)
            low[row, base], high[row, base] = bounds.low, bounds.high
    assessable = computed & (n_effective >= min_effective)
    p_value = np.full(shape, np.nan)
    p_value[assessable] = spearman_p_value(statistic[assessable], n_effective[assessable])
    reason: list[list[str | None]] = [[None] * len(leads) for _ in ends]
    for row, column in np.argwhere(~assessable).tolist():
        reason[row][column] = describe_reason(
            int(code[row, column]), int(n_pairs[row, column]), int(fewest[row])
        ) or too_little_reason(float(n_effective[row, column]), min_effective)
    return WindowTable(ends, leads, statistic, n_pairs, n_effective, p_value, low, high, reason)


def _base_lag(lags: Integers, n_pairs: Integers, computed: NDArray[np.bool_]) -> int:
    """The lag whose autocorrelations serve all: lag 0 where it is computed, else the one with most pairs."""
    usable = np.flatnonzero(computed)
    at_zero = usable[lags[usable] == 0]
    if len(at_zero):
        usable = at_zero
    order = np.lexsort((lags[usable], np.abs(lags[usable]), -n_pairs[usable]))
    return int(usable[order[0]])


def _aligned(x: Ranks, y: Ranks, end: int, window: int, lag: int) -> tuple[Ranks, Ranks]:
    """Both sides of the window that ends at row ``end``, side by side at a lag."""
    x_end, y_end = end + 1 - max(lag, 0), end + 1 - max(-lag, 0)
    return x[x_end - window : x_end], y[y_end - window : y_end]


@compiled
def fill_lag_sums(
    x: Ranks,
    y: Ranks,
    n_x: int,
    n_y: int,
    ends: Integers,
    window: int,
    lags: Integers,
    sums: NDArray[np.int64],
) -> None:
    """Fill, by window and lag, the number of pairs and the sums of x·x, y·y and x·y of centred midranks."""
    centred_x = np.empty(window, dtype=np.int16)
    centred_y = np.empty(window, dtype=np.int16)
    joint = np.empty(window, dtype=np.int16)
    for row in range(len(ends)):
        for column in range(len(lags)):
            lag = lags[column]
            x_end, y_end = ends[row] + 1 - max(lag, 0), ends[row] + 1 - max(-lag, 0)
            n, _, xx, yy, xy = centre_joint_ranks(
                x[x_end - window : x_end], y[y_end - window : y_end], n_x, n_y, centred_x, centred_y, joint
            )
            sums[row, column, 0] = n
            sums[row, column, 1] = xx
            sums[row, column, 2] = yy
            sums[row, column, 3] = xy


def _scanned(
    x: Floats,
    y: Floats,
    window: int,
    ends: Integers,
    fewest: NDArray[np.int64],
    lags: Integers,
    min_effective: float,
) -> WindowTable:
    """The same by one scan a window: for Kendall's tau-b."""
    scans: list[WindowScan] = [
        window_scan(
            x[: end + 1],
            y[: end + 1],
            window=window,
            lags=lags.tolist(),
            method="kendall",
            min_pairs=int(few),
            min_effective=min_effective,
        )
        for end, few in zip(ends.tolist(), fewest.tolist(), strict=True)
    ]

    def stacked(name: str) -> Floats:
        rows = [getattr(scan, name) for scan in scans]
        return np.array(rows, dtype=np.float64).reshape(len(ends), len(lags))

    at_zero = lags[None, :] == 0
    return WindowTable(
        ends,
        lags,
        stacked("statistic"),
        stacked("n_pairs").astype(np.int64),
        stacked("n_effective"),
        stacked("p_value"),
        np.where(at_zero, stacked("low"), np.nan),
        np.where(at_zero, stacked("high"), np.nan),
        [list(scan.reason) for scan in scans],
    )

"""Rank correlations of many pairs of one network: every window, every lag, with their significance."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rhovane.stats.arguments import (
    Floats,
    Integers,
    as_series,
    checked_lags,
    checked_method,
    checked_min_pairs,
    checked_step,
    checked_window,
    whole_number,
)
from rhovane.stats.compiled import available_threads, run_tasks
from rhovane.stats.correlation_table import CorrelationTable, table_tasks
from rhovane.stats.dependence import AUTOCORRELATION_SHARE, MIN_EFFECTIVE, SMALLEST_EFFECTIVE
from rhovane.stats.narrow import rows_in_32_bits
from rhovane.stats.network_significance import fill_inflation, fill_significance, series_autocorrelation
from rhovane.stats.rank_kernels import Ranks, dense_ranks
from rhovane.stats.rolling_reasons import describe_reason
from rhovane.stats.sliding_ranks import stretch_of

# Windows whose autocorrelations are held at a time: 29 kB a series at a window of 720, 26 MB for 150 series.
WINDOWS_AT_A_TIME = 128


@dataclass(frozen=True)
class CorrelationNetwork:
    """Rank correlations by pair, window and lag.

    Attributes
    ----------
    pairs : ndarray of int64, shape (n_pairs_of_series, 2)
        Columns of the two series of each pair.
    end : ndarray of int64, shape (n_windows,)
        Row at which each window ends.
    lags : ndarray of int64, shape (n_lags,)
        Rows by which the first of a pair leads.
    statistic : ndarray of float64, shape (n_pairs_of_series, n_windows, n_lags)
        Spearman's rho or Kendall's tau-b; NaN where not computable.
    n_pairs : ndarray of int32, same shape
        Rows with both values.
    reason_code : ndarray of int8, same shape
        0 computed, 1 too few pairs, 2 first constant, 3 second constant; in words from :meth:`reason`.
    inflation : ndarray of float64, shape (n_pairs_of_series, n_windows), or None
        Factor by which dependence inflates the variance; None unless significance was asked for.
    p_value : ndarray of float64, shape as ``statistic``, or None
        Two-sided, each correlation alone; NaN where not assessable (fewer than 10 effective pairs).
    method : str
    window, step, min_pairs : int
    """

    pairs: Integers
    end: Integers
    lags: Integers
    statistic: Floats
    n_pairs: NDArray[np.int32]
    reason_code: NDArray[np.int8]
    inflation: Floats | None
    p_value: Floats | None
    method: str
    window: int
    step: int
    min_pairs: int

    @property
    def n_effective(self) -> Floats | None:
        """Independent pairs worth the same information, shape as ``statistic``; None without significance."""
        if self.inflation is None:
            return None
        shared = self.n_pairs / self.inflation[:, :, None]
        effective: Floats = np.minimum(self.n_pairs, np.maximum(SMALLEST_EFFECTIVE, shared))
        return effective

    def reason(self, pair: int, row: int, column: int) -> str | None:
        """Why there is no statistic; None where there is one."""
        code, found = int(self.reason_code[pair, row, column]), int(self.n_pairs[pair, row, column])
        return describe_reason(code, found, self.min_pairs)


def correlate_network(
    values: ArrayLike,
    pairs: Iterable[Sequence[int]],
    *,
    window: int,
    step: int = 1,
    lags: Iterable[int] = (0,),
    min_pairs: int | None = None,
    method: str = "spearman",
    significance: bool = False,
    threads: int | None = None,
) -> CorrelationNetwork:
    """Return the rank correlations of many pairs of series in rolling windows, at each lag.

    Each number equals that of :func:`rolling_rank_correlation` for the same pair.

    Parameters
    ----------
    values : array-like of float or int, shape (n_rows, n_series)
        Observations on one regular grid; NaN marks a row without one.
    pairs : iterable of (int, int)
        Columns of the first and the second series of each pair.
    window, step, lags, min_pairs, method
        As for :func:`rolling_rank_correlation`.
    significance
        Whether to give each correlation its p-value (Spearman only).
    threads
        Threads to use; None takes the cores of this process. The result is the same for any number.

    Raises
    ------
    ValueError
        As for :func:`rolling_rank_correlation`; a pair that names no column; significance of Kendall's tau.

    Notes
    -----
    Effective sample sizes follow :func:`rank_correlation_test`, except that the autocorrelations are those of each
    series over its own observations, so that they are computed once a window and shared by all pairs and lags.
    """
    columns = np.asarray(values)
    if columns.ndim != 2 or columns.shape[1] == 0:
        raise ValueError(
            f"values has shape {columns.shape}; (rows, series) is allowed; give one column a series."
        )
    series = [as_series(columns[:, i], f"values[:, {i}]") for i in range(columns.shape[1])]
    n_rows = len(columns)
    length = checked_window(window, n_rows)
    stride = checked_step(step)
    leads = checked_lags(lags, n_rows)
    chosen = checked_method(method)
    fewest = checked_min_pairs(min_pairs, length)
    watched = _checked_pairs(pairs, len(series))
    if significance and chosen == "kendall":
        raise ValueError(
            'significance=True is for method="spearman"; use rank_correlation_test or window_scan for Kendall\'s tau.'
        )
    workers = available_threads() if threads is None else whole_number(threads, "threads")
    if workers < 1:
        raise ValueError(f"threads={workers} is out of range; choose 1 or more.")
    ranks = [dense_ranks(one)[0] for one in series]
    end = np.arange(length - 1, n_rows, stride, dtype=np.int64)
    shape = (len(watched), len(leads), len(end))
    statistic = np.full(shape, np.nan)
    n_pairs = np.zeros(shape, dtype=np.int32)
    code = np.zeros(shape, dtype=np.int8)
    parts = -(-workers // max(1, len(watched)))
    tasks: list[Callable[[], None]] = []
    for i, (first, second) in enumerate(watched):
        table = CorrelationTable(statistic[i], n_pairs[i], code[i])
        tasks += table_tasks(ranks[first], ranks[second], leads, length, stride, fewest, chosen, table, parts)
    run_tasks(tasks, workers)
    inflation, p_value = None, None
    if significance:
        inflation = _inflation(ranks, watched, length, stride, len(end), workers)
        p_value = np.full(shape, np.nan)
        run_tasks(
            [
                partial(fill_significance, statistic[i], n_pairs[i], inflation[i], MIN_EFFECTIVE, p_value[i])
                for i in range(len(watched))
            ],
            workers,
        )
        p_value = p_value.swapaxes(1, 2)
    return CorrelationNetwork(
        pairs=np.array(watched, dtype=np.int64).reshape(-1, 2),
        end=end,
        lags=leads,
        statistic=statistic.swapaxes(1, 2),
        n_pairs=n_pairs.swapaxes(1, 2),
        reason_code=code.swapaxes(1, 2),
        inflation=inflation,
        p_value=p_value,
        method=chosen,
        window=length,
        step=stride,
        min_pairs=fewest,
    )


def _checked_pairs(pairs: Iterable[Sequence[int]], n_series: int) -> list[tuple[int, int]]:
    watched = []
    for pair in pairs:
        members = tuple(whole_number(member, "a member of a pair") for member in pair)
        if (
            len(members) != 2
            or members[0] == members[1]
            or not all(0 <= member < n_series for member in members)
        ):
            raise ValueError(
                f"pair {tuple(pair)} is not two different columns; columns 0 to {n_series - 1} are allowed."
            )
        watched.append((members[0], members[1]))
    return watched


def _inflation(
    ranks: list[Ranks], pairs: list[tuple[int, int]], window: int, step: int, n_windows: int, workers: int
) -> Floats:
    """Return the variance inflation of every pair and window, some windows at a time."""
    inflation = np.full((len(pairs), n_windows), np.nan)
    n_lags = max(1, window // AUTOCORRELATION_SHARE)
    used = sorted({member for pair in pairs for member in pair})
    for first in range(0, n_windows, WINDOWS_AT_A_TIME):
        stop = min(first + WINDOWS_AT_A_TIME, n_windows)
        n_rows = window + (stop - 1 - first) * step
        acf = {i: np.empty((stop - first, n_lags)) for i in used}
        seen: dict[int, NDArray[np.int16]] = {}
        tasks: list[Callable[[], None]] = []
        for i in used:
            # One side of a stretch is a series behind one empty window.
            prepared = stretch_of(ranks[i], ranks[i], first * step, first * step, n_rows, window)
            seen[i] = prepared.seen[: prepared.room]
            tasks.append(
                partial(
                    series_autocorrelation,
                    prepared.ranks,
                    prepared.seen,
                    window,
                    step,
                    rows_in_32_bits(window),
                    acf[i],
                )
            )
        run_tasks(tasks, workers)
        run_tasks(
            [
                partial(
                    fill_inflation, seen[i], seen[j], acf[i], acf[j], window, step, inflation[k, first:stop]
                )
                for k, (i, j) in enumerate(pairs)
            ],
            workers,
        )
    return inflation

"""Dividing a table of windows and lags into tasks for the sliding kernels."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.arguments import Floats, Integers, Method
from rhovane.stats.compiled import available_threads, run_tasks
from rhovane.stats.narrow import rows_in_32_bits
from rhovane.stats.rank_kernels import Ranks, dense_ranks
from rhovane.stats.rolling_reasons import Codes
from rhovane.stats.sliding_ranks import slide_kendall, slide_spearman, stretch_of

# Rows of windows' ends handled from one start: long against the window, so that filling the first window
# costs little, and short enough for dense ranks of 16 bits and for the processor's cache.
STRETCH_ROWS = 8192
# Lags handled together share the base ranks of the windows between them; beyond this many rows, lags are
# grouped and the leading series is moved first.
LAG_REACH = 256


@dataclass(frozen=True)
class CorrelationTable:
    """Correlations by lag (first axis) and window (second axis): float64, int32 and int8."""

    statistic: Floats
    n_pairs: NDArray[np.int32]
    code: Codes


def empty_table(n_lags: int, n_windows: int) -> CorrelationTable:
    """Return a table to be filled."""
    shape = (n_lags, n_windows)
    return CorrelationTable(
        np.full(shape, np.nan), np.zeros(shape, dtype=np.int32), np.zeros(shape, dtype=np.int8)
    )


def correlation_table(
    x: Floats,
    y: Floats,
    lags: Integers,
    window: int,
    step: int,
    min_pairs: int,
    method: Method,
    threads: int | None = None,
    stretch_rows: int = STRETCH_ROWS,
) -> CorrelationTable:
    """Return the correlations of every lag and window; the same for any number of ``threads``."""
    table = empty_table(len(lags), (len(x) - window) // step + 1)
    workers = available_threads() if threads is None else threads
    ranks_x, _ = dense_ranks(x)
    ranks_y, _ = dense_ranks(y)
    tasks = table_tasks(ranks_x, ranks_y, lags, window, step, min_pairs, method, table, workers, stretch_rows)
    run_tasks(list(tasks), workers)
    return table


def table_tasks(
    x: Ranks,
    y: Ranks,
    lags: Integers,
    window: int,
    step: int,
    min_pairs: int,
    method: Method,
    table: CorrelationTable,
    parts: int,
    stretch_rows: int = STRETCH_ROWS,
) -> Iterator[Callable[[], None]]:
    """Yield calls that together fill ``table``, at least ``parts`` of them where that is possible."""
    n_windows = table.statistic.shape[1]
    groups = list(lag_groups(lags))
    per_stretch = max(1, stretch_rows // step)
    # Fewer stretches than threads: share them out evenly instead, if each stays long against the window.
    even = -(-n_windows // max(1, -(-parts // len(groups))))
    if even * step >= 2 * window:
        per_stretch = min(per_stretch, even)
    stretches = [(start, min(start + per_stretch, n_windows)) for start in range(0, n_windows, per_stretch)]
    if len(groups) * len(stretches) < parts:
        groups = [
            (moved, columns[part::parts])
            for moved, columns in groups
            for part in range(min(parts, len(columns)))
        ]
    for moved, columns in groups:
        for first, stop in stretches:
            yield partial(
                _fill, x, y, lags, moved, columns, (first, stop), window, step, min_pairs, method, table
            )


def lag_groups(lags: Integers) -> Iterator[tuple[int, list[int]]]:
    """Yield lags that are handled together: the lag to move the leading series by, and their places in ``lags``."""
    groups: dict[int, list[int]] = {}
    for column, lag in enumerate(lags.tolist()):
        whole = abs(lag) // (LAG_REACH + 1) * (LAG_REACH + 1)
        groups.setdefault(whole if lag >= 0 else -whole, []).append(column)
    yield from groups.items()


def _fill(
    x: Ranks,
    y: Ranks,
    lags: Integers,
    moved: int,
    columns: list[int],
    windows: tuple[int, int],
    window: int,
    step: int,
    min_pairs: int,
    method: Method,
    table: CorrelationTable,
) -> None:
    """Fill some lags (``columns``) of the windows from ``windows[0]`` to before ``windows[1]``."""
    near = lags[columns] - moved
    reach = int(np.abs(near).max())
    first, stop = windows
    stop_row = window + (stop - 1) * step
    start_row = first * step - reach
    pair = stretch_of(
        x,
        y,
        start_row - max(moved, 0),
        start_row - max(-moved, 0),
        stop_row - start_row,
        window,
    )
    found = empty_table(len(columns), stop - first)
    if method == "spearman":
        slide_spearman(
            pair.ranks,
            pair.seen,
            pair.missing,
            pair.missing_before,
            pair.room,
            near,
            window,
            step,
            min_pairs,
            rows_in_32_bits(window),
            found.statistic,
            found.n_pairs,
            found.code,
        )
    else:
        slide_kendall(
            pair.ranks,
            pair.seen,
            pair.room,
            near,
            window,
            step,
            min_pairs,
            found.statistic,
            found.n_pairs,
            found.code,
        )
    table.statistic[columns, first:stop] = found.statistic
    table.n_pairs[columns, first:stop] = found.n_pairs
    table.code[columns, first:stop] = found.code

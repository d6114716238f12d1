"""Step "windows": rolling-window rank correlations that are not up to date, with significance, lag by lag."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.pipeline.arrays import PairArrays
from rhovane.pipeline.context import HOUR_S, OUT_OF_TIME, PART_ERRORS, Night, WatchedPair, reason_of
from rhovane.prepare import Grid
from rhovane.settings import CorrelationSettings
from rhovane.stats.pair_windows import WindowTable, window_table
from rhovane.stats.partial import partial_window

STEP = "windows"
ROWS_AT_ONCE = 100_000  # correlations that are written together: some 50 MB on their way to the store
FEWEST_PAIRS = 24  # hours; below one day's worth a window of a masked pair is not computed


def compute_windows(night: Night) -> str:
    """Windows that end with each stale day, for every pair and lag."""
    stale = [w for w in night.watched if w.windows_from is not None]
    if not stale:
        return "nothing to compute"
    grid = night.grid()
    parts: list[dict[str, NDArray[Any]]] = []
    n_pairs = n_correlations = waiting = 0
    for watched in stale:
        if not night.may_go_on():
            night.pair_failed(STEP, watched, OUT_OF_TIME)
            continue
        try:
            parts.append(pair_windows(night, watched, grid))
        except PART_ERRORS as error:
            night.pair_failed(STEP, watched, reason_of(error))
            continue
        n_pairs += 1
        waiting += len(parts[-1]["lag"])
        n_correlations += len(parts[-1]["lag"])
        if waiting >= ROWS_AT_ONCE:
            _write(night, parts)
            parts, waiting = [], 0
    if parts:
        _write(night, parts)
    return f"{n_correlations} correlations in {n_pairs} pairs"


def _write(night: Night, parts: list[dict[str, NDArray[Any]]]) -> None:
    night.store.write_windows(
        night.id, {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}
    )


def leave_windows(night: Night) -> str:
    """Leave the stale windows to a later night of a walk, which finds in the ledger since when they are stale."""
    left = {w.pair.key: w.windows_from.isoformat() for w in night.watched if w.windows_from is not None}
    night.counts["windows left"] = left
    return f"left to a later night of the walk, in {len(left)} pairs"


def pair_windows(night: Night, watched: WatchedPair, grid: Grid) -> dict[str, NDArray[Any]]:
    """The correlations of one pair in the windows that end with its stale days, as columns for the store.

    ``coverage`` is the number of joint observations over the hours that the recipe keeps in the window; a
    window is computed when it reaches ``min_coverage`` of them and at least a day's worth.
    """
    assert watched.windows_from is not None
    correlation = night.settings.correlation
    arrays = night.arrays(watched)
    window = correlation.window_hours
    n_days = (night.as_of - watched.windows_from).days + 1
    end = grid.row_of(night.days.last_hour_of(watched.windows_from)) + 24 * np.arange(n_days)
    kept_before = np.concatenate(([0], np.cumsum(arrays.mask.kept)))
    kept = kept_before[end + 1] - kept_before[np.maximum(end + 1 - window, 0)]
    min_pairs = np.clip(np.ceil(correlation.min_coverage * kept).astype(np.int64), FEWEST_PAIRS, window)
    lags = np.array(night.settings.lags_of(watched.recipe))
    needed = slice(max(0, int(end[0]) + 1 - window - int(np.abs(lags).max())), int(end[-1]) + 1)
    table = _table(arrays.rows(needed), window, end - needed.start, min_pairs, lags, correlation)
    n_lags = len(lags)
    with np.errstate(invalid="ignore", divide="ignore"):
        coverage = np.where(kept[:, None] > 0, table.n_pairs / kept[:, None], 0.0)
    columns = {
        "pair_key": np.full(n_days * n_lags, watched.pair.key, dtype=object),
        "window_end": np.repeat(grid.start + HOUR_S * end, n_lags),
        "lag": np.tile(lags, n_days),
        "coverage": coverage.ravel(),
        "reason": np.array([reason for row in table.reason for reason in row], dtype=object),
    }
    numbers = ("statistic", "n_pairs", "n_effective", "p_value", "low", "high")
    return columns | {name: getattr(table, name).ravel() for name in numbers}


def _table(
    arrays: PairArrays,
    window: int,
    end: NDArray[np.int64],
    min_pairs: NDArray[np.int64],
    lags: NDArray[np.int64],
    correlation: CorrelationSettings,
) -> WindowTable:
    """The pair's windows: plain, or with its controls taken out (then one scan a window)."""
    if arrays.controls is None:
        return window_table(
            arrays.x,
            arrays.y,
            window=window,
            end=end,
            min_pairs=min_pairs,
            lags=lags,
            method=correlation.statistic,
            min_effective=correlation.min_effective,
        )
    scans = [
        partial_window(
            arrays.x[: last + 1],
            arrays.y[: last + 1],
            arrays.controls[: last + 1],
            window=window,
            lags=lags.tolist(),
            min_pairs=int(fewest),
            min_effective=correlation.min_effective,
        )
        for last, fewest in zip(end.tolist(), min_pairs.tolist(), strict=True)
    ]
    names = ("statistic", "n_pairs", "n_effective", "p_value", "low", "high")
    stacked = {name: np.stack([getattr(scan, name) for scan in scans]) for name in names}
    return WindowTable(end=end, lags=lags, reason=[list(scan.reason) for scan in scans], **stacked)

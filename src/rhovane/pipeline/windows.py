"""Step "windows": rolling-window rank correlations that are not up to date, with significance, lag by lag."""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.pipeline.arrays import PairArrays
from rhovane.pipeline.context import HOUR_S, OUT_OF_TIME, PART_ERRORS, Night, WatchedPair, reason_of
from rhovane.pipeline.noting import split_in
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
        night.windows.append(_at_lag_0(parts[-1]))
        waiting += len(parts[-1]["lag"])
        n_correlations += len(parts[-1]["lag"])
        if waiting >= ROWS_AT_ONCE:
            _write(night, parts)
            parts, waiting = [], 0
    if parts:
        _write(night, parts)
    return f"{n_correlations} correlations in {n_pairs} pairs"


def _at_lag_0(columns: dict[str, NDArray[Any]]) -> dict[str, NDArray[Any]]:
    """What the notes about pairs ask of a pair's correlations."""
    rows = columns["lag"] == 0
    return {name: columns[name][rows] for name in ("pair_key", "lag", "window_end", "statistic", "reason")}


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
    reach = window + int(np.abs(lags).max())
    parts = []
    for some, cuts in _split(night, watched, grid, end, reach):
        needed = slice(max(0, int(end[some][0]) + 1 - reach), int(end[some][-1]) + 1)
        side = after_cuts(arrays, watched, {key: grid.row_of(second) for key, second in cuts.items()})
        part = _table(side.rows(needed), window, end[some] - needed.start, min_pairs[some], lags, correlation)
        parts.append(_told_of_split(part, cuts, night))
    table = _joined(parts)
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


def _split(
    night: Night, watched: WatchedPair, grid: Grid, end: NDArray[np.int64], reach: int
) -> list[tuple[slice, dict[str, int]]]:
    """The windows in stretches whose series are split at the same hours, with those hours by series."""
    if not any(key in night.cuts for key in night.settings.series_of(watched.recipe)):
        return [(slice(0, len(end)), {})]
    found: list[tuple[slice, dict[str, int]]] = []
    for i, row in enumerate(end.tolist()):
        cuts = split_in(night, watched, grid.start + HOUR_S * row, reach)
        if found and found[-1][1] == cuts:
            found[-1] = (slice(found[-1][0].start, i + 1), cuts)
        else:
            found.append((slice(i, i + 1), cuts))
    return found


def after_cuts(arrays: PairArrays, watched: WatchedPair, cut_row: dict[str, int]) -> PairArrays:
    """A pair without the observations of a series before its cut, which are in another unit or on another zero."""
    if not cut_row:
        return arrays

    def later(values: NDArray[np.float64], key: str) -> NDArray[np.float64]:
        return np.where(np.arange(len(values)) >= cut_row.get(key, 0), values, np.nan)

    recipe, controls = watched.recipe, arrays.controls
    if controls is not None:
        columns = [later(controls[:, i], key) for i, key in enumerate(recipe.adjusted_for)]
        controls = np.column_stack(columns)
    return PairArrays(later(arrays.x, recipe.first), later(arrays.y, recipe.second), controls, arrays.mask)


def _told_of_split(table: WindowTable, cuts: dict[str, int], night: Night) -> WindowTable:
    """The table with the split named in the reason of every correlation that it left without enough pairs."""
    if not cuts:
        return table
    days = ", ".join(f"{key} at {night.days.day_of(second)}" for key, second in sorted(cuts.items()))
    reason = [[text and f"{text}; split: {days}" for text in row] for row in table.reason]
    return dataclasses.replace(table, reason=reason)


def _joined(parts: list[WindowTable]) -> WindowTable:
    """The windows of several tables, one after the other."""
    if len(parts) == 1:
        return parts[0]
    names = ("statistic", "n_pairs", "n_effective", "p_value", "low", "high", "end")
    stacked = {name: np.concatenate([getattr(part, name) for part in parts]) for name in names}
    return WindowTable(lags=parts[0].lags, reason=[row for part in parts for row in part.reason], **stacked)


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

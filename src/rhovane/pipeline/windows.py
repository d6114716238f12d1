"""Step "windows": rolling-window rank correlations that are not up to date, with significance, lag by lag."""

from __future__ import annotations

import datetime as dt
import math
from collections import defaultdict
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane import stats
from rhovane.pipeline.arrays import PairArrays, load_grid, pair_arrays
from rhovane.pipeline.context import HOUR_S, Night, WatchedPair
from rhovane.prepare import Grid
from rhovane.settings import CorrelationSettings

STEP = "windows"
DAY = dt.timedelta(days=1)
FEWEST_PAIRS = 24  # hours; below one day's worth a window of a masked pair is not computed


def compute_windows(night: Night) -> str:
    """Windows that end with each stale day, for every pair and lag."""
    settings = night.settings
    stale = [w for w in night.watched if w.stale_from is not None]
    if not stale:
        return "nothing to compute"
    reach = settings.correlation.window_hours + max(
        max(abs(lag) for lag in settings.lags_of(w.recipe)) for w in stale
    )
    first = min(w.stale_from for w in stale if w.stale_from) - (reach // 24 + 1) * DAY
    keys = {k for w in stale for k in settings.series_of(w.recipe)}
    grid = load_grid(settings, night.store, keys, first, night.as_of)
    columns: dict[str, list[Any]] = defaultdict(list)
    for watched in stale:
        try:
            arrays = pair_arrays(settings, watched.recipe, grid)
            _pair_windows(night, watched, grid, arrays, columns)
        except ValueError as error:
            night.pair_failed(STEP, watched, str(error))
    n_rows = len(columns["pair_key"])
    if n_rows:
        night.store.write_windows(night.id, _as_arrays(columns))
    return f"{n_rows} correlations in {len(stale)} pairs"


def _pair_windows(
    night: Night,
    watched: WatchedPair,
    grid: Grid,
    arrays: PairArrays,
    columns: dict[str, list[Any]],
) -> None:
    assert watched.stale_from is not None
    correlation = night.settings.correlation
    day = watched.stale_from
    while day <= night.as_of:
        last = grid.row_of(night.days.last_hour_of(day))
        lags = tuple(night.settings.lags_of(watched.recipe))
        rows = window_rows(arrays, last, lags=lags, correlation=correlation)
        end = grid.start + HOUR_S * last
        for row in rows:
            columns["pair_key"].append(watched.pair.key)
            columns["window_end"].append(end)
            for name, value in row.items():
                columns[name].append(value)
        day += DAY


def window_rows(
    arrays: PairArrays, last: int, *, lags: tuple[int, ...], correlation: CorrelationSettings
) -> list[dict[str, Any]]:
    """The correlation in the window that ends with row ``last``, at every lag, as rows for the store.

    ``coverage`` is the number of joint observations over the hours that the recipe keeps in the window;
    a window is computed when it reaches ``min_coverage`` of them and at least a day's worth.
    """
    window = correlation.window_hours
    reach = max(abs(lag) for lag in lags)
    begin = max(0, last + 1 - window - reach)
    x, y = arrays.x[begin : last + 1], arrays.y[begin : last + 1]
    kept = int(np.count_nonzero(arrays.mask.kept[max(0, last + 1 - window) : last + 1]))
    min_pairs = min(window, max(FEWEST_PAIRS, math.ceil(correlation.min_coverage * kept)))
    fewest = correlation.min_effective
    if arrays.controls is not None:
        scan = stats.partial_window(
            x, y, arrays.controls[begin : last + 1], window=window, lags=lags, min_pairs=min_pairs, min_effective=fewest
        )
    else:
        scan = stats.window_scan(
            x, y, window=window, lags=lags, method=correlation.statistic, min_pairs=min_pairs, min_effective=fewest
        )
    return [
        {
            "lag": int(lag),
            "statistic": scan.statistic[i],
            "n_pairs": int(scan.n_pairs[i]),
            "coverage": scan.n_pairs[i] / kept if kept else 0.0,
            "n_effective": scan.n_effective[i],
            "p_value": scan.p_value[i],
            "low": scan.low[i],
            "high": scan.high[i],
            "reason": scan.reason[i],
        }
        for i, lag in enumerate(scan.lags)
    ]


def _as_arrays(columns: dict[str, list[Any]]) -> dict[str, NDArray[Any]]:
    text = {"pair_key", "reason"}
    whole = {"window_end", "lag", "n_pairs"}
    return {
        name: np.array(
            values, dtype=object if name in text else np.int64 if name in whole else np.float64
        )
        for name, values in columns.items()
    }

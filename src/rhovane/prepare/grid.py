"""Readings scattered onto a regular hourly grid: one row an hour, one column a series."""

from __future__ import annotations

from collections.abc import Collection, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.model import Series

HOUR_S = 3600
HOURLY_CAPTURE = 0.75  # share of an hour that must have observations: 45 valid minutes (2008/50/EC, annex XI)


@dataclass(frozen=True)
class Grid:
    """Observations on a common hourly grid.

    ``values`` has shape (n_hours, n_series), float64, NaN where there is no observation; row ``i`` is the
    hour that begins ``start + 3600 i`` seconds after 1970-01-01 UTC.
    """

    start: int
    keys: tuple[str, ...]
    values: NDArray[np.float64]

    @property
    def n_hours(self) -> int:
        """Number of rows."""
        return int(self.values.shape[0])

    @property
    def hour_start(self) -> NDArray[np.int64]:
        """Start of every hour, seconds since 1970-01-01 UTC."""
        return self.start + HOUR_S * np.arange(self.n_hours, dtype=np.int64)

    def column(self, key: str) -> NDArray[np.float64]:
        """Observations of one series, shape (n_hours,)."""
        return self.values[:, self.keys.index(key)]

    def of(self, keys: Sequence[str]) -> Grid:
        """The same hours of some of the series."""
        if tuple(keys) == self.keys:
            return self
        return Grid(self.start, tuple(keys), self.values[:, [self.keys.index(key) for key in keys]])

    def row_of(self, second: int) -> int:
        """Row of the hour that begins at a second since 1970 UTC (may lie outside the grid)."""
        return (second - self.start) // HOUR_S


def to_grid(
    series: Sequence[Series],
    start: int,
    end: int,
    *,
    position: NDArray[np.integer],
    second: NDArray[np.integer],
    value: NDArray[np.floating],
    flag: NDArray[np.integer],
    accepted_flags: Collection[int],
) -> Grid:
    """Scatter readings onto the hours from ``start`` (included) to ``end`` (excluded).

    Parameters
    ----------
    series : sequence of Series
        ``position`` counts in it.
    start, end : int
        Seconds since 1970-01-01 UTC, whole hours of the network's day.
    position, second, value, flag : ndarray, shape (n_readings,)
        Readings: series, interval start in seconds, value (NaN missing) and quality flag. At most one
        reading a series and interval.
    accepted_flags : collection of int
        Flags of the readings that count as observations.

    Notes
    -----
    A series with a step below an hour is brought to hours: its mean (circular: direction of the mean unit
    vector; accumulated: mean times the number of steps, so that a lost tenth does not make a dry hour),
    where at least 75 % of the hour's readings are observations; otherwise the hour has none.
    """
    n_hours = (end - start) // HOUR_S
    values = np.full((n_hours, len(series)), np.nan)
    row = (second.astype(np.int64) - start) // HOUR_S
    counts = np.isin(flag, sorted(accepted_flags)) & np.isfinite(value) & (row >= 0) & (row < n_hours)
    row, position, value = row[counts], position[counts], value[counts]
    finer = np.array([s.step_minutes < 60 for s in series], dtype=bool)
    if not finer.any():
        values[row, position] = value
        return Grid(start, tuple(s.key for s in series), values)
    whole = ~finer[position]
    values[row[whole], position[whole]] = value[whole]
    for i in np.flatnonzero(finer):
        mine = position == i
        values[:, i] = _hourly(series[i], row[mine], value[mine], n_hours)
    return Grid(start, tuple(s.key for s in series), values)


def _hourly(
    series: Series, row: NDArray[np.int64], value: NDArray[np.floating], n_hours: int
) -> NDArray[np.float64]:
    """Hourly values of one series with several steps an hour."""
    steps = 60 // series.step_minutes
    count = np.bincount(row, minlength=n_hours)

    def mean(of: NDArray[np.floating]) -> NDArray[np.float64]:
        return np.bincount(row, of, minlength=n_hours) / np.maximum(count, 1)

    if series.kind == "circular":
        east, north = mean(np.sin(np.radians(value))), mean(np.cos(np.radians(value)))
        hourly = np.mod(np.degrees(np.arctan2(east, north)), 360.0)
        hourly[hourly == 360.0] = 0.0  # a direction just west of north, rounded
    elif series.kind == "accumulated":
        hourly = mean(value) * steps
    else:
        hourly = mean(value)
    return np.where(count >= HOURLY_CAPTURE * steps, hourly, np.nan)

"""Which hours a pair's recipe keeps: wind sector, hours of the day, working days, wet hours."""

from __future__ import annotations

import datetime as dt
from collections.abc import Set as AbstractSet
from dataclasses import dataclass
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from rhovane.prepare.grid import HOUR_S, Grid
from rhovane.settings import PairSettings, SectorMask


@dataclass(frozen=True)
class PairMask:
    """Hours a recipe keeps, and hours for which that cannot be told.

    ``kept`` and ``unknown`` are bool, shape (n_hours,). An hour without wind direction is unknown to a
    sector mask: it is neither kept nor counted against the pair's coverage.
    """

    kept: NDArray[np.bool_]
    unknown: NDArray[np.bool_]

    @property
    def everything(self) -> bool:
        """Whether every hour is kept."""
        return bool(self.kept.all())


def kept_hours(
    pair: PairSettings, grid: Grid, *, civil_zone: str, other_days: AbstractSet[dt.date]
) -> PairMask:
    """The hours of the grid that a pair's recipe keeps.

    Hours of the day and working days are those of the civil clock; working days are Monday to Friday
    without ``other_days``.
    """
    kept = np.ones(grid.n_hours, dtype=bool)
    unknown = np.zeros(grid.n_hours, dtype=bool)
    if pair.hours is not None or pair.working_days_only:
        hour, working = civil_calendar(grid.hour_start, civil_zone, other_days)
        if pair.hours is not None:
            kept &= (hour >= pair.hours[0]) & (hour < pair.hours[1])
        if pair.working_days_only:
            kept &= working
    if pair.sector is not None:
        inside, no_direction = in_sector(grid.column(pair.sector.direction), pair.sector)
        unknown |= kept & no_direction
        kept &= inside
    if pair.wet_only:
        x, y = grid.column(pair.first), grid.column(pair.second)
        kept &= (x > 0) | (y > 0)
    return PairMask(kept, unknown)


def in_sector(
    direction_deg: NDArray[np.float64], sector: SectorMask
) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Hours with the wind from a sector, clockwise and both edges included; and hours without direction."""
    missing = ~np.isfinite(direction_deg)
    turned = np.mod(np.where(missing, 0.0, direction_deg) - sector.from_deg, 360.0)
    whole_circle = sector.to_deg - sector.from_deg == 360.0
    width = 360.0 if whole_circle else np.mod(sector.to_deg - sector.from_deg, 360.0)
    return ~missing & (turned <= width), missing


def civil_calendar(
    hour_start: NDArray[np.int64], civil_zone: str, other_days: AbstractSet[dt.date]
) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Hour of the civil day (0–23) and whether it is a working day, for each hour.

    The offset of a zone is looked up once a UTC hour-of-change candidate: zones change on whole hours, so
    each hour has one offset.
    """
    if len(hour_start) == 0:
        return np.empty(0, dtype=np.int64), np.empty(0, dtype=bool)
    local = hour_start + offsets_s(hour_start, civil_zone)
    day = local // 86_400
    weekday = (day + 3) % 7  # 1970-01-01 was a Thursday
    epoch = dt.date(1970, 1, 1)
    other = np.array([(d - epoch).days for d in sorted(other_days)], dtype=np.int64)
    return (local // HOUR_S) % 24, (weekday < 5) & ~np.isin(day, other)


def offsets_s(hour_start: NDArray[np.int64], zone: str) -> NDArray[np.int64]:
    """Civil time minus UTC in seconds at each hour.

    Looks a zone up once a UTC day and again hour by hour only on days whose ends differ.
    """
    tz = ZoneInfo(zone)

    def offset(second: int) -> int:
        delta = dt.datetime.fromtimestamp(second, tz).utcoffset()
        return 0 if delta is None else int(delta.total_seconds())

    first_day, last_day = int(hour_start[0]) // 86_400, int(hour_start[-1]) // 86_400
    at_midnight = [offset(day * 86_400) for day in range(first_day, last_day + 2)]
    day = hour_start // 86_400 - first_day
    found = np.array(at_midnight, dtype=np.int64)[day]
    for i in range(last_day - first_day + 1):
        if at_midnight[i] != at_midnight[i + 1]:
            for row in np.flatnonzero(day == i):
                found[row] = offset(int(hour_start[row]))
    return found

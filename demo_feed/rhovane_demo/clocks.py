"""The three clocks of the Ostrel Basin: UTC, standard time (UTC+01:00) and the civil clock."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

FIRST_DAY = date(2024, 7, 1)
LAST_DAY = date(2025, 12, 31)
STANDARD_OFFSET_HOURS = 1
CIVIL_ZONE = "CET"  # an offset rule: UTC+01:00, daylight saving from the last Sundays of March and October

# Days on which people live as on a Sunday, first and last, civil clock.
OTHER_DAYS = (
    (date(2024, 12, 23), date(2025, 1, 1)),
    (date(2025, 4, 18), date(2025, 4, 21)),
    (date(2025, 5, 1), date(2025, 5, 1)),
    (date(2025, 12, 23), date(2026, 1, 1)),
)

Hours = NDArray[np.datetime64]


def all_days() -> list[date]:
    """Every day from the first to the last, 549 dates."""
    return [FIRST_DAY + timedelta(days=i) for i in range((LAST_DAY - FIRST_DAY).days + 1)]


def utc_hours() -> Hours:
    """Start of every hour of the demo period in UTC, datetime64[s], shape (13176,)."""
    first = np.datetime64(FIRST_DAY, "s")
    end = np.datetime64(LAST_DAY + timedelta(days=1), "s")
    return np.arange(first, end, np.timedelta64(3600, "s"))


def standard_time(hour_start: Hours) -> Hours:
    """The same instants on the network's standard time, as naive datetime64[s]."""
    return hour_start + np.timedelta64(STANDARD_OFFSET_HOURS, "h")


def civil_time(hour_start: Hours) -> Hours:
    """The same instants on the civil clock, as naive datetime64[s]; one hour a year is skipped, one repeats."""
    zone = ZoneInfo(CIVIL_ZONE)
    seconds = hour_start.astype("datetime64[s]").astype(np.int64)
    offset = [datetime.fromtimestamp(int(s), UTC).astimezone(zone).utcoffset() for s in seconds]
    shift = np.array([o.total_seconds() for o in offset if o is not None], dtype=np.int64)
    return hour_start + shift.astype("timedelta64[s]")


def hour_of_day(clock: Hours) -> NDArray[np.int64]:
    """Hour 0 to 23 of each instant of a naive clock."""
    return (clock - clock.astype("datetime64[D]")).astype("timedelta64[h]").astype(np.int64)


def day_of_year(clock: Hours) -> NDArray[np.int64]:
    """Day 1 to 366 of each instant of a naive clock."""
    return (clock.astype("datetime64[D]") - clock.astype("datetime64[Y]").astype("datetime64[D]")).astype(
        np.int64
    ) + 1


def is_free_day(civil: Hours) -> NDArray[np.bool_]:
    """Whether each civil instant falls on a Saturday, a Sunday or another day off."""
    day = civil.astype("datetime64[D]")
    free = ~np.is_busday(day)
    for first, last in OTHER_DAYS:
        free |= (day >= np.datetime64(first, "D")) & (day <= np.datetime64(last, "D"))
    return free


def between(hour_start: Hours, first: date, last: date) -> NDArray[np.bool_]:
    """Whether each UTC hour lies in the days ``first`` to ``last``, both included, of standard time."""
    day = standard_time(hour_start).astype("datetime64[D]")
    return (day >= np.datetime64(first, "D")) & (day <= np.datetime64(last, "D"))

"""Hours whose readings do not enter statistics: maintenance of the calendar, and what the site log says."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from rhovane.model import SiteLogEntry
from rhovane.prepare.masks import offsets_s
from rhovane.settings import CalendarEntry

EPOCH = dt.date(1970, 1, 1)
DAY = dt.timedelta(days=1)


def hours_not_used(
    series_key: str,
    hour_start: NDArray[np.int64],
    *,
    maintenance: Sequence[CalendarEntry],
    site_log: Sequence[SiteLogEntry],
    civil_zone: str,
) -> NDArray[np.bool_]:
    """Hours of a series whose readings do not enter statistics, shape (n_hours,).

    Parameters
    ----------
    hour_start : ndarray of int64, shape (n_hours,)
        Consecutive hours, seconds since 1970-01-01 UTC.
    maintenance : sequence of CalendarEntry
        Entries whose hours are counted on the civil clock.
    site_log : sequence of SiteLogEntry
        Entries whose hours are those that they touch, if only in part.
    """
    out = np.zeros(len(hour_start), dtype=bool)
    if not len(hour_start):
        return out
    mine = [e for e in maintenance if e.concerns(series_key)]
    if mine:
        local = hour_start + offsets_s(hour_start, civil_zone)
        day, hour = local // 86_400, (local // 3600) % 24
        first, last = (EPOCH + int(edge) * DAY for edge in (day[0], day[-1]))
        for entry in mine:
            days = [(d - EPOCH).days for d in entry.dates(first, last)]
            out |= np.isin(day, days) & (hour >= entry.hours[0]) & (hour < entry.hours[1])
    for one in site_log:
        if one.concerns(series_key):
            inside = hour_start + 3600 > one.start.timestamp()
            if one.end is not None:
                inside &= hour_start < one.end.timestamp()
            out |= inside
    return out

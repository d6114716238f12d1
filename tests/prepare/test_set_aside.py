"""Hours whose readings are not used: maintenance on the civil clock, site log entries to the hour they touch."""

from __future__ import annotations

import datetime as dt

import numpy as np

from rhovane.model import SiteLogEntry
from rhovane.prepare import hours_not_used
from rhovane.settings import CalendarEntry


def hours_from(first: dt.datetime, n: int) -> np.ndarray:
    return int(first.timestamp()) + 3600 * np.arange(n, dtype=np.int64)


def utc(*parts: int) -> dt.datetime:
    return dt.datetime(*parts, tzinfo=dt.UTC)


def test_weekly_maintenance_keeps_its_civil_hours_across_the_change_of_clocks():
    weekly = CalendarEntry(
        title="span check",
        kind="maintenance",
        first=dt.date(2025, 3, 25),
        rule="FREQ=WEEKLY",
        hours=(9, 11),
        series=("A.NO2",),
    )
    start = utc(2025, 3, 24)
    out = hours_not_used(
        "A.NO2", hours_from(start, 24 * 16), maintenance=[weekly], site_log=[], civil_zone="CET"
    )
    found = [start + dt.timedelta(hours=int(h)) for h in np.flatnonzero(out)]
    # 9 o'clock is 8 UTC in winter, 7 UTC after the last Sunday of March
    assert found == [
        utc(2025, 3, 25, 8),
        utc(2025, 3, 25, 9),
        utc(2025, 4, 1, 7),
        utc(2025, 4, 1, 8),
        utc(2025, 4, 8, 7),
        utc(2025, 4, 8, 8),
    ]
    other = hours_not_used(
        "B.NO2", hours_from(start, 24 * 16), maintenance=[weekly], site_log=[], civil_zone="CET"
    )
    assert not other.any()


def test_a_site_log_entry_takes_every_hour_that_it_touches_and_one_without_end_all_that_follow():
    visit = SiteLogEntry("A", utc(2025, 1, 1, 9, 30), utc(2025, 1, 1, 11), "visit")
    going_on = SiteLogEntry("*", utc(2025, 1, 2), None, "logger")
    hours = hours_from(utc(2025, 1, 1), 48)
    one = hours_not_used("A.NO2", hours, maintenance=[], site_log=[visit], civil_zone="UTC")
    assert np.flatnonzero(one).tolist() == [9, 10]
    both = hours_not_used("B.NO2", hours, maintenance=[], site_log=[visit, going_on], civil_zone="UTC")
    assert np.flatnonzero(both).tolist() == list(range(24, 48))
    assert hours_not_used("A.NO2", hours[:0], maintenance=[], site_log=[visit], civil_zone="UTC").size == 0

"""Days of standard time: 24 hours each, whatever the civil clock does."""

import datetime as dt

import pytest

from rhovane.prepare import days_of

DAYS = days_of(dt.timedelta(hours=1))


def test_a_day_begins_at_midnight_of_standard_time():
    start = dt.datetime.fromtimestamp(DAYS.start_of(dt.date(2025, 2, 10)), dt.UTC)
    assert start == dt.datetime(2025, 2, 9, 23, tzinfo=dt.UTC)


@pytest.mark.parametrize(
    "day", [dt.date(2025, 3, 30), dt.date(2025, 10, 26), dt.date(2024, 2, 29), dt.date(2024, 12, 31)]
)
def test_every_day_has_24_hours_also_when_the_civil_clock_changes(day: dt.date):
    assert DAYS.end_of(day) - DAYS.start_of(day) == 24 * 3600
    assert DAYS.end_of(day) == DAYS.start_of(day + dt.timedelta(days=1))
    assert {DAYS.day_of(DAYS.start_of(day) + 3600 * h) for h in range(24)} == {day}
    assert DAYS.day_of(DAYS.last_hour_of(day) + 3600) == day + dt.timedelta(days=1)


def test_the_last_complete_day_has_ended_on_the_standard_clock():
    just_before = dt.datetime(2025, 2, 10, 22, 59, 59, tzinfo=dt.UTC)
    assert DAYS.last_complete(just_before) == dt.date(2025, 2, 9)
    assert DAYS.last_complete(just_before + dt.timedelta(seconds=1)) == dt.date(2025, 2, 10)


def test_days_before_1970_and_negative_offsets_count_downwards():
    west = days_of(dt.timedelta(hours=-5, minutes=-30))
    day = dt.date(1969, 12, 31)
    assert west.day_of(west.start_of(day)) == day
    assert west.day_of(west.start_of(day) - 1) == dt.date(1969, 12, 30)

"""Which nights are due: none twice, none left out, whatever the clock does."""

from __future__ import annotations

import datetime as dt
import tomllib
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from flow.small_network import SETTINGS
from rhovane.schedule import due_nights
from rhovane.schedule.clock import Look, movement
from rhovane.settings import Settings, settings_from
from schedule.invented_clock import InventedClock

DAY, HOUR, MINUTE = dt.timedelta(days=1), dt.timedelta(hours=1), dt.timedelta(minutes=1)


def network(offset: str = "+01:00", at: str = "03:40", catch_up: int = 3660) -> Settings:
    text = SETTINGS.replace('standard_time = "+00:00"', f'standard_time = "{offset}"\ncivil_zone = "CET"')
    lines = f'[night]\nat = "{at}"\n[service]\ncatch_up_nights = {catch_up}\n'
    return settings_from(tomllib.loads(text + lines), Path("monitor.toml"))


def planned(settings: Settings, day: dt.date) -> dt.datetime:
    """When the night of a date is to run, from the definition."""
    zone = dt.timezone(settings.network.standard_offset)
    return dt.datetime.combine(day + DAY, dt.time.fromisoformat(settings.night.at), zone)


def nights_run(
    settings: Settings, done: dt.date, moments: list[dt.datetime]
) -> list[tuple[dt.date, dt.datetime]]:
    """What a service runs that looks at these moments: each night with the moment at which it ran."""
    ran = []
    for now in moments:
        due, left_out = due_nights(settings, done, now)
        assert left_out == []
        ran += [(day, now) for day in due]
        done = max([done, *due])
    return ran


def every(step: dt.timedelta, first: dt.datetime, last: dt.datetime) -> list[dt.datetime]:
    return [first + i * step for i in range((last - first) // step + 1)]


@pytest.mark.parametrize("at", ["00:00", "02:30", "03:40", "23:59"])
@pytest.mark.parametrize("offset", ["+01:00", "-05:30", "+00:00", "+14:00"])
@pytest.mark.parametrize(
    ("first", "last"),
    [
        ((2025, 3, 27), (2025, 4, 2)),  # clocks go forward in CET on 30 March
        ((2025, 10, 23), (2025, 10, 29)),  # and back on 26 October
        ((2024, 2, 26), (2024, 3, 3)),  # a leap day
        ((2024, 12, 29), (2025, 1, 3)),  # the turn of the year
    ],
)
def test_each_night_runs_once_within_minutes_of_its_hour(first, last, offset, at):
    settings = network(offset, at)
    moments = every(10 * MINUTE, *(dt.datetime(*day, tzinfo=dt.UTC) for day in (first, last)))
    done = dt.date(*first) - 3 * DAY
    while planned(settings, done + DAY) <= moments[0]:
        done += DAY
    ran = nights_run(settings, done, moments)
    assert [day for day, _ in ran] == [done + i * DAY for i in range(1, len(ran) + 1)]
    assert len(ran) >= 5
    assert all(dt.timedelta(0) <= now - planned(settings, day) < 10 * MINUTE for day, now in ran)


def test_a_machine_that_slept_makes_up_for_every_night_in_order():
    settings = network()
    asleep, awake = dt.datetime(2025, 2, 26, 12, tzinfo=dt.UTC), dt.datetime(2025, 3, 3, 9, tzinfo=dt.UTC)
    ran = nights_run(settings, dt.date(2025, 2, 25), [asleep, awake, awake + HOUR])
    assert [day for day, _ in ran] == [dt.date(2025, 2, 26) + i * DAY for i in range(5)]
    assert {now for _, now in ran} == {awake}


def test_a_clock_that_is_set_back_runs_no_night_again_and_leaves_none_out():
    settings = network()
    start = dt.datetime(2025, 6, 10, tzinfo=dt.UTC)
    moments = [
        *every(HOUR, start, start + 3 * DAY),
        *every(HOUR, start, start + 5 * DAY),  # set back by three days
        *every(HOUR, start + 2 * DAY, start + 8 * DAY),  # and once more
    ]
    days = [day for day, _ in nights_run(settings, dt.date(2025, 6, 8), moments)]
    assert days == [dt.date(2025, 6, 9) + i * DAY for i in range(8)]


@given(
    st.lists(st.integers(-5000, 9000), min_size=1, max_size=40),
    st.sampled_from(["+01:00", "-05:30", "+13:45"]),
    st.integers(0, 1439),
)
def test_however_the_clock_jumps_dates_are_run_once_in_order_and_none_is_left_out(jumps, offset, minute):
    settings = network(offset, f"{minute // 60:02d}:{minute % 60:02d}")
    now = dt.datetime(2025, 10, 20, tzinfo=dt.UTC)
    done = due_nights(settings, None, now)[0][0]
    moments = [now := now + jump * MINUTE for jump in jumps]
    days = [day for day, _ in nights_run(settings, done, moments)]
    assert days == [done + i * DAY for i in range(1, len(days) + 1)]
    last = max([done, *days])
    assert planned(settings, last + DAY) > max(moments)
    if days:
        assert planned(settings, last) <= max(moments)


def test_the_first_night_takes_in_all_there_is():
    settings = network()
    assert due_nights(settings, None, dt.datetime(2025, 3, 5, 2, 39, tzinfo=dt.UTC)) == (
        [dt.date(2025, 3, 3)],
        [],
    )
    assert due_nights(settings, None, dt.datetime(2025, 3, 5, 2, 40, tzinfo=dt.UTC)) == (
        [dt.date(2025, 3, 4)],
        [],
    )


def test_the_newest_missed_nights_are_made_up_for_and_the_rest_is_told():
    settings = network(catch_up=3)
    now = dt.datetime(2025, 3, 12, 12, tzinfo=dt.UTC)
    due, left_out = due_nights(settings, dt.date(2025, 3, 4), now)
    assert due == [dt.date(2025, 3, 9), dt.date(2025, 3, 10), dt.date(2025, 3, 11)]
    assert left_out == [dt.date(2025, 3, 5) + i * DAY for i in range(4)]


def test_setting_the_clock_and_sleeping_are_told_apart():
    clock = InventedClock(dt.datetime(2025, 3, 1, tzinfo=dt.UTC))
    before = Look.at(clock)
    clock.pass_time(30 * MINUTE)
    moved = movement(before, Look.at(clock))
    assert not moved.was_set
    assert not moved.was_suspended
    before = Look.at(clock)
    clock.pass_time(8 * HOUR, asleep=True)
    moved = movement(before, Look.at(clock))
    assert (moved.set_s, moved.suspended_s) == (0, 8 * 3600)
    before = Look.at(clock)
    clock.pass_time(MINUTE)
    clock.set_to(clock.now() - 3 * HOUR)
    moved = movement(before, Look.at(clock))
    assert (moved.set_s, moved.suspended_s) == (-3 * 3600, 0)

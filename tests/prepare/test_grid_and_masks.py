"""Readings on the grid, and the hours that recipes keep."""

import datetime as dt
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from rhovane.model import Series
from rhovane.prepare import Grid, kept_hours, to_grid
from rhovane.prepare.masks import civil_calendar, in_sector, offsets_s
from rhovane.settings import PairSettings, SectorMask

START = int(dt.datetime(2025, 3, 28, 23, tzinfo=dt.UTC).timestamp())


def grid_of(**columns: list[float]) -> Grid:
    return Grid(START, tuple(columns), np.array(list(columns.values())).T)


def test_readings_land_in_their_hour_and_the_rest_is_missing():
    grid = to_grid(
        [Series("A.x", "u"), Series("B.x", "u")],
        START,
        START + 4 * 3600,
        position=np.array([0, 1, 1]),
        second=START + 3600 * np.array([0, 2, 3]),
        value=np.array([1.0, 2.0, np.nan]),
        flag=np.array([1, 1, 9]),
        accepted_flags={1, 2},
    )
    expected = np.full((4, 2), np.nan)
    expected[0, 0], expected[2, 1] = 1.0, 2.0
    np.testing.assert_array_equal(grid.values, expected)


def test_readings_with_a_flag_that_is_not_accepted_are_no_observations():
    grid = to_grid(
        [Series("A.x", "u")],
        START,
        START + 2 * 3600,
        position=np.array([0, 0]),
        second=np.array([START, START + 3600]),
        value=np.array([1.0, 2.0]),
        flag=np.array([4, 2]),
        accepted_flags={1, 2},
    )
    np.testing.assert_array_equal(grid.values[:, 0], [np.nan, 2.0])


def test_readings_outside_the_grid_are_left_out_and_never_wrap_round():
    grid = to_grid(
        [Series("A.x", "u")],
        START,
        START + 2 * 3600,
        position=np.array([0, 0]),
        second=np.array([START - 3600, START + 2 * 3600]),
        value=np.array([1.0, 2.0]),
        flag=np.array([1, 1]),
        accepted_flags={1},
    )
    assert np.isnan(grid.values).all()


def hourly(kind: str, values: list[float], n_hours: int = 2) -> list[float]:
    """Quarter-hourly readings of one series as hours."""
    n = len(values)
    grid = to_grid(
        [Series("A.x", "u", kind, 15)],
        START,
        START + n_hours * 3600,
        position=np.zeros(n, dtype=int),
        second=START + 900 * np.arange(n),
        value=np.array(values),
        flag=np.ones(n, dtype=int),
        accepted_flags={1},
    )
    return grid.values[:, 0].tolist()


def test_quarter_hours_become_hours_where_three_quarters_are_there():
    nan = float("nan")
    assert hourly("linear", [1, 2, 3, nan, 4, nan, nan, 4])[0] == 2
    assert np.isnan(hourly("linear", [1, 2, 3, nan, 4, nan, nan, 4])[1])


def test_rain_is_summed_and_a_lost_quarter_does_not_make_an_hour_drier():
    assert hourly("accumulated", [1, 1, 1, 1, 2, 2, 2, float("nan")]) == [4, 8]


def test_wind_direction_is_averaged_as_a_vector():
    assert hourly("circular", [350, 10, 350, 10, 80, 100, 80, 100]) == pytest.approx([0, 90], abs=1e-9)


@pytest.mark.parametrize("zone", ["CET", "UTC", "Australia/Lord_Howe", "America/St_Johns"])
def test_offsets_agree_with_the_zone_hour_by_hour_over_a_year(zone: str):
    start = int(dt.datetime(2025, 1, 1, tzinfo=dt.UTC).timestamp())
    hours = start + 3600 * np.arange(365 * 24)
    tz = ZoneInfo(zone)
    slow = [dt.datetime.fromtimestamp(int(s), tz).utcoffset().total_seconds() for s in hours]
    np.testing.assert_array_equal(offsets_s(hours, zone), slow)


def test_the_civil_calendar_knows_clock_changes_weekends_and_other_days():
    hours = START + 3600 * np.arange(6 * 24)
    hour, working = civil_calendar(hours, "CET", {dt.date(2025, 4, 1)})
    tz = ZoneInfo("CET")
    for second, h, w in zip(hours, hour, working, strict=True):
        local = dt.datetime.fromtimestamp(int(second), tz)
        assert local.hour == h
        assert w == (local.weekday() < 5 and local.date() != dt.date(2025, 4, 1))
    assert working.any()
    assert not working.all()


@pytest.mark.parametrize(
    ("sector", "inside", "outside"),
    [
        ((20, 90), [20, 55, 90], [19.9, 90.1, 225]),
        ((315, 45), [315, 0, 45, 359], [46, 180, 314]),
        ((0, 360), [0, 100, 359.9], []),
    ],
)
def test_a_sector_runs_clockwise_and_holds_both_edges(sector, inside, outside):
    mask = SectorMask(direction="A.wind_direction", from_deg=sector[0], to_deg=sector[1])
    assert in_sector(np.array(inside, dtype=float), mask)[0].all()
    assert not in_sector(np.array([*outside, np.nan], dtype=float), mask)[0].any()


def test_an_hour_without_wind_direction_is_unknown_to_a_sector_mask_not_kept():
    grid = grid_of(**{"A.x": [1.0, 2, 3], "B.x": [1.0, 2, 3], "A.wind_direction": [50.0, np.nan, 200]})
    pair = PairSettings(
        first="A.x", second="B.x", sector=SectorMask(direction="A.wind_direction", from_deg=20, to_deg=90)
    )
    mask = kept_hours(pair, grid, civil_zone="UTC", other_days=frozenset())
    np.testing.assert_array_equal(mask.kept, [True, False, False])
    np.testing.assert_array_equal(mask.unknown, [False, True, False])


def test_wet_hours_are_those_in_which_at_least_one_side_is_above_zero():
    grid = grid_of(**{"A.rain": [0.0, 0, 1, np.nan], "B.rain": [0.0, 2, 0, 0]})
    pair = PairSettings(first="A.rain", second="B.rain", wet_only=True)
    mask = kept_hours(pair, grid, civil_zone="UTC", other_days=frozenset())
    np.testing.assert_array_equal(mask.kept, [False, True, True, False])


def test_a_plain_recipe_keeps_every_hour():
    grid = grid_of(**{"A.x": [1.0, np.nan], "B.x": [np.nan, np.nan]})
    assert kept_hours(
        PairSettings(first="A.x", second="B.x"), grid, civil_zone="UTC", other_days=frozenset()
    ).everything

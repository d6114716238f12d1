"""Screens for feeds that are not what they are declared to be: planted faults are seen, sound data are not."""

import numpy as np
import pytest

from rhovane.stats.feed_signs import (
    equal_hours,
    longest_flat,
    nearest_factor,
    repeated_outliers,
    shifted_ratio,
    slipped,
)

BLOCK, BEFORE = 336, 672  # hours: 14 days after 28


def neighbours(seed, n=BLOCK + BEFORE):
    """Two stations with a common hourly course, in concentrations with gaps and ties."""
    rng = np.random.default_rng(seed)
    common, own = np.zeros(n), np.zeros((2, n))
    for t in range(1, n):
        common[t] = 0.8 * common[t - 1] + rng.normal()
        own[:, t] = 0.6 * own[:, t - 1] + 0.5 * rng.normal(size=2)
    x, y = np.round(20 * np.exp(0.3 * (common + own)), 1)
    x[rng.random(n) < 0.03] = np.nan
    return x, y


def parts(x, y):
    return (x[BEFORE:], y[BEFORE:]), (x[:BEFORE], y[:BEFORE])


@pytest.mark.parametrize("hours", [-2, -1, 1, 2])
def test_a_slipped_clock_is_seen_with_its_direction(hours):
    x, y = neighbours(3)
    late = x.copy()
    late[BEFORE:] = np.roll(x, hours)[BEFORE:]
    found = slipped(*parts(late, y))
    assert found is not None
    assert found.lag_before == 0
    assert found.lag_now == -hours  # what stands later follows: its neighbour leads
    assert found.rho_now > found.rho_now_at_old_lag + 0.15


def test_sound_neighbours_show_no_slip_and_no_shift():
    found = [
        (slipped(*parts(*neighbours(seed))), shifted_ratio(*parts(*neighbours(seed)))) for seed in range(60)
    ]
    assert [one for one, _ in found if one] == []
    assert sum(shift is not None for _, shift in found) <= 3


def test_too_little_or_constant_data_show_nothing():
    x, y = neighbours(4)
    assert slipped((x[:40], y[:40]), (x, y)) is None
    assert slipped((np.ones(BLOCK), y[:BLOCK]), (x, y)) is None
    assert shifted_ratio((x[:96], y[:96]), (x, y)) is None
    assert shifted_ratio((np.zeros(BLOCK), y[:BLOCK]), (x, y)) is None


@pytest.mark.parametrize("factor", [1.912, 1 / 1.912, 1000.0])
def test_a_change_of_unit_is_seen_with_its_factor(factor):
    x, y = neighbours(5)
    other = x.copy()
    other[BEFORE:] *= factor
    found = shifted_ratio(*parts(other, y))
    assert found is not None
    assert abs(np.log(found.factor / factor)) < 0.1
    assert nearest_factor(factor * 1.02, [1.88, 1.912, 1000.0]) in (0, 1, 2)
    assert nearest_factor(1.5, [1.88, 1.912, 1000.0]) is None


def test_codes_for_no_value_are_told_from_readings():
    rng = np.random.default_rng(6)
    values = np.round(rng.gamma(2, 10, 500), 1)
    assert repeated_outliers(values) == []
    values[[3, 90, 200]] = -999
    values[[7, 8]] = 9999
    values[[11, 12, 13, 14]] = 5555
    assert repeated_outliers(values) == [(5555.0, 4), (-999.0, 3), (9999.0, 2)]
    values[[11, 12]] = np.nan
    assert (5555.0, 2) not in repeated_outliers(values)


def test_rain_and_counts_with_many_zeros_hold_no_code():
    rng = np.random.default_rng(7)
    rain = np.where(rng.random(2000) < 0.1, np.round(rng.gamma(0.7, 1.1, 2000) / 0.2) * 0.2, 0.0)
    assert repeated_outliers(rain) == []
    assert repeated_outliers(np.full(10, -999.0)) == []  # nothing to stand apart from


def test_the_longest_flat_stretch_is_found_and_zeros_and_gaps_are_not():
    values = np.arange(200.0)
    values[20:60] = 7.5
    values[100:130] = 3.0
    found = longest_flat(values)
    assert found is not None
    assert (found.first, found.n_rows, found.value) == (20, 40, 7.5)
    values[40] = np.nan
    assert (longest_flat(values).first, longest_flat(values).n_rows) == (100, 30)
    assert longest_flat(np.zeros(100)) is None
    assert longest_flat(np.full(100, np.nan)) is None
    assert longest_flat(np.empty(0)) is None


def test_a_feed_delivered_twice_is_seen_and_a_constant_one_is_not():
    x, y = neighbours(8)
    assert equal_hours(x, y) is None
    twin = x.copy()
    twin[5] += 1
    n, equal = equal_hours(x, twin)
    assert n - equal == 1
    assert equal_hours(np.ones(500), np.ones(500)) is None

"""Following the lag of a pair."""

import math

import numpy as np
import pytest
from scipy.signal import lfilter
from scipy.stats import norm

from reference import rank_correlation as naive
from rhovane.stats import innovations, rolling_rank_correlation, track_lag


def slow_pair(seed, days, phi=0.9, weight=0.8):
    rng = np.random.default_rng(seed)
    z = lfilter([1.0], [1.0, -phi], rng.normal(size=(2, days * 24 + 200)), axis=1)[:, 200:]
    return z[0].round(2), (weight * z[0] + (1 - weight) * z[1]).round(2)


def slipped(y, row, rows):
    """The series with a clock that runs ``rows`` late from ``row`` on."""
    late = y.copy()
    late[row:] = y[row - rows : len(y) - rows]
    return late


def test_innovations_equal_their_definition():
    x, _ = slow_pair(1, 40)
    x[np.random.default_rng(2).random(len(x)) < 0.05] = np.nan
    share = naive.trailing_share(x.tolist(), 720, 48)
    score = np.array([norm.ppf(min(1 - 1e-4, max(1e-4, s))) if s == s else math.nan for s in share])
    found = innovations(x)
    for day in (3, 12, 39):
        past = score[max(0, (day - 28) * 24) : day * 24]
        if np.isfinite(past).sum() < 96:
            assert np.isnan(found[day * 24 : day * 24 + 24]).all()
            continue
        centred = past - np.nanmean(past)
        r = [np.nanmean(centred[: len(centred) - k] * centred[k:]) for k in range(3)]
        r1, r2 = r[1] / r[0], r[2] / r[0]
        a1, a2 = r1 * (1 - r2) / (1 - r1**2), (r2 - r1**2) / (1 - r1**2)
        for t in range(day * 24, day * 24 + 24):
            now, one, two = (score[t - k] - np.nanmean(past) for k in range(3))
            expected = now - a1 * one - a2 * two
            assert math.isnan(found[t]) == math.isnan(expected)
            if not math.isnan(expected):
                assert abs(found[t] - expected) < 1e-9


def test_innovations_use_nothing_later_and_ranks_only():
    x, _ = slow_pair(3, 50)
    whole = innovations(x)
    np.testing.assert_array_equal(whole[:1000], innovations(x[:1000]))
    np.testing.assert_array_equal(whole, innovations(np.exp(x)))


def test_a_clock_slip_moves_the_lag_when_the_window_has_passed_it():
    for seed in range(5):
        x, y = slow_pair(seed, 120)
        slip = 90 * 24
        track = track_lag(x, slipped(y, slip, 1))
        settled = (track.end > 40 * 24) & (track.end < slip)
        after = track.end >= slip + 168
        assert (track.lag[settled] == 0).mean() > 0.97, f"seed {seed}"
        assert (track.lag[after] == 1).mean() > 0.97, f"seed {seed}"
        # Most of the window lies behind the slip after four days already.
        assert (track.best_lag[track.end >= slip + 110] == 1).all(), f"seed {seed}"


def test_innovations_find_the_lag_where_levels_blur_it():
    wrong = {"levels": 0, "innovations": 0}
    for seed in range(10):
        x, y = slow_pair(100 + seed, 100, phi=0.97, weight=0.6)
        late = slipped(y, 48, 2)
        track = track_lag(x, late)
        rows = track.end > 60 * 24
        levels = rolling_rank_correlation(x, late, window=168, step=24, lags=range(-6, 7))
        wrong["innovations"] += (track.best_lag[rows] != 2).sum()
        wrong["levels"] += (levels.lags[np.abs(levels.statistic).argmax(axis=1)][rows] != 2).sum()
    assert wrong["innovations"] < 0.25 * wrong["levels"]


def test_unrelated_series_have_no_clear_lag():
    clear = windows = 0
    for seed in range(10):
        x, _ = slow_pair(200 + seed, 100)
        y, _ = slow_pair(300 + seed, 100)
        track = track_lag(x, y, step=168)
        known = ~np.isnan(track.p_value)
        clear += (~np.isnan(track.lag[known])).sum()
        windows += known.sum()
    assert windows > 100
    assert clear / windows < 0.04


def test_swapping_the_pair_mirrors_the_lag_and_gaps_are_named_missing():
    x, y = slow_pair(7, 80)
    late = slipped(y, 48, 3)
    late[70 * 24 :] = np.nan
    one, other = track_lag(x, late), track_lag(late, x)
    np.testing.assert_array_equal(one.best_lag, -other.best_lag)
    assert math.isnan(one.best_lag[-1])
    assert math.isnan(one.lag[-1])
    assert math.isnan(one.p_value[-1])


def test_steps_per_day_out_of_range_are_refused():
    with pytest.raises(ValueError, match=r"steps_per_day=1441 is out of range"):
        innovations(np.arange(10.0), steps_per_day=1441)

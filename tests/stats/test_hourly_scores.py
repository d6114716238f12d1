"""Hourly scores: equal to their definitions, causal, bounded in what they need, decided by ranks only."""

from __future__ import annotations

from dataclasses import fields

import numpy as np
import pytest

from reference.naive_monitor import naive_innovations, naive_levels
from rhovane.stats.hourly_scores import SERIES_HISTORY_DAYS, SeriesScores, series_scores


def gappy_series(seed: int, days: int) -> np.ndarray:
    """A sticky series of few distinct values with single gaps, an outage and a stuck stretch."""
    rng = np.random.default_rng(seed)
    x = np.empty(24 * days)
    x[0] = 0.0
    for t in range(1, len(x)):
        x[t] = 0.8 * x[t - 1] + rng.normal()
    x = np.round(x + np.sin(np.arange(len(x)) * np.pi / 12), 0)
    x[rng.random(len(x)) < 0.08] = np.nan
    x[24 * (days // 2) : 24 * (days // 2) + 40] = np.nan
    x[24 * (days // 3) : 24 * (days // 3) + 30] = 1.0
    return x


def same(a: SeriesScores, b: SeriesScores, rows: slice) -> bool:
    return all(
        np.array_equal(getattr(a, f.name)[rows], getattr(b, f.name), equal_nan=True)
        for f in fields(a)
        if f.name != "first_day"
    )


@pytest.mark.parametrize("seed", [1, 2])
def test_scores_equal_their_definition(seed: int) -> None:
    x = gappy_series(seed, 50)
    scores = series_scores(x)
    rank, score, level = naive_levels(x)
    np.testing.assert_array_equal(scores.midrank.ravel(), rank)
    np.testing.assert_allclose(scores.normal_score.ravel(), score, rtol=1e-13)
    np.testing.assert_allclose(scores.level.ravel(), level, rtol=0, atol=1e-12)
    for day in range(50):
        errors, sd = naive_innovations(level, day)
        np.testing.assert_allclose(scores.innovation[day], errors, rtol=0, atol=1e-9, err_msg=f"day {day}")
        np.testing.assert_allclose(scores.shape_sd[day], sd, rtol=1e-9)


def test_a_day_alone_equals_the_day_in_bulk_to_the_last_bit() -> None:
    x = gappy_series(3, 260)
    bulk = series_scores(x)
    for day in (0, 1, 20, 147, 200, 259):
        first = max(0, day - SERIES_HISTORY_DAYS + 1)
        alone = series_scores(x[24 * first : 24 * (day + 1)], range(day - first, day - first + 1))
        assert same(bulk, alone, slice(day, day + 1)), f"day {day}"


@pytest.mark.parametrize("seed", [7, 8, 9])
def test_days_that_follow_known_ones_equal_the_whole_to_the_last_bit(seed: int) -> None:
    x = gappy_series(seed, 260)
    bulk = series_scores(x)
    known = series_scores(x, range(30, 180))
    while known.first_day + known.n_days < 260:
        fresh = known.first_day + known.n_days
        until = min(260, fresh + 1 + seed)
        known = known.followed_by(series_scores(x, range(fresh, until), known=known))
    assert same(bulk, known, slice(30, 260))


def test_known_scores_that_reach_back_too_little_are_refused() -> None:
    x = gappy_series(7, 200)
    known = series_scores(x, range(100, 180))
    with pytest.raises(ValueError, match=r"known scores cover days 100\.\.179; days 63\.\.179 are needed"):
        series_scores(x, range(180, 181), known=known)


def test_one_day_less_of_history_is_not_enough() -> None:
    x = gappy_series(4, 200)
    bulk = series_scores(x, range(199, 200))
    short = series_scores(
        x[24 * (200 - SERIES_HISTORY_DAYS + 1) :], range(SERIES_HISTORY_DAYS - 2, SERIES_HISTORY_DAYS - 1)
    )
    assert not np.array_equal(bulk.innovation, short.innovation, equal_nan=True)


def test_later_readings_change_nothing() -> None:
    x = gappy_series(5, 120)
    changed = x.copy()
    changed[24 * 100 :] = 50.0
    assert same(series_scores(x), series_scores(changed, range(100)), slice(0, 100))


def test_a_strictly_increasing_transform_changes_nothing() -> None:
    x = gappy_series(6, 80)
    assert same(series_scores(x), series_scores(np.exp(x / 3) * 1.9125 - 7), slice(None))


def test_innovations_of_white_noise_have_unit_variance_and_no_memory() -> None:
    e = series_scores(np.random.default_rng(7).normal(size=24 * 300)).innovation[30:].ravel()
    assert abs(np.std(e) - 1) < 0.03
    assert abs(np.mean(e[1:] * e[:-1])) < 4 / np.sqrt(len(e))


def test_no_scores_before_two_weeks_of_history() -> None:
    scores = series_scores(np.random.default_rng(8).normal(size=24 * 40))
    assert np.isnan(scores.innovation[:15]).all()
    assert np.isfinite(scores.innovation[16:]).all()


def test_a_stuck_sensor_has_no_variance() -> None:
    scores = series_scores(np.full(24 * 60, 3.0))
    assert (scores.midrank[2:] == 0.5).all()
    assert np.nanmax(np.abs(scores.innovation)) == 0.0


@pytest.mark.parametrize(
    ("values", "days", "message"),
    [
        (np.zeros((3, 24)), None, "one series at a time"),
        (np.array([1.0, np.inf] * 24), None, "infinite"),
        (np.zeros(48), range(1, 3), "2 complete days"),
        (np.zeros(48), range(0, 2, 2), "consecutive"),
    ],
)
def test_a_mistake_is_refused(values: np.ndarray, days: range | None, message: str) -> None:
    with pytest.raises(ValueError, match=message):
        series_scores(values, days)


def test_readings_with_every_third_hour_missing_take_their_scale_from_the_filter() -> None:
    x = gappy_series(9, 40)
    x[2::3] = np.nan
    scores = series_scores(x)
    _, _, level = naive_levels(x)
    for day in (30, 39):
        errors, _ = naive_innovations(level, day)
        np.testing.assert_allclose(scores.innovation[day], errors, rtol=0, atol=1e-9)
    assert np.isfinite(scores.innovation[39]).any()

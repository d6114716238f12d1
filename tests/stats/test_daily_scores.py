"""Daily scores: equal to their definitions, bounded in what they need, honest about days without evidence."""

from __future__ import annotations

import math
from dataclasses import fields, replace
from typing import Any

import numpy as np
import pytest

from reference.naive_monitor import naive_day_correlation, naive_innovations, naive_levels
from rhovane.stats.daily_scores import HISTORY_DAYS, DailyScores, daily_scores, pair_scores
from rhovane.stats.hourly_scores import series_scores


def related(seed: int, days: int, share: float = 0.7) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Two sticky series with a common part and that part, with gaps; the first is rounded to whole numbers."""
    rng = np.random.default_rng(seed)
    common, own, other = (np.cumsum(rng.normal(size=24 * days)) for _ in range(3))
    flat = [np.asarray(v - np.convolve(v, np.ones(25) / 25, "same")) for v in (common, own, other)]
    x, y = share * flat[0] + flat[1] * (1 - share), share * flat[0] + flat[2] * (1 - share)
    x = np.round(2 * x)
    for v in (x, y):
        v[rng.random(v.size) < 0.1] = np.nan
    x[24 * 30 : 24 * 30 + 20] = np.nan
    y[24 * 33 : 24 * 34] = np.nan
    x[24 * 36 : 24 * 38] = 4.0
    return x, y, flat[0]


def test_scores_equal_their_definition() -> None:
    x, y, _ = related(1, 45)
    scores = daily_scores(x, y)
    (x_rank, _, x_level), (y_rank, _, y_level) = naive_levels(x), naive_levels(y)
    seen = 0
    for day in range(45):
        rows = slice(24 * day, 24 * day + 24)
        (ex, sx), (ey, sy) = (naive_innovations(v, day) for v in (x_level, y_level))
        for a, b, got, hours, centred in (
            (ex, ey, scores.innovation[day], scores.innovation_hours[day], False),
            (x_level[rows], y_level[rows], scores.shape[day], scores.shape_hours[day], True),
        ):
            ok = np.isfinite(a) & np.isfinite(b) & np.isfinite(sx)
            tied = [np.unique(r[rows][ok], return_counts=True)[1].max(initial=0) for r in (x_rank, y_rank)]
            expected = math.nan
            if ok.sum() >= 8 and max(tied) <= 0.75 * ok.sum():
                expected = naive_day_correlation(a[ok], b[ok], centred=centred, scale=(sx, sy))
            np.testing.assert_allclose(got, expected, atol=1e-8, err_msg=f"day {day}, centred {centred}")
            assert hours == (0 if math.isnan(expected) else ok.sum())
            seen += not math.isnan(expected)
    assert seen > 40


def cases(control: np.ndarray) -> list[dict[str, Any]]:
    hour = np.arange(control.size) % 24
    return [
        {},
        {"lag": 3},
        {"lag": -30},
        {"lag": 2, "controls": np.stack([control, np.roll(control, 3)], axis=1)},
        {"controls": control[:, None], "keep": hour < 14},
    ]


@pytest.mark.parametrize("case", range(5))
def test_a_day_alone_equals_the_day_in_bulk_to_the_last_bit(case: int) -> None:
    x, y, control = related(2, 300)
    options = cases(control)[case]
    bulk = daily_scores(x, y, **options)
    for day in (1, 17, 120, 299):
        first = max(0, day - HISTORY_DAYS + 1)
        rows = slice(24 * first, 24 * (day + 1))
        part = {k: v[rows] if k in ("controls", "keep") else v for k, v in options.items()}
        alone = daily_scores(x[rows], y[rows], days=range(day - first, day - first + 1), **part)
        for f in fields(DailyScores):
            if f.name != "day":
                np.testing.assert_array_equal(
                    getattr(alone, f.name)[0], getattr(bulk, f.name)[day], err_msg=f"{f.name} {day}"
                )
    assert np.isfinite(bulk.innovation[120:]).mean() > 0.9


def test_a_strictly_increasing_transform_changes_nothing() -> None:
    x, y, control = related(3, 130)
    plain = daily_scores(x, y, controls=control[:, None])
    bent = daily_scores(np.exp(x / 4), 5 * y**3 + y, controls=np.arctan(control)[:, None])
    np.testing.assert_array_equal(plain.innovation, bent.innovation)
    np.testing.assert_array_equal(plain.shape, bent.shape)


def test_swapping_the_sides_mirrors_the_lag() -> None:
    x, y, _ = related(4, 60)
    one, other = daily_scores(x, y, lag=5), daily_scores(y, x, lag=-5)
    np.testing.assert_array_equal(one.innovation, other.innovation)
    np.testing.assert_array_equal(one.shape, other.shape)
    np.testing.assert_array_equal(one.lagged, other.lagged[:, ::-1])


def test_a_lagged_pair_is_the_delayed_series() -> None:
    x, y, _ = related(5, 90)
    delayed = np.r_[np.full(24, np.nan), x[:-24]]
    by_lag, by_hand = daily_scores(x, y, lag=24).innovation[60:], daily_scores(delayed, y).innovation[60:]
    assert np.corrcoef(by_lag, by_hand)[0, 1] > 0.99


def test_lagged_correlations_show_a_late_second_series() -> None:
    x, _, common = related(6, 120, share=0.9)
    late = np.r_[np.nan, common[:-1]]
    profile = np.nanmean(daily_scores(x, late).lagged, axis=0)
    assert profile.argmax() == 3


def test_adjusting_for_the_common_part_removes_the_relation() -> None:
    x, y, common = related(7, 200)
    plain, adjusted = daily_scores(x, y), daily_scores(x, y, controls=common[:, None])
    assert np.nanmean(plain.innovation[110:]) > 0.5
    assert abs(np.nanmean(adjusted.innovation[110:])) < 0.25


def test_masked_hours_do_not_enter() -> None:
    x, y, _ = related(8, 80)
    keep = np.arange(x.size) % 24 < 12
    scrambled = np.where(keep, 0, np.random.default_rng(8).normal(size=x.size))
    masked = daily_scores(x, y, keep=keep)
    assert masked.innovation_hours.max() == 12
    sx, sy = series_scores(x), series_scores(y)
    noisy = replace(sy, innovation=sy.innovation + scrambled.reshape(-1, 24))
    again = pair_scores(sx, noisy, days=range(80), keep=keep)
    np.testing.assert_array_equal(masked.innovation, again.innovation)


def test_a_stuck_side_or_an_empty_day_is_not_scored() -> None:
    x, y, _ = related(9, 60)
    y[24 * 50 : 24 * 51] = np.nan
    y[24 * 52 : 24 * 53] = 7.5
    scores = daily_scores(x, y)
    assert np.isnan(scores.innovation[[50, 52]]).all()
    assert np.isnan(scores.shape[[50, 52]]).all()
    assert (scores.innovation_hours[[50, 52]] == 0).all()
    assert np.isfinite(scores.innovation[[51, 53]]).all()


def test_too_few_hourly_scores_are_refused() -> None:
    x, y, _ = related(10, 60)
    late = range(40, 60)
    sx, sy = series_scores(x, late), series_scores(y, late)
    with pytest.raises(ValueError, match="need hourly scores from day 39"):
        pair_scores(sx, sy, days=late)
    with pytest.raises(ValueError, match="same days"):
        pair_scores(sx, series_scores(y, range(41, 60)), days=range(50, 60))
    with pytest.raises(ValueError, match="keep has 24 hours"):
        pair_scores(sx, sy, days=range(45, 60), keep=np.ones(24, dtype=bool))


@pytest.mark.parametrize(
    ("x", "y", "options", "message"),
    [
        (np.zeros(48), np.zeros(72), {}, "shape"),
        (np.zeros(48), np.zeros(48), {"controls": np.zeros((24, 1))}, "24 rows for 48 hours"),
        (np.zeros(48), np.zeros(48), {"days": range(3)}, "2 complete days"),
    ],
)
def test_a_mistake_is_refused(x: np.ndarray, y: np.ndarray, options: dict[str, Any], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        daily_scores(x, y, **options)

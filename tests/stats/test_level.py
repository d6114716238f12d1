"""The level companion: medians, their ratio, and the Theil-Sen slope."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.signal import lfilter
from scipy.stats import theilslopes

from reference.naive_sheet import middle, slopes_between
from rhovane.stats.level import median_interval, median_ratio, spread_ratio, theil_sen_slope

few = st.one_of(st.integers(0, 5).map(float), st.just(float("nan")))


def persistent(rng: np.random.Generator, n: int, phi: float) -> np.ndarray:
    return lfilter([np.sqrt(1 - phi**2)], [1.0, -phi], rng.normal(size=n + 100))[100:]


@given(st.lists(st.tuples(few, few), min_size=2, max_size=14))
@settings(deadline=None)
def test_the_slope_is_the_median_of_all_slopes_between_two_rows(rows):
    x, y = np.array(rows).T
    expected = slopes_between(x, y)
    found = theil_sen_slope(x, y, adjust="none")
    if expected:
        assert found.value == pytest.approx(middle(expected), abs=1e-12)
        assert found.low <= found.value <= found.high
    else:
        assert np.isnan(found.value)
        assert found.reason == "the first series never differs"


def test_sens_worked_example():
    """Sen (1968), Journal of the American Statistical Association 63, section 5: slope 4, 93 % interval 3.71 to 4.38.

    Cited from memory; scipy 1.16 gives the same. At 95 % the interval can only be wider.
    """
    x, y = [1, 2, 3, 4, 10, 12, 18], [9, 15, 19, 20, 45, 55, 78]
    found = theil_sen_slope(x, y, adjust="none")
    assert found.value == pytest.approx(4.0)
    assert found.low <= 3.715
    assert found.high >= 4.375
    assert (found.low, found.high) == pytest.approx(tuple(theilslopes(y, x, 0.95))[2:])


@pytest.mark.parametrize("seed", range(8))
def test_independent_intervals_are_those_of_scipy(seed: int):
    rng = np.random.default_rng(seed)
    x, y = rng.integers(0, 6, 40).astype(float), rng.integers(0, 6, 40).astype(float)
    theirs = theilslopes(y, x, 0.95)
    ours = theil_sen_slope(x, y, adjust="none")
    assert (ours.value, ours.low, ours.high) == pytest.approx((theirs[0], theirs[2], theirs[3]))


def test_a_scale_change_moves_slope_and_ratio_by_its_factor_and_shows_beyond_the_intervals():
    rng = np.random.default_rng(4)
    x = np.exp(persistent(rng, 1344, 0.8))
    y = 3.0 * x * np.exp(0.2 * persistent(rng, 1344, 0.8))
    y[672:] *= 0.45
    before, after = theil_sen_slope(x[:672], y[:672]), theil_sen_slope(x[672:], y[672:])
    assert after.value / before.value == pytest.approx(0.45, rel=0.1)
    assert after.high < before.low
    ratio = median_ratio(y[:672] / x[:672], y[672:] / x[672:])
    assert ratio.value == pytest.approx(0.45, rel=0.1)
    assert ratio.high < 1.0


@given(st.integers(0, 10**6), st.floats(0.1, 50.0))
@settings(max_examples=25, deadline=None)
def test_a_change_of_unit_leaves_the_ratio_alone_and_scales_median_and_slope(seed: int, factor: float):
    rng = np.random.default_rng(seed)
    x = np.exp(persistent(rng, 400, 0.5))
    y = np.exp(persistent(rng, 400, 0.5))
    one, other = median_ratio(x[:200], x[200:]), median_ratio(factor * x[:200], factor * x[200:])
    assert other.value == pytest.approx(one.value)
    assert other.low == pytest.approx(one.low, nan_ok=True)
    assert median_interval(factor * x).low == pytest.approx(factor * median_interval(x).low)
    assert theil_sen_slope(x, factor * y).high == pytest.approx(factor * theil_sen_slope(x, y).high)


@pytest.mark.parametrize("phi", [0.0, 0.8, 0.9])
def test_intervals_of_dependent_series_cover_at_about_their_level(phi: float):
    """Median of AR(1) and slope of related AR(1), n = 336; 95 % nominal."""
    rng = np.random.default_rng(int(phi * 10) + 1)
    n, inside_median, inside_slope = 150, 0, 0
    for _ in range(n):
        x, e = persistent(rng, 336, phi), persistent(rng, 336, phi)
        inside_median += (one := median_interval(x)).low <= 0.0 <= one.high
        inside_slope += (one := theil_sen_slope(x, 0.5 * x + e)).low <= 0.5 <= one.high
    assert 0.90 <= inside_median / n <= 0.995
    assert 0.86 <= inside_slope / n <= 0.995


def test_what_cannot_be_said_is_said_in_words():
    assert median_interval([np.nan] * 5).reason == "no observations"
    slow = np.arange(100.0)
    assert median_interval(slow).reason == "too few independent hours"
    cold = np.random.default_rng(1).normal(-3, 1, 300)
    assert median_ratio(cold, cold).reason == "a median is not above zero"
    near = np.abs(cold + 3.05) - 0.6
    assert "zero" in (median_ratio(near, near).reason or "")
    exact = theil_sen_slope(np.arange(50.0), 2.0 * np.arange(50.0))
    assert exact.value == 2.0
    assert exact.reason == "the second series follows the first exactly"


def test_the_spread_of_an_attenuated_series_shrinks_by_its_factor():
    rng = np.random.default_rng(2)
    x = rng.lognormal(size=400)
    assert spread_ratio(x, 0.12 * x) == pytest.approx(0.12)
    assert np.isnan(spread_ratio(np.ones(10), x))


def test_too_many_rows_and_unknown_words_are_refused():
    with pytest.raises(ValueError, match="at most 4096"):
        theil_sen_slope(np.zeros(5000), np.zeros(5000))
    with pytest.raises(ValueError, match='choose "autocorrelation" or "none"'):
        theil_sen_slope([1, 2], [1, 2], adjust="some")

"""Lag scans, the nightly window scan, and the significance of the best lag."""

import math

import numpy as np
import pytest
from scipy.signal import lfilter

from reference import rank_correlation as naive
from rhovane.stats import lag_scan, rank_correlation_test, rolling_rank_correlation, window_scan
from rhovane.stats.dependence import autocorrelation, inflation, joint_ranks
from rhovane.stats.family import best_of_lags_p_value, lag_correlation
from rhovane.stats.rank_kernels import dense_ranks


def slow_pair(seed, n, lead=0, weight=0.6, phi=0.7):
    rng = np.random.default_rng(seed)
    z = lfilter([1.0], [1.0, -phi], rng.normal(size=(2, n + 100 + lead)), axis=1)[:, 100:]
    y = weight * z[0, : n or None] + (1 - weight) * z[1, :n]
    x = z[0, lead:]
    return x[:n].round(2), y.round(2)


@pytest.mark.parametrize("method", ["spearman", "kendall"])
def test_window_scan_equals_the_last_rolling_window(method):
    x, y = slow_pair(1, 260)
    x[40:60] = np.nan
    lags = range(-4, 5)
    night = window_scan(x, y, window=200, lags=lags, method=method)
    rolling = rolling_rank_correlation(x, y, window=200, step=60, lags=lags, method=method)
    np.testing.assert_array_equal(night.statistic, rolling.statistic[-1])
    np.testing.assert_array_equal(night.n_pairs, rolling.n_pairs[-1])


def test_window_scan_uses_nothing_but_the_window_and_its_lagged_rows():
    x, y = slow_pair(2, 300)
    whole = window_scan(x, y, window=200, lags=(-5, 0, 5))
    enough = window_scan(x[-205:], y[-205:], window=200, lags=(-5, 0, 5))
    np.testing.assert_array_equal(whole.statistic, enough.statistic)
    np.testing.assert_array_equal(whole.p_value, enough.p_value)
    np.testing.assert_array_equal(whole.low, enough.low)


def test_rows_before_the_data_count_as_missing():
    x, y = slow_pair(3, 200)
    short = window_scan(x, y, window=200, lags=(0, 5))
    assert short.n_pairs.tolist() == [200, 195]
    few = window_scan(x[:100], y[:100], window=200, lags=(0, 5))
    assert few.n_pairs.tolist() == [100, 95]
    assert few.reason == ("too few pairs: 100, at least 150 needed", "too few pairs: 95, at least 150 needed")
    assert few.best_lag is None
    assert math.isnan(few.best_p_value)
    assert np.isnan(few.low).all()


def test_lag_zero_of_a_scan_equals_the_single_test():
    x, y = slow_pair(4, 300)
    y[100:110] = np.nan
    alone = rank_correlation_test(x, y)
    scan = lag_scan(x, y, lags=(-2, 0, 3))
    assert scan.statistic[1] == alone.statistic
    assert scan.n_effective[1] == alone.n_effective
    assert scan.p_value[1] == alone.p_value
    night = window_scan(x, y, window=300, lags=(0,))
    assert (night.low[0], night.high[0]) == (alone.low, alone.high)
    assert night.best_p_value == alone.p_value


def test_scan_statistics_equal_the_definition_at_each_lag():
    rng = np.random.default_rng(5)
    x, y = rng.integers(0, 5, 60).astype(float), rng.integers(0, 5, 60).astype(float)
    x[rng.random(60) < 0.2] = np.nan
    scan = lag_scan(x, y, lags=range(-6, 7))
    for lag, statistic, n_pairs in zip(scan.lags, scan.statistic, scan.n_pairs, strict=True):
        a, b = naive.pairs_at(x, y, 59, 60, int(lag))
        assert n_pairs == len(a)
        assert abs(statistic - naive.spearman(a, b)) < 1e-12


def test_the_leading_series_is_found_with_its_lag():
    for lead in (0, 3, 7):
        x, y = slow_pair(6, 500, lead=lead, weight=0.8)
        scan = lag_scan(x, y, lags=range(-10, 11))
        assert scan.best_lag == lead
        assert scan.best_p_value < 0.001
        assert lag_scan(y, x, lags=range(-10, 11)).best_lag == -lead


def test_best_p_value_lies_between_the_single_one_and_the_sum_bound():
    for seed in range(20):
        rng = np.random.default_rng(seed)
        scan = lag_scan(rng.normal(size=200), rng.normal(size=200), lags=range(-12, 13))
        smallest = scan.p_value.min()
        assert smallest <= scan.best_p_value <= min(1.0, 25 * smallest) + 1e-12, f"seed {seed}"


def test_independent_rows_give_the_sidak_correction():
    rng = np.random.default_rng(9)
    ranks = joint_ranks(dense_ranks(rng.normal(size=2000))[0], dense_ranks(rng.normal(size=2000))[0])
    acf = autocorrelation(ranks)
    lags = np.arange(0, 100, 10)
    p_values = np.full(10, 0.5)
    p_values[3] = 0.02
    found = best_of_lags_p_value(p_values, lags, acf, seed=1)
    assert abs(found - (1 - 0.98**10)) < 0.03


def test_lag_correlation_equals_the_double_sum():
    x, y = slow_pair(10, 120)
    ranks = joint_ranks(dense_ranks(x)[0], dense_ranks(y)[0])
    acf = autocorrelation(ranks)
    own_x = {0: 1.0} | {
        s * (k + 1): w * r for k, (w, r) in enumerate(zip(acf.weight, acf.xx, strict=True)) for s in (1, -1)
    }
    own_y = {0: 1.0} | {s * (k + 1): r for k, r in enumerate(acf.yy) for s in (1, -1)}

    def g(j):
        return sum(value * own_y.get(k + j, 0.0) for k, value in own_x.items())

    lags = np.array([-3, 0, 7, 30])
    found = lag_correlation(lags, acf)
    assert abs(g(0) - inflation(acf)) < 1e-12
    for i, a in enumerate(lags):
        for j, b in enumerate(lags):
            assert abs(found[i, j] - g(abs(int(a) - int(b))) / g(0)) < 1e-10


def test_equal_input_gives_equal_output():
    x, y = slow_pair(11, 300)
    one, other = (lag_scan(x, y, lags=range(-24, 25)) for _ in range(2))
    assert one.best_p_value == other.best_p_value
    seeds = {window_scan(x, y, window=200, lags=range(-3, 4), seed=s).best_lag for s in (1, 2)}
    assert len(seeds) == 1


def test_intervals_stand_at_lag_zero_and_at_the_strongest_lag():
    x, y = slow_pair(12, 400, lead=2)
    scan = window_scan(x, y, window=380, lags=range(-3, 4))
    assert set(scan.lags[~np.isnan(scan.low)].tolist()) == {0, 2}
    at = scan.lags.tolist().index(2)
    assert scan.low[at] < scan.statistic[at] < scan.high[at]
    assert np.isnan(window_scan(x, y, window=380, lags=range(-3, 4), interval=False).low).all()


def test_a_window_with_too_little_information_has_statistics_but_no_p_values():
    trend = np.arange(120.0)
    noisy = trend + np.random.default_rng(13).normal(size=120) * 5
    scan = window_scan(trend, noisy, window=100, lags=(-1, 0, 1))
    assert not np.isnan(scan.statistic).any()
    assert np.isnan(scan.p_value).all()
    assert all(reason.startswith("not assessable") for reason in scan.reason)
    assert math.isnan(scan.best_p_value)
    assert scan.best_lag == scan.lags[np.argmax(scan.statistic)]


def test_a_constant_window_has_no_best_lag():
    scan = window_scan(np.ones(100), np.arange(100.0), window=80, lags=(0, 1))
    assert np.isnan(scan.statistic).all()
    assert scan.best_lag is None
    assert scan.reason[0] == "the first series is constant over these pairs"


def test_best_of_many_lags_of_unrelated_series_is_called_at_about_the_stated_rate():
    corrected = uncorrected = 0
    for seed in range(300):
        rng = np.random.default_rng(20_000 + seed)
        z = lfilter([1.0], [1.0, -0.7], rng.normal(size=(2, 436)), axis=1)[:, 100:]
        scan = lag_scan(z[0], z[1], lags=range(-12, 13))
        corrected += scan.best_p_value < 0.05
        uncorrected += scan.p_value.min() < 0.05
    assert 0.01 < corrected / 300 < 0.09
    assert uncorrected / 300 > 0.3


def test_limits_of_the_scan_are_refused_in_words():
    x = np.arange(50.0)
    with pytest.raises(ValueError, match=r"min_effective=3 is out of range"):
        window_scan(x, x, window=40, lags=(0,), min_effective=3)
    with pytest.raises(ValueError, match=r"lag 40 reaches beyond"):
        window_scan(x, x, window=40, lags=(40,))


def test_lag_zero_serves_all_lags_even_where_another_lag_has_more_pairs():
    x, y = slow_pair(14, 240)
    x[100:110] = np.nan
    y[102:112] = np.nan
    scan = window_scan(x, y, window=200, lags=(2, 0))
    assert scan.n_pairs[0] > scan.n_pairs[1]
    assert scan.n_effective[1] == rank_correlation_test(x[-200:], y[-200:]).n_effective
    assert abs(scan.n_effective[0] / scan.n_pairs[0] - scan.n_effective[1] / scan.n_pairs[1]) < 1e-12

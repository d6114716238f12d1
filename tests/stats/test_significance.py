"""Effective sample size, p-values and intervals against their definitions."""

import math

import numpy as np
import pytest
from scipy.signal import lfilter
from scipy.stats import kendalltau, spearmanr
from scipy.stats import t as student

from reference import rank_correlation as naive
from rhovane.stats import rank_correlation_test
from rhovane.stats.dependence import autocorrelation, joint_ranks
from rhovane.stats.interval import rank_interval
from rhovane.stats.rank_kernels import dense_ranks, fill_influence


def slow_pair(seed, n=150, rho=0.0, phi=0.8, gaps=0.1, rounding=1):
    rng = np.random.default_rng(seed)
    z = lfilter([1.0], [1.0, -phi], rng.normal(size=(2, n + 100)), axis=1)[:, 100:] * math.sqrt(1 - phi**2)
    x, y = z[0], rho * z[0] + math.sqrt(1 - rho**2) * z[1]
    x, y = np.round(x, rounding), np.round(y, rounding)
    x[rng.random(n) < gaps] = np.nan
    y[20:30] = np.nan
    return x, y


def test_effective_sample_size_equals_its_definition():
    for seed in range(6):
        x, y = slow_pair(seed, rho=0.4)
        found = rank_correlation_test(x, y)
        assert abs(found.n_effective - naive.effective_pairs(x, y)) < 1e-9, f"seed {seed}"
        freedom = found.n_effective - 2
        t = abs(found.statistic) * math.sqrt(freedom / (1 - found.statistic**2))
        assert abs(found.p_value - 2 * student.sf(t, freedom)) < 1e-12


def test_long_series_use_the_same_definition_as_windows():
    x, y = slow_pair(1, n=4096, rho=0.3)
    window = rank_correlation_test(x, y)
    longer = rank_correlation_test(np.append(x, np.nan), np.append(y, np.nan))
    # One empty row more changes nothing but the longest lag.
    assert abs(window.n_effective / longer.n_effective - 1) < 1e-9
    assert abs(window.low - longer.low) < 1e-9


def test_effective_sample_size_lies_between_three_and_the_pairs():
    rng = np.random.default_rng(3)
    trending = np.arange(100.0)
    found = rank_correlation_test(trending, trending + rng.normal(size=100))
    assert 3.0 <= found.n_effective < 10
    assert math.isnan(found.p_value)
    assert found.reason.startswith("not assessable")
    alternating = np.tile([0.0, 1.0], 60) + rng.normal(size=120) * 0.1
    assert rank_correlation_test(alternating, rng.normal(size=120)).n_effective <= 120


def test_influence_equals_the_slope_of_the_weighted_correlation():
    for seed in range(3):
        rng = np.random.default_rng(seed)
        x = rng.integers(0, 7, 40).astype(float)
        y = x + rng.integers(0, 7, 40)
        ranks_x, _ = dense_ranks(x)
        ranks_y, _ = dense_ranks(y)
        ranks = joint_ranks(ranks_x, ranks_y)
        influence = np.zeros(40)
        fill_influence(ranks.x, ranks.y, ranks.joint, 40, ranks.rho, influence)
        expected = np.array(naive.influence_by_difference(x.tolist(), y.tolist()))
        # The kernel centres the influence; with ties the slopes need not sum to nothing by themselves.
        np.testing.assert_allclose(influence, expected - expected.mean(), atol=1e-5)


def test_interval_mirrors_when_one_side_is_turned_over():
    for seed in range(4):
        x, y = slow_pair(seed, rho=0.5)
        plain, turned = rank_correlation_test(x, y), rank_correlation_test(x, -y)
        assert abs(plain.low + turned.high) < 1e-12
        assert abs(plain.high + turned.low) < 1e-12


def test_interval_does_not_depend_on_the_order_of_the_pair_or_the_direction_of_time():
    for seed in range(4):
        x, y = slow_pair(seed, rho=0.5)
        plain = rank_correlation_test(x, y)
        for other in (rank_correlation_test(y, x), rank_correlation_test(x[::-1], y[::-1])):
            assert abs(plain.low - other.low) < 1e-12
            assert abs(plain.p_value - other.p_value) < 1e-15


@pytest.mark.parametrize("method", ["spearman", "kendall"])
def test_interval_holds_the_statistic_and_narrows_with_more_data(method):
    short = rank_correlation_test(*slow_pair(5, n=300, rho=0.5), method=method)
    long = rank_correlation_test(*slow_pair(5, n=3000, rho=0.5), method=method)
    for found in (short, long):
        assert found.low < found.statistic < found.high
        assert found.interval_reason is None
    assert long.high - long.low < 0.6 * (short.high - short.low)


def test_mostly_tied_series_get_a_long_run_interval():
    rng = np.random.default_rng(6)
    rain = np.where(rng.random(400) < 0.8, 0.0, rng.exponential(size=400))
    flow = rain + rng.normal(size=400)
    found = rank_correlation_test(rain, flow)
    assert 0.7 < found.tie_share < 0.9
    assert found.low < found.statistic < found.high
    ranks = joint_ranks(dense_ranks(rain)[0], dense_ranks(flow)[0])
    influence = np.zeros(400)
    fill_influence(ranks.x, ranks.y, ranks.joint, 400, ranks.rho, influence)
    cosines = [math.sqrt(2 / 400) * np.cos(math.pi * k * (np.arange(400) + 0.5) / 400) for k in (1, 2, 3, 4)]
    spread = math.sqrt(np.mean([(c @ influence) ** 2 for c in cosines]) / 400) / (1 - ranks.rho**2)
    half = student.ppf(0.975, 4) * spread
    assert abs(found.low - math.tanh(math.atanh(ranks.rho) - half)) < 1e-10


def test_interval_is_withheld_with_a_reason():
    x, y = slow_pair(2, n=200)
    y[:110] = np.nan
    sparse = rank_correlation_test(x, y)
    assert math.isnan(sparse.low)
    assert "fewer than half" in sparse.interval_reason
    perfect = rank_correlation_test(np.arange(50.0), np.arange(50.0) ** 3)
    assert perfect.statistic == 1.0
    assert math.isnan(perfect.high)
    assert "perfect agreement" in perfect.interval_reason
    trend = np.arange(60.0)
    short = rank_correlation_test(trend, trend + np.random.default_rng(0).normal(size=60) * 9)
    assert "effective pairs" in short.interval_reason


def test_nothing_to_test_is_not_a_number_with_a_reason():
    constant = rank_correlation_test(np.ones(30), np.arange(30.0))
    assert math.isnan(constant.statistic)
    assert math.isnan(constant.p_value)
    assert constant.n_pairs == 30
    assert constant.reason == "the first series is constant over these pairs"
    empty = rank_correlation_test(np.full(30, np.nan), np.arange(30.0))
    assert empty.n_pairs == 0
    assert empty.reason == "too few pairs: 0, at least 2 needed"
    assert math.isnan(empty.tie_share)


def test_lag_pairs_the_leading_series_with_the_later_row():
    x = np.random.default_rng(1).normal(size=100)
    y = np.concatenate((np.zeros(4), x[:-4]))
    found = rank_correlation_test(x, y, lag=4)
    assert found.statistic == 1.0
    assert found.n_pairs == 96
    assert rank_correlation_test(y, x, lag=-4).statistic == 1.0


@pytest.mark.parametrize(("method", "measure"), [("spearman", naive.spearman), ("kendall", naive.kendall)])
def test_short_untied_samples_get_the_exact_permutation_p_value(method, measure):
    rng = np.random.default_rng(11)
    for n in (3, 4, 5, 6, 7):
        a = list(range(n))
        b = [float(v) for v in rng.permutation(n)]
        found = rank_correlation_test(a, b, method=method, adjust="none")
        assert abs(found.p_value - naive.exact_p_value(a, b, measure)) < 1e-14, f"n {n}"


def test_longer_or_tied_independent_samples_agree_with_scipy():
    rng = np.random.default_rng(12)
    for n, values in ((30, 1000), (80, 5), (12, 4)):
        x, y = rng.integers(0, values, n).astype(float), rng.integers(0, values, n).astype(float)
        x[3] = x[4]
        rho = rank_correlation_test(x, y, adjust="none")
        expected = spearmanr(x, y)
        assert abs(rho.statistic - expected.statistic) < 1e-12
        assert abs(rho.p_value - expected.pvalue) < 1e-12
        tau = rank_correlation_test(x, y, method="kendall", adjust="none")
        expected = kendalltau(x, y, method="asymptotic")
        assert abs(tau.statistic - expected.statistic) < 1e-12
        assert abs(tau.p_value - expected.pvalue) < 1e-12
        assert tau.n_effective == n
    untied = rng.permutation(40)
    exact = rank_correlation_test(np.arange(40), untied, method="kendall", adjust="none")
    assert abs(exact.p_value - kendalltau(np.arange(40), untied, method="exact").pvalue) < 1e-12


def test_dependence_widens_p_values_of_both_measures():
    x, y = slow_pair(4, n=400, rho=0.25, phi=0.9)
    for method in ("spearman", "kendall"):
        plain = rank_correlation_test(x, y, method=method, adjust="none")
        adjusted = rank_correlation_test(x, y, method=method)
        assert adjusted.statistic == plain.statistic
        assert adjusted.p_value > 10 * plain.p_value


def test_unknown_adjustment_is_refused():
    with pytest.raises(
        ValueError, match=r"adjust='lag1' is not known; choose \"autocorrelation\" or \"none\""
    ):
        rank_correlation_test(np.arange(20.0), np.arange(20.0), adjust="lag1")


def test_unrelated_slow_series_are_called_at_about_the_stated_rate():
    called = {"spearman": 0, "kendall": 0}
    naive_called = 0
    covered = 0
    for seed in range(400):
        x, y = slow_pair(10_000 + seed, n=336, gaps=0.05)
        for method in called:
            called[method] += rank_correlation_test(x, y, method=method).p_value < 0.05
        found = rank_correlation_test(x, y)
        covered += found.low <= 0.0 <= found.high
        naive_called += rank_correlation_test(x, y, adjust="none").p_value < 0.05
    # 400 windows: standard error 1.1 % at 5 %.
    assert 0.02 < called["spearman"] / 400 < 0.085
    assert 0.02 < called["kendall"] / 400 < 0.085
    assert 0.915 < covered / 400 < 0.985
    assert naive_called / 400 > 0.25


def test_interval_accepts_ranks_computed_before():
    x, y = slow_pair(3, rho=0.4)
    ranks = joint_ranks(dense_ranks(x)[0], dense_ranks(y)[0])
    found = rank_interval(ranks, autocorrelation(ranks), 2.0)
    assert found.low < ranks.rho < found.high


def test_interval_equals_its_definition():
    for seed, rho in enumerate((0.0, 0.6)):
        x, y = slow_pair(50 + seed, n=88, rho=rho, phi=0.5, rounding=0 if seed else 2)
        found = rank_correlation_test(x, y)
        low, high = naive.rotated_rank_interval(x.tolist(), y.tolist(), student.ppf)
        # The definition takes influences by difference quotients, good to five digits.
        assert abs(found.low - low) < 1e-4, f"seed {seed}"
        assert abs(found.high - high) < 1e-4, f"seed {seed}"

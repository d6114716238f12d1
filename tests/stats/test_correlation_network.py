"""Correlations of a whole network, and their significance at little cost."""

import math

import numpy as np
import pytest
from scipy.special import gammaln, stdtr

from reference import rank_correlation as naive
from rhovane.stats import correlate_network, rank_correlation_test, rolling_rank_correlation
from rhovane.stats.narrow import rows_in_32_bits
from rhovane.stats.network_significance import correlation_tail, gamma_ratio, series_autocorrelation
from rhovane.stats.rank_kernels import dense_ranks
from rhovane.stats.sliding_ranks import stretch_of

PAIRS = [(0, 1), (2, 1), (3, 0)]


def network(seed, n=400, n_series=4):
    rng = np.random.default_rng(seed)
    values = np.cumsum(rng.normal(size=(n, n_series)), axis=0) * 0.2 + rng.normal(size=(n, n_series))
    values = values.round(0)
    values[rng.random(values.shape) < 0.08] = np.nan
    values[100:130, 1] = np.nan
    values[200:260, 3] = 4.0
    return values


@pytest.mark.parametrize("method", ["spearman", "kendall"])
def test_every_pair_equals_the_rolling_correlation(method):
    values = network(1)
    found = correlate_network(values, PAIRS, window=40, step=7, lags=(-3, 0, 5), method=method)
    for i, (a, b) in enumerate(PAIRS):
        alone = rolling_rank_correlation(
            values[:, a], values[:, b], window=40, step=7, lags=(-3, 0, 5), method=method
        )
        np.testing.assert_array_equal(found.statistic[i], alone.statistic)
        np.testing.assert_array_equal(found.n_pairs[i], alone.n_pairs)
        np.testing.assert_array_equal(found.end, alone.end)
        assert [found.reason(i, j, 1) for j in range(5)] == [alone.reason(j, 1) for j in range(5)]
    assert found.p_value is None
    assert found.n_effective is None


def test_the_number_of_threads_and_the_order_of_pairs_change_nothing():
    values = network(2)
    one = correlate_network(values, PAIRS, window=40, step=3, lags=(-3, 0), significance=True, threads=1)
    two = correlate_network(
        values, PAIRS[::-1], window=40, step=3, lags=(-3, 0), significance=True, threads=2
    )
    np.testing.assert_array_equal(one.statistic, two.statistic[::-1])
    np.testing.assert_array_equal(one.p_value, two.p_value[::-1])


def test_significance_follows_from_each_series_own_autocorrelation():
    values = network(3, n=150)
    window, step = 60, 13
    found = correlate_network(values, [(0, 1)], window=window, step=step, lags=(0, 2), significance=True)
    for row, end in enumerate(found.end):
        x, y = values[end - window + 1 : end + 1, 0].tolist(), values[end - window + 1 : end + 1, 1].tolist()
        seen_x, seen_y = [v == v for v in x], [v == v for v in y]
        joint = [a and b for a, b in zip(seen_x, seen_y, strict=True)]
        if not sum(joint):
            continue
        u, v = naive.standardised(x, seen_x), naive.standardised(y, seen_y)
        factor = 1.0
        for k in range(1, window // 5 + 1):
            rows = range(window - k)
            counts = [sum(s[t] and s[t + k] for t in rows) for s in (seen_x, seen_y, joint)]
            if min(counts):
                r_x = math.fsum(u[t] * u[t + k] for t in rows) / counts[0]
                r_y = math.fsum(v[t] * v[t + k] for t in rows) / counts[1]
                factor += 2 * counts[2] / sum(joint) * r_x * r_y
        assert abs(found.inflation[0, row] - max(0.2, factor)) < 1e-9, f"row {row}"
        for k in range(2):
            n = int(found.n_pairs[0, row, k])
            effective = min(n, max(3.0, n / max(0.2, factor)))
            assert abs(found.n_effective[0, row, k] - effective) < 1e-9
            rho = found.statistic[0, row, k]
            if math.isnan(rho) or effective < 10:
                assert math.isnan(found.p_value[0, row, k])
            else:
                t = abs(rho) * math.sqrt((effective - 2) / (1 - rho**2))
                assert abs(found.p_value[0, row, k] / (2 * stdtr(effective - 2, -t)) - 1) < 1e-9
    assert np.isfinite(found.p_value).any()


def test_complete_windows_have_the_significance_of_the_single_test():
    rng = np.random.default_rng(4)
    values = rng.normal(size=(300, 2)).cumsum(axis=0) * 0.1 + rng.normal(size=(300, 2))
    found = correlate_network(values, [(0, 1)], window=200, step=50, significance=True)
    for row, end in enumerate(found.end):
        alone = rank_correlation_test(values[end - 199 : end + 1, 0], values[end - 199 : end + 1, 1])
        assert abs(found.n_effective[0, row, 0] - alone.n_effective) < 1e-9
        assert abs(found.p_value[0, row, 0] - alone.p_value) < 1e-11


def test_the_tail_of_a_correlation_equals_students_t():
    for freedom in (2.0, 8.0, 9.7, 21.3, 150.0, 4094.0):
        for rho in (0.0, 1e-6, 0.01, 0.05, 0.17, 0.3, -0.6, 0.95, 0.9999):
            t = abs(rho) * math.sqrt(freedom / (1 - rho * rho))
            expected = 2 * stdtr(freedom, -t)
            if expected > 1e-290:
                assert abs(correlation_tail(rho, freedom) / expected - 1) < 2e-10, (freedom, rho)
    assert correlation_tail(1.0, 100.0) < 1e-200
    assert correlation_tail(0.0, 50.0) == 1.0


def test_ratio_of_gamma_functions():
    for a in (0.5, 1.0, 4.2, 19.99, 20.0, 75.5, 2000.0):
        assert abs(gamma_ratio(a) / math.exp(gammaln(a + 0.5) - gammaln(a)) - 1) < 2e-12


def test_a_stuck_series_has_no_autocorrelation_and_no_significance():
    values = network(5)
    found = correlate_network(values, [(3, 0)], window=40, step=5, significance=True)
    stuck = (found.end >= 239) & (found.end < 260)
    assert stuck.any()
    assert np.isnan(found.p_value[0, stuck]).all()
    side = stretch_of(dense_ranks(np.ones(50))[0], dense_ranks(np.ones(50))[0], 0, 0, 50, 20)
    acf = np.zeros((4, 4))
    series_autocorrelation(side.ranks, side.seen, 20, 10, rows_in_32_bits(20), acf)
    assert np.isnan(acf).all()


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"values": np.zeros(50)}, r"values has shape \(50,\); \(rows, series\) is allowed"),
        ({"pairs": [(0, 2)]}, r"pair \(0, 2\) is not two different columns; columns 0 to 1 are allowed"),
        ({"pairs": [(1, 1)]}, r"pair \(1, 1\) is not two different columns"),
        ({"method": "kendall", "significance": True}, r"significance=True is for method=\"spearman\""),
        ({"threads": 0}, r"threads=0 is out of range"),
    ],
)
def test_mistakes_are_refused(change, message):
    arguments = {"values": np.zeros((50, 2)), "pairs": [(0, 1)], "window": 20} | change
    with pytest.raises(ValueError, match=message):
        correlate_network(arguments.pop("values"), arguments.pop("pairs"), **arguments)

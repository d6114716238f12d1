"""Rolling rank correlation against its definition, and the laws it obeys."""

import math

import numpy as np
import pytest
from scipy.stats import kendalltau, spearmanr

from reference import rank_correlation as naive
from rhovane.stats import rolling_rank_correlation
from rhovane.stats.correlation_table import correlation_table

METHODS = ("spearman", "kendall")


def hard_pair(seed, n=90):
    """Values from 0 to 5 (ties), gaps, a stuck stretch: what goes wrong, made frequent."""
    rng = np.random.default_rng(seed)
    x = rng.integers(0, 6, n).astype(float)
    y = np.where(rng.random(n) < 0.5, x, rng.integers(0, 6, n))
    x[rng.random(n) < rng.uniform(0, 0.4)] = np.nan
    y[rng.random(n) < rng.uniform(0, 0.4)] = np.nan
    start = rng.integers(0, n - 25)
    (x if rng.random() < 0.5 else y)[start : start + 25] = 3.0
    return x, y


@pytest.mark.parametrize("method", METHODS)
def test_every_window_equals_the_definition_on_tied_gappy_stuck_series(method):
    for seed in range(12):
        x, y = hard_pair(seed)
        rng = np.random.default_rng(seed + 1000)
        window, step, fewest = int(rng.integers(8, 30)), int(rng.integers(1, 9)), int(rng.integers(2, 8))
        lags = (-7, -1, 0, 2, 11)
        found = rolling_rank_correlation(
            x, y, window=window, step=step, lags=lags, method=method, min_pairs=fewest
        )
        expected = naive.rolling(x, y, window, step, lags, method, fewest)
        assert found.statistic.shape == (len(expected), len(lags))
        for i, row in enumerate(expected):
            for j, (statistic, n_pairs) in enumerate(row):
                assert found.n_pairs[i, j] == n_pairs, f"seed {seed}"
                assert math.isnan(found.statistic[i, j]) == math.isnan(statistic), f"seed {seed}"
                if not math.isnan(statistic):
                    assert abs(found.statistic[i, j] - statistic) < 1e-12, f"seed {seed}"
                assert (found.reason(i, j) is None) == (not math.isnan(statistic)), f"seed {seed}"


@pytest.mark.parametrize(("method", "measure"), [("spearman", spearmanr), ("kendall", kendalltau)])
def test_windows_equal_scipy_on_long_series(method, measure):
    rng = np.random.default_rng(7)
    x = rng.normal(size=900).cumsum().round(1)
    y = (x + rng.normal(size=900)).round(0)
    x[rng.random(900) < 0.05] = np.nan
    y[300:380] = np.nan
    found = rolling_rank_correlation(x, y, window=400, step=37, lags=(-24, 0, 5), method=method)
    for i, end in enumerate(found.end):
        for j, lag in enumerate(found.lags):
            a, b = naive.pairs_at(x, y, int(end), 400, int(lag))
            assert found.n_pairs[i, j] == len(a)
            if len(a) >= 300:
                assert abs(found.statistic[i, j] - measure(a, b).statistic) < 1e-12
            else:
                assert math.isnan(found.statistic[i, j])
    assert np.isnan(found.statistic).any()


@pytest.mark.parametrize(("method", "measure"), [("spearman", spearmanr), ("kendall", kendalltau)])
@pytest.mark.parametrize("ties", [False, True])
def test_windows_of_the_largest_length_stay_exact(method, measure, ties):
    rng = np.random.default_rng(8)
    x = rng.normal(size=4400)
    y = x + rng.normal(size=4400)
    x[rng.random(4400) < 0.05] = np.nan
    if ties:
        x, y = x.round(), y.round()
    found = rolling_rank_correlation(x, y, window=4096, step=300, lags=(0, 3), method=method)
    for i, end in enumerate(found.end):
        for j, lag in enumerate(found.lags):
            a, b = naive.pairs_at(x, y, int(end), 4096, int(lag))
            assert abs(found.statistic[i, j] - measure(a, b).statistic) < 1e-12


@pytest.mark.parametrize("method", METHODS)
def test_a_strictly_increasing_transform_changes_nothing(method):
    for seed in range(5):
        x, y = hard_pair(seed)
        plain = rolling_rank_correlation(x, y, window=20, lags=(-2, 0, 3), method=method, min_pairs=3)
        bent = rolling_rank_correlation(
            np.exp(x) - 40, y**3, window=20, lags=(-2, 0, 3), method=method, min_pairs=3
        )
        np.testing.assert_array_equal(plain.statistic, bent.statistic)


@pytest.mark.parametrize("method", METHODS)
def test_swapping_the_pair_mirrors_the_lag(method):
    for seed in range(5):
        x, y = hard_pair(seed)
        one = rolling_rank_correlation(x, y, window=20, step=3, lags=(-5, 0, 2), method=method, min_pairs=3)
        other = rolling_rank_correlation(y, x, window=20, step=3, lags=(5, 0, -2), method=method, min_pairs=3)
        np.testing.assert_array_equal(one.statistic, other.statistic)
        np.testing.assert_array_equal(one.n_pairs, other.n_pairs)


@pytest.mark.parametrize("method", METHODS)
def test_appended_rows_change_nothing_before_them(method):
    x, y = hard_pair(3, n=120)
    whole = rolling_rank_correlation(x, y, window=24, step=5, lags=(-3, 0, 4), method=method, min_pairs=4)
    part = rolling_rank_correlation(
        x[:80], y[:80], window=24, step=5, lags=(-3, 0, 4), method=method, min_pairs=4
    )
    n = len(part.end)
    np.testing.assert_array_equal(whole.statistic[:n], part.statistic)
    np.testing.assert_array_equal(whole.n_pairs[:n], part.n_pairs)


@pytest.mark.parametrize("method", METHODS)
def test_missing_rows_count_as_absent_rows_at_lag_zero(method):
    for seed in range(5):
        x, y = hard_pair(seed, n=60)
        keep = ~(np.isnan(x) | np.isnan(y))
        gappy = rolling_rank_correlation(x, y, window=60, method=method, min_pairs=2)
        dense = rolling_rank_correlation(x[keep], y[keep], window=int(keep.sum()), method=method, min_pairs=2)
        np.testing.assert_array_equal(gappy.statistic, dense.statistic)


def test_equal_series_correlate_exactly_one_and_opposite_ones_minus_one():
    x = np.random.default_rng(1).normal(size=500)
    for window in (8, 97, 480):
        assert (rolling_rank_correlation(x, x, window=window).statistic == 1.0).all()
        assert (rolling_rank_correlation(x, -x, window=window).statistic == -1.0).all()


def test_stuck_sensor_has_no_correlation_and_says_why():
    x = np.random.default_rng(2).normal(size=60)
    stuck = np.concatenate((x[:30], np.full(30, 0.1)))
    found = rolling_rank_correlation(x, stuck, window=20)
    assert math.isnan(found.statistic[-1, 0])
    assert found.n_pairs[-1, 0] == 20
    assert found.reason(-1, 0) == "the second series is constant over these pairs"
    assert rolling_rank_correlation(stuck, x, window=20).reason(-1, 0) == (
        "the first series is constant over these pairs"
    )
    # One reading that still moves is enough.
    assert not math.isnan(found.statistic[found.end == 48, 0][0])


def test_too_few_pairs_are_counted_and_named():
    x = np.arange(40.0)
    y = x.copy()
    y[5:20] = np.nan
    found = rolling_rank_correlation(x, y, window=20)
    assert found.min_pairs == 15
    assert found.n_pairs[0, 0] == 5
    assert found.reason(0, 0) == "too few pairs: 5, at least 15 needed"
    assert found.reason(len(found.end) - 1, 0) is None


def test_default_minimum_is_three_quarters_rounded_up():
    for window, fewest in ((8, 6), (9, 7), (10, 8), (672, 504), (720, 540)):
        assert rolling_rank_correlation(np.arange(800.0), np.arange(800.0), window=window).min_pairs == fewest


def test_lagged_pairs_before_the_data_are_missing():
    x = np.random.default_rng(4).normal(size=30)
    found = rolling_rank_correlation(x, np.roll(x, 4), window=20, lags=(4, -4), min_pairs=2)
    assert found.n_pairs[0].tolist() == [16, 16]
    assert found.n_pairs[-1].tolist() == [20, 20]
    assert (found.statistic[:, 0] == 1.0).all()


def test_inputs_are_left_as_they_were():
    x, y = hard_pair(9)
    before = x.copy(), y.copy()
    rolling_rank_correlation(x, y, window=20, lags=(-1, 1))
    np.testing.assert_array_equal(x, before[0])
    np.testing.assert_array_equal(y, before[1])


GOOD = np.arange(50.0)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"x": np.where(GOOD == 7, np.inf, GOOD)}, r"x holds 1 infinite values, the first in row 7"),
        ({"y": np.where(GOOD > 47, -np.inf, GOOD)}, r"y holds 2 infinite values"),
        ({"y": GOOD[:-1]}, r"x has 50 rows and y has 49"),
        ({"x": [], "y": []}, r"x and y have no rows"),
        ({"x": GOOD.reshape(25, 2)}, r"x has 2 dimensions \(shape \(25, 2\)\)"),
        ({"x": np.array(["a"] * 50)}, r"x has type <U1"),
        ({"x": GOOD > 3}, r"x has type bool"),
        ({"x": [None, "b"] * 25}, r"x holds values that are not numbers"),
        ({"x": np.full(50, 2**60)}, r"x holds integers beyond"),
        ({"window": 7}, r"window=7 rows is out of range; choose from 8 to 4096"),
        ({"window": 4097}, r"window=4097 rows is out of range"),
        ({"window": 51}, r"window=51 rows is longer than the data \(50 rows\)"),
        ({"window": 20.5}, r"window=20.5 is not a whole number"),
        ({"window": True}, r"window=True is not a whole number"),
        ({"step": 0}, r"step=0 rows is out of range"),
        ({"min_pairs": 1}, r"min_pairs=1 cannot be met by window=20 rows; choose a value from 2 to 20"),
        ({"min_pairs": 21}, r"min_pairs=21 cannot be met"),
        ({"lags": ()}, r"lags is empty"),
        ({"lags": (50,)}, r"lag 50 reaches beyond the data \(50 rows\); choose lags within ±49"),
        ({"lags": (1, 1)}, r"lags holds a value twice"),
        ({"lags": 3}, r"lags=3 is not a sequence"),
        ({"lags": (0.5,)}, r"a lag=0.5 is not a whole number"),
        ({"method": "pearson"}, r"method='pearson' is not known; choose \"spearman\" or \"kendall\""),
    ],
)
def test_a_mistake_is_refused_with_what_was_found_and_what_to_do(change, message):
    arguments = {"x": GOOD, "y": GOOD, "window": 20} | change
    with pytest.raises(ValueError, match=message):
        rolling_rank_correlation(arguments.pop("x"), arguments.pop("y"), **arguments)


@pytest.mark.parametrize("method", METHODS)
def test_long_lags_strides_beyond_the_window_and_outages_equal_the_definition(method):
    cases = (
        (150, 8, 1, (-140, -70, 0, 149), 2),
        (900, 9, 40, (-600, -257, -256, 0, 256, 257, 513, 514), 2),
        (400, 33, 100, (0, 5), 10),
        (260, 48, 7, tuple(range(-9, 10)), 30),
        (4100, 33, 2000, (0,), 10),
    )
    for seed, (n, window, step, lags, fewest) in enumerate(cases):
        x, y = hard_pair(seed, n=n)
        y[n // 2 : n // 2 + window] = np.nan
        found = rolling_rank_correlation(
            x, y, window=window, step=step, lags=lags, method=method, min_pairs=fewest
        )
        expected = naive.rolling(x, y, window, step, lags, method, fewest)
        statistic = np.array([[cell[0] for cell in row] for row in expected])
        np.testing.assert_array_equal(found.n_pairs, [[cell[1] for cell in row] for row in expected])
        np.testing.assert_allclose(found.statistic, statistic, atol=1e-12, err_msg=f"case {seed}")


@pytest.mark.parametrize("method", METHODS)
def test_the_number_of_threads_changes_nothing(method):
    x, y = hard_pair(21, n=700)
    lags = np.array([-300, -2, 0, 1, 5])
    tables = [
        correlation_table(x, y, lags, 16, 3, 4, method, threads=threads, stretch_rows=rows)
        for threads, rows in ((1, 8192), (2, 8192), (7, 64), (3, 200))
    ]
    for other in tables[1:]:
        np.testing.assert_array_equal(tables[0].statistic, other.statistic)
        np.testing.assert_array_equal(tables[0].n_pairs, other.n_pairs)
        np.testing.assert_array_equal(tables[0].code, other.code)

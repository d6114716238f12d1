"""Every kind of array that an analyst may hold gives the same bits; what cannot be ranked is refused in words."""

import os
import subprocess
import sys

import numpy as np
import pandas as pd
import pytest
from scipy.stats import kendalltau, spearmanr

from reference import rank_correlation as naive
from rhovane.stats import lag_scan, rank_correlation_test, rolling_rank_correlation

METHODS = ("spearman", "kendall")
LAGS = (-2, 0, 3)


def rolled(x, y, method):
    found = rolling_rank_correlation(x, y, window=30, lags=LAGS, method=method, min_pairs=8)
    return found.statistic, found.n_pairs


def significance(x, y, method):
    found = rank_correlation_test(x, y, method=method)
    return found.statistic, found.n_pairs, found.n_effective, found.p_value, found.low, found.high


def scanned(x, y, method):
    found = lag_scan(x, y, lags=LAGS, method=method)
    return found.statistic, found.n_pairs, found.n_effective, found.p_value, found.best_p_value


FUNCTIONS = {"rolling_rank_correlation": rolled, "rank_correlation_test": significance, "lag_scan": scanned}


def read_only(values):
    frozen = values.copy()
    frozen.flags.writeable = False
    return frozen


def strided(values):
    table = np.zeros((len(values), 3), dtype=values.dtype)
    table[:, 1] = values
    return table[:, 1]


# Values are whole numbers up to 49, which every one of these types holds exactly.
KINDS = {
    "float64": np.asarray,
    "float32": lambda v: v.astype(np.float32),
    "float16": lambda v: v.astype(np.float16),
    "int64": lambda v: v.astype(np.int64),
    "int16": lambda v: v.astype(np.int16),
    "uint8": lambda v: v.astype(np.uint8),
    "big-endian": lambda v: v.astype(">f8"),
    "read-only": read_only,
    "strided": strided,
    "strided float32": lambda v: strided(v.astype(np.float32)),
    "backwards": lambda v: v[::-1].copy()[::-1],
    "list": lambda v: v.tolist(),
    "Series": pd.Series,
    "Series of int32": lambda v: pd.Series(v.astype(np.int32)),
    "Series of another index": lambda v: pd.Series(v, index=np.arange(len(v))[::-1]),
    "nullable Series": lambda v: pd.Series(v).astype("Int64"),
    "objects": lambda v: v.astype(object),
    "masked": np.ma.masked_array,
}


def whole_numbers(seed, n=120):
    rng = np.random.default_rng(seed)
    x = rng.integers(0, 50, n).astype(float)
    return x, np.clip(x // 2 + rng.integers(0, 25, n), 0, 49)


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("function", FUNCTIONS.values(), ids=FUNCTIONS)
@pytest.mark.parametrize("kind", KINDS.values(), ids=KINDS)
def test_every_kind_of_array_gives_the_same_bits(kind, function, method):
    x, y = whole_numbers(1)
    expected = function(x, y, method)
    for first, second in ((kind(x), y), (x, kind(y)), (kind(x), kind(y))):
        for found, value in zip(function(first, second, method), expected, strict=True):
            np.testing.assert_array_equal(found, value)


GAPPY = {
    "float32": lambda v: v.astype(np.float32),
    "read-only": read_only,
    "strided": strided,
    "Series": pd.Series,
    "nullable Series": lambda v: pd.Series(v).astype("Float64"),
    "objects with None": lambda v: [None if np.isnan(value) else value for value in v],
    "masked": lambda v: np.ma.masked_array(np.where(np.isnan(v), 7.0, v), mask=np.isnan(v)),
    "masked integers": lambda v: np.ma.masked_array(np.nan_to_num(v).astype(int), mask=np.isnan(v)),
}


@pytest.mark.parametrize("function", FUNCTIONS.values(), ids=FUNCTIONS)
@pytest.mark.parametrize("kind", GAPPY.values(), ids=GAPPY)
def test_every_kind_of_gap_is_an_absent_row(kind, function):
    x, y = whole_numbers(2)
    x[[3, 4, 40, 41, 90]] = np.nan
    expected = function(x, y, "spearman")
    for found, value in zip(function(kind(x), y, "spearman"), expected, strict=True):
        np.testing.assert_array_equal(found, value)


@pytest.mark.parametrize("function", FUNCTIONS.values(), ids=FUNCTIONS)
@pytest.mark.parametrize("infinity", [np.inf, -np.inf, np.float32(np.inf)])
def test_infinite_values_are_refused_with_their_row(infinity, function):
    x, y = whole_numbers(3)
    x[17] = infinity
    message = r"{} holds 1 infinite values, the first in row 17; finite values and NaN are allowed; replace"
    with pytest.raises(ValueError, match=message.format("x")):
        function(x, y, "spearman")
    with pytest.raises(ValueError, match=message.format("y")):
        function(y, pd.Series(x, dtype="float32"), "kendall")


@pytest.mark.parametrize("function", FUNCTIONS.values(), ids=FUNCTIONS)
def test_arguments_are_left_as_they_were(function):
    x, y = whole_numbers(4)
    x[10] = np.nan
    before = x.copy(), y.copy()
    function(x, y, "spearman")
    np.testing.assert_array_equal(x, before[0])
    np.testing.assert_array_equal(y, before[1])


EVERY_NUMBER = """
import numpy as np
from rhovane.stats import lag_scan, rank_correlation_test, rolling_rank_correlation
rng = np.random.default_rng(6)
x, y = rng.normal(size=(2, 3000)).round(1)
y[rng.random(3000) < 0.05] = np.nan
scan = lag_scan(x, y, lags=range(-60, 61))
for method in ("spearman", "kendall"):
    print(rolling_rank_correlation(x, y, window=168, step=24, lags=range(-9, 9), method=method).statistic.tobytes().hex())
print(scan.statistic.tobytes().hex(), scan.p_value.tobytes().hex(), scan.best_p_value.hex())
print(rank_correlation_test(x, y))
"""


def test_the_number_of_threads_changes_no_bit():
    def numbers(threads):
        limits = dict.fromkeys(("NUMBA_NUM_THREADS", "OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"), threads)
        return subprocess.run(
            [sys.executable, "-c", EVERY_NUMBER],
            env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), **limits},
            capture_output=True,
            check=True,
        ).stdout

    one = numbers("1")
    assert one.count(b"\n") == 4
    assert numbers("2") == one


@pytest.mark.parametrize(("method", "measure"), [("spearman", spearmanr), ("kendall", kendalltau)])
def test_ties_gaps_and_constant_stretches_give_what_scipy_gives(method, measure):
    computed = undefined = 0
    for seed in range(10):
        rng = np.random.default_rng(seed)
        n, window = 160, int(rng.integers(8, 60))
        x = rng.integers(0, 6, n).astype(float)
        y = np.where(rng.random(n) < 0.4, x, rng.integers(0, 6, n))
        for side in (x, y):
            side[rng.random(n) < 0.2] = np.nan
            start = int(rng.integers(0, n - 40))
            side[start : start + int(rng.integers(5, 40))] = 2.0
        rolling = rolling_rank_correlation(x, y, window=window, step=3, lags=LAGS, method=method, min_pairs=5)
        cells = [
            (rolling.statistic[i, j], rolling.n_pairs[i, j], naive.pairs_at(x, y, int(end), window, lag))
            for i, end in enumerate(rolling.end)
            for j, lag in enumerate(LAGS)
        ]
        scan = lag_scan(x, y, lags=LAGS, method=method)
        cells += [
            (scan.statistic[j], scan.n_pairs[j], naive.pairs_at(x, y, n - 1, n, lag))
            for j, lag in enumerate(LAGS)
        ]
        alone = rank_correlation_test(x[:window], y[:window], method=method, lag=1)
        cells.append((alone.statistic, alone.n_pairs, naive.pairs_at(x, y, window - 1, window, 1)))
        for statistic, n_pairs, (a, b) in cells:
            assert n_pairs == len(a), f"seed {seed}"
            if len(a) < 5 or len(set(a)) == 1 or len(set(b)) == 1:
                assert np.isnan(statistic), f"seed {seed}"
                undefined += 1
            else:
                assert abs(statistic - measure(a, b).statistic) < 1e-12, f"seed {seed}"
                computed += 1
    assert computed > 500
    assert undefined > 20

"""Looking back for one change of the rank correlation."""

import math

import numpy as np
from scipy.signal import lfilter

from reference import rank_correlation as naive
from rhovane.stats import constancy_test


def pair(seed, n, rho, phi=0.5):
    rng = np.random.default_rng(seed)
    z = lfilter([1.0], [1.0, -phi], rng.normal(size=(2, n + 100)), axis=1)[:, 100:]
    return z[0], rho * z[0] + math.sqrt(1 - rho**2) * z[1]


def changed_pair(seed, n, at, before, after):
    x, y = pair(seed, n, before)
    u, v = pair(seed + 5000, n, after)
    x[at:], y[at:] = u[at:], v[at:]
    return x, y


def test_a_large_change_is_found_at_its_row():
    rows = []
    for seed in range(20):
        x, y = changed_pair(seed, 600, 250, 0.8, 0.0)
        found = constancy_test(x, y)
        assert found.p_value < 0.05, f"seed {seed}"
        assert found.before > found.after
        rows.append(found.row)
    assert abs(np.median(rows) - 249) < 15


def test_both_sides_are_the_correlations_of_their_rows():
    x, y = changed_pair(3, 80, 40, 0.9, -0.5)
    y[10:14] = np.nan
    found = constancy_test(x, y)
    split = found.row + 1
    for side, value in ((slice(0, split), found.before), (slice(split, None), found.after)):
        keep = ~np.isnan(y[side])
        assert abs(value - naive.spearman(x[side][keep].tolist(), y[side][keep].tolist())) < 1e-12


def test_constant_relationships_are_rarely_called():
    called = sum(constancy_test(*pair(seed, 336, 0.5, phi=0.8)).p_value < 0.05 for seed in range(200))
    assert called <= 16


def test_the_row_is_the_later_one_of_the_pair():
    x, y = changed_pair(4, 400, 200, 0.9, -0.9)
    late = np.concatenate((np.zeros(6), y[:-6]))
    plain, lagged = constancy_test(x, y), constancy_test(x, late, lag=6)
    assert lagged.row == plain.row + 6
    assert constancy_test(late, x, lag=-6).row == lagged.row


def test_what_cannot_be_judged_says_why():
    flat = constancy_test(np.ones(50), np.arange(50.0))
    assert flat.reason == "the first series is constant over these pairs"
    assert flat.row is None
    same = constancy_test(np.arange(50.0), np.arange(50.0))
    assert same.reason == "not assessable: perfect agreement of ranks"
    few = constancy_test(np.arange(10.0), np.arange(10.0)[::-1])
    assert few.reason == "too few pairs: 10, at least 16 needed"
    trend = np.arange(60.0)
    slow = constancy_test(trend, trend + np.random.default_rng(1).normal(size=60) * 9)
    assert slow.reason.startswith("not assessable")
    assert math.isnan(slow.p_value)
    assert slow.row is not None

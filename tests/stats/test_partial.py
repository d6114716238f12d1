"""Partial rank correlation."""

import math

import numpy as np
import pytest

from reference import rank_correlation as naive
from rhovane.stats import partial_window, window_scan


def driven_pair(seed, n=200):
    """Two series that share nothing but a common driver."""
    rng = np.random.default_rng(seed)
    driver = rng.normal(size=n)
    return driver + rng.normal(size=n), driver + rng.normal(size=n), driver


def test_one_control_equals_the_formula_of_three_correlations():
    for seed in range(4):
        x, y, z = (side.round(0) for side in driven_pair(seed, 60))
        x[3:6] = np.nan
        z[50] = np.nan
        keep = ~(np.isnan(x) | np.isnan(y) | np.isnan(z))
        a, b, c = x[keep].tolist(), y[keep].tolist(), z[keep].tolist()
        expected = naive.partial_of_three(naive.spearman(a, b), naive.spearman(a, c), naive.spearman(b, c))
        found = partial_window(x, y, z[:, None], window=60)
        assert abs(found.statistic[0] - expected) < 1e-12, f"seed {seed}"
        assert found.n_pairs[0] == len(a)


def test_a_common_driver_is_taken_out():
    covered = 0
    for seed in range(40):
        x, y, z = driven_pair(seed, 400)
        assert window_scan(x, y, window=400, lags=(0,)).p_value[0] < 1e-6
        found = partial_window(x, y, z[:, None], window=400)
        assert abs(found.statistic[0]) < 0.2
        covered += found.low[0] < 0 < found.high[0]
    assert 34 <= covered <= 40


def test_two_controls_take_two_degrees_of_freedom():
    x, y, z = driven_pair(2)
    other = np.random.default_rng(3).normal(size=200)
    one = partial_window(x, y, z[:, None], window=200)
    two = partial_window(x, y, np.column_stack((z, other)), window=200)
    twice = partial_window(x, y, np.column_stack((z, z)), window=200)
    assert one.n_effective[0] <= 199
    assert two.n_effective[0] <= 198
    # A control given twice explains nothing more and costs nothing more.
    assert abs(twice.statistic[0] - one.statistic[0]) < 1e-9
    assert abs(twice.n_effective[0] - one.n_effective[0]) < 1e-6


def test_the_control_belongs_to_the_later_row_and_lags_follow_the_rule():
    x, _, z = driven_pair(4, 300)
    late = np.concatenate((np.zeros(3), x[:-3])) + np.random.default_rng(5).normal(size=300) * 0.3
    found = partial_window(x, late, z[:, None], window=250, lags=range(-4, 5))
    assert found.best_lag == 3
    assert found.best_p_value < 0.001
    mirrored = partial_window(late, x, z[:, None], window=250, lags=range(-4, 5))
    np.testing.assert_allclose(found.statistic, mirrored.statistic[::-1], atol=1e-12)


def test_a_control_that_is_a_member_in_disguise_is_refused():
    x, y, z = driven_pair(6)
    for index, member in enumerate((x, y)):
        with pytest.raises(ValueError, match=rf"controls\[:, 1\] is nearly the same as {'xy'[index]}"):
            partial_window(x, y, np.column_stack((z, -np.exp(member))), window=200)


def test_what_cannot_be_computed_says_why():
    x, y, z = driven_pair(7)
    constant = partial_window(np.ones(200), y, z[:, None], window=200)
    assert constant.reason == ("the first series is constant over these pairs",)
    assert constant.best_lag is None
    z[:100] = np.nan
    few = partial_window(x, y, z[:, None], window=200)
    assert few.reason == ("too few pairs: 100, at least 150 needed",)


def test_a_series_that_the_controls_explain_fully_has_no_partial_correlation():
    rng = np.random.default_rng(10)
    steps = np.tile([0.0, 1.0, 2.0], 40)
    low, high = (steps == 0).astype(float), (steps == 2).astype(float)
    found = partial_window(steps, rng.normal(size=120), np.column_stack((low, high)), window=120)
    assert found.reason == ("the first series is fully explained by the controls",)
    assert math.isnan(found.statistic[0])


def test_controls_of_the_wrong_shape_are_refused():
    x, y, z = driven_pair(11)
    for wrong in (z, z[:100, None], np.empty((200, 0))):
        with pytest.raises(ValueError, match=r"controls has shape"):
            partial_window(x, y, wrong, window=100)

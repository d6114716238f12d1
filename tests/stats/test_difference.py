"""Differences of estimates, with intervals recovered from their own."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.signal import lfilter

from rhovane.stats import rank_correlation_test
from rhovane.stats.difference import Estimate, correlation_change, difference, not_assessable

bounded = st.tuples(st.floats(-3, 3), st.floats(0, 2), st.floats(0, 2)).map(
    lambda t: Estimate(t[0], t[0] - t[1], t[0] + t[2])
)


@given(bounded, bounded)
def test_swapping_the_sides_mirrors_difference_and_interval(one: Estimate, other: Estimate):
    there, back = difference(one, other), difference(other, one)
    assert there.value == pytest.approx(-back.value)
    assert (there.low, there.high) == pytest.approx((-back.high, -back.low))
    assert there.low <= there.value <= there.high


@given(bounded)
def test_a_value_known_exactly_adds_no_width(one: Estimate):
    found = difference(one, Estimate(1.0, 1.0, 1.0))
    assert (found.low, found.high) == pytest.approx((one.low - 1.0, one.high - 1.0))


def test_zou_2007_worked_example():
    """Zou (2007), example of two independent correlations: r .49 (n 145) and .36 (n 87); difference .13, 95 % -.09 to .36.

    Cited from memory; the bounds follow from Fisher's intervals of the two by the published formula.
    """

    def fisher(r: float, n: int) -> Estimate:
        reach = 1.959964 / np.sqrt(n - 3)
        return Estimate(r, float(np.tanh(np.arctanh(r) - reach)), float(np.tanh(np.arctanh(r) + reach)))

    found = difference(fisher(0.49, 145), fisher(0.36, 87))
    assert found.value == pytest.approx(0.13)
    assert (found.low, found.high) == pytest.approx((-0.09, 0.36), abs=0.006)


def test_what_is_not_assessable_on_one_side_is_not_assessable_in_the_difference():
    known = Estimate(0.5, 0.2, 0.7)
    found = correlation_change(known, not_assessable(0.1, "too few hours"))
    assert found.reason == "too few hours"
    assert found.value == pytest.approx(np.arctanh(0.5) - np.arctanh(0.1))
    assert np.isnan(found.low)
    assert "perfect agreement" in (correlation_change(known, Estimate(1.0, 1.0, 1.0)).reason or "")


def test_the_change_of_dependent_series_is_covered_at_about_its_level():
    """AR(1) .7, 336 hours before and after, rho about .7 to .4; 95 % nominal."""
    rng = np.random.default_rng(8)

    def estimate(r: float, n: int = 336) -> Estimate:
        x = lfilter([np.sqrt(0.51)], [1.0, -0.7], rng.normal(size=(2, n + 50)))[:, 50:]
        found = rank_correlation_test(x[0], r * x[0] + np.sqrt(1 - r * r) * x[1])
        return Estimate(found.statistic, found.low, found.high, found.interval_reason)

    def rank(r: float) -> float:  # Spearman's rho of normal pairs (Pearson 1907)
        return float(np.arctanh(6 / np.pi * np.arcsin(r / 2)))

    truth, n = rank(0.4) - rank(0.7), 150
    changes = [correlation_change(estimate(0.4), estimate(0.7)) for _ in range(n)]
    assert 0.90 <= sum(c.low <= truth <= c.high for c in changes) / n <= 0.99

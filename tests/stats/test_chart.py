"""The change chart's parts against their definitions, and its thresholds against fresh simulation."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import ndtri
from scipy.stats import t

from reference.naive_monitor import naive_evidence, naive_reference, naive_scale
from rhovane.stats.budget import RATES, TWO_SIDED, threshold
from rhovane.stats.chart import (
    MAX_DEVIATION,
    evidence,
    extend_products,
    gather,
    normal_from_t,
    reference,
    running_sums,
    scale_from,
    scale_sums,
)


def gappy_days(seed: int, n: int = 260) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    score = 0.4 + 0.2 * rng.normal(size=n)
    score[rng.random(n) < 0.15] = np.nan
    return score, rng.integers(6, 23, n).astype(float)


def test_reference_equals_its_definition() -> None:
    score, weight = gappy_days(1)
    sums, day_of = np.zeros((261, 3)), np.zeros(260, dtype=np.int64)
    n_usable = running_sums(score, weight, np.ones(260, dtype=bool), sums, day_of)
    assert n_usable == np.isfinite(score).sum()
    for day in range(260):
        before = int((day_of[:n_usable] < day - 14).sum())
        np.testing.assert_allclose(
            reference(sums, before, 90), naive_reference(score, weight, day), rtol=1e-9
        )


def test_scale_equals_its_definition() -> None:
    rng = np.random.default_rng(2)
    z = rng.normal(size=(3, 300))
    z[rng.random(z.shape) < 0.2] = np.nan
    z[1] *= 1.6
    products, own = np.zeros((3, 2, 4, 301)), np.zeros((3, 2, 4))
    for p in range(3):
        extend_products(z[p], 0, 300, products[p])
    for day in (20, 120, 299):
        for p in range(3):
            scale_sums(products[p], day, 14, own[p])
        history = [z[p, max(0, day - 200) : day - 14] for p in range(3)]
        for p in range(3):
            assert math.isclose(scale_from(own[p], own.sum(axis=0)), naive_scale(history, p), rel_tol=1e-9)


@pytest.mark.parametrize("mean", [0.8, -0.8, 0.02])
def test_evidence_equals_the_sum_over_possible_beginnings(mean: float) -> None:
    z = np.clip(np.random.default_rng(3).normal(-0.5, 1, 25), -MAX_DEVIATION, MAX_DEVIATION)
    statistic, got = np.zeros((2, 3)), []
    for value in z:
        gather(statistic, value)
        got.append(evidence(statistic, mean))
    np.testing.assert_allclose(got, naive_evidence(z, mean), rtol=1e-9)


def test_normal_from_t_keeps_the_tail_probability() -> None:
    for df in (19, 40, 89):
        for value in np.linspace(-6, 6, 41):
            assert abs(normal_from_t(value, df) - ndtri(t.cdf(value, df))) < 0.004, (df, value)


def test_threshold_falls_with_the_rate_and_meets_the_table() -> None:
    rates = np.geomspace(1e-4, 50, 60)
    values = [threshold(r) for r in rates]
    assert (np.diff(values) <= 0).all()
    assert all(threshold(r) == pytest.approx(v) for r, v in zip(RATES, TWO_SIDED[90], strict=True))
    assert threshold(0.1, baseline_days=45) > threshold(0.1, baseline_days=60)
    assert threshold(1e-4) == pytest.approx(threshold(1e-3) + math.log(10), abs=0.2)


@pytest.mark.parametrize(("rate", "baseline"), [(0.0, 90), (-1.0, 90), (math.nan, 90), (0.1, 20)])
def test_a_mistaken_budget_is_refused(rate: float, baseline: int) -> None:
    with pytest.raises(ValueError, match="false_alarms_per_year=|baseline_days="):
        threshold(rate, baseline_days=baseline)

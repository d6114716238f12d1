"""The change chart's parts against their definitions, and its thresholds against fresh simulation."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import ndtri
from scipy.stats import t

from reference.naive_monitor import naive_evidence, naive_scale
from rhovane.stats.budget import RATES, TWO_SIDED, threshold
from rhovane.stats.chart import (
    MAX_DEVIATION,
    SHIFTS,
    evidence,
    gather,
    normal_from_t,
    scales,
)


def test_scale_equals_its_definition() -> None:
    rng = np.random.default_rng(2)
    z = rng.normal(size=(3, 300))
    z[:, 1:] += 0.4 * z[:, :-1]
    z[rng.random(z.shape) < 0.2] = np.nan
    z[1] *= 1.6
    for day in (20, 120, 299):
        starts = [max(0, day - 200, min(f, day - 14 - 90)) for f in (0, 60, 130)]
        history = [z[p, starts[p] : max(0, day - 14)] for p in range(3)]
        known = np.isfinite(z).astype(float)
        first = np.array([0, 60, 130])
        judged = [z[p, max(0, day - 200, first[p]) : max(0, day - 14)] for p in range(3)]
        expected = [naive_scale(history, p, judged) for p in range(3)]
        got = scales(np.nan_to_num(z), known, np.zeros((0, 0), dtype=bool), first, day, 14)
        np.testing.assert_allclose(got, expected, rtol=1e-9)
        # Days that are barred are as if they were not known.
        other = np.where(np.isnan(z), 7.0, z)
        got = scales(other, np.ones(z.shape), np.isnan(z), first, day, 14)
        np.testing.assert_allclose(got, expected, rtol=1e-9)


@pytest.mark.parametrize("mean", [0.8, -0.8, 0.02])
def test_evidence_equals_the_sum_over_possible_beginnings(mean: float) -> None:
    z = np.clip(np.random.default_rng(3).normal(-0.5, 1, 25), -MAX_DEVIATION, MAX_DEVIATION)
    statistic, got = np.zeros((2, 3)), []
    for value in z:
        gather(statistic, value, SHIFTS)
        got.append(evidence(statistic, mean))
    np.testing.assert_allclose(got, naive_evidence(z, mean), rtol=1e-9)


def test_normal_from_t_keeps_the_tail_probability() -> None:
    for df in (19, 40, 89):
        for value in np.linspace(-6, 6, 41):
            assert abs(normal_from_t(value, df) - ndtri(t.cdf(value, df))) < 0.005, (df, value)


def test_threshold_falls_with_the_rate_and_meets_the_table() -> None:
    rates = np.geomspace(1e-4, 50, 60)
    values = [threshold(r) for r in rates]
    assert (np.diff(values) <= 0).all()
    assert all(threshold(r) == pytest.approx(v) for r, v in zip(RATES, TWO_SIDED[90], strict=True))
    assert threshold(0.1, baseline_days=45) > threshold(0.1, baseline_days=60)
    assert threshold(1e-4) == pytest.approx(threshold(1e-3) + math.log(10), abs=0.2)


@pytest.mark.parametrize(("rate", "baseline"), [(0.0, 90), (-1.0, 90), (math.nan, 90), (0.1, 20)])
def test_a_mistaken_budget_is_refused(rate: float, baseline: int) -> None:
    with pytest.raises(ValueError, match=r"must be a number|is too few"):
        threshold(rate, baseline_days=baseline)

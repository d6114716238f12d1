"""The days on which a change may have begun."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reference.naive_sheet import onset_weights, shortest_run
from rhovane.stats.chart import SHIFTS, evidence, gather
from rhovane.stats.incident import onset_day
from rhovane.stats.onset import onset_probability, onset_range

deviation = st.one_of(st.floats(-3.5, 3.5).map(lambda v: round(v, 1)), st.just(float("nan")))


@given(st.lists(deviation, min_size=1, max_size=60), st.integers(0, 10))
@settings(deadline=None)
def test_probabilities_and_range_follow_their_definition(z, first):
    values, day = np.array(z), len(z) - 1
    first = min(first, day)
    expected = onset_weights(z, day, first)
    np.testing.assert_allclose(onset_probability(values, day, first), expected, atol=1e-12)
    begin, end = onset_range(values, day, first)
    assert max(first, day - 41) <= begin <= end <= day
    assert end - begin + 1 == shortest_run(expected, 0.9)


@given(st.lists(st.floats(-3.5, 3.5), min_size=2, max_size=60))
@settings(deadline=None)
def test_the_likeliest_day_is_the_onset_that_is_reported(z):
    values, day = np.array(z), len(z) - 1
    probability = onset_probability(values, day, 0)
    at = onset_day(values, day, 0) - (day - len(probability) + 1)
    assert probability[at] == pytest.approx(probability.max())


def test_days_before_those_considered_change_nothing():
    z = np.random.default_rng(1).normal(size=100)
    other = z.copy()
    other[:50] += 3.0
    assert onset_range(z, 99, 0) == onset_range(other, 99, 0)


def alarm_and_range(
    rng: np.random.Generator, shift: float, change: int
) -> tuple[int, tuple[int, int]] | None:
    z = rng.normal(size=change + 42)
    z[change:] -= shift
    z = np.clip(z, -3.5, 3.5)
    statistic = np.zeros((2, len(SHIFTS)))
    for day in range(len(z)):
        gather(statistic, z[day], SHIFTS)
        if evidence(statistic, 1.0) > 8.0:
            return (day, onset_range(z, day, 0)) if day >= change else None
    return None


@pytest.mark.parametrize(("shift", "least", "widest"), [(1.5, 0.9, 8), (2.5, 0.93, 4), (3.5, 0.95, 3)])
def test_the_range_holds_the_onset_of_simulated_changes(shift: float, least: float, widest: int):
    """Seen from the alarm of a chart with threshold 8. 1,500 changes gave 94 / 97 / 98 % (shifts of 1.5, 2.5, 3.5 sd) with
    median widths of 6, 2 and 1 days; 88 % at 1 sd and 54 % at .75 sd, where many alarms come after 42 days."""
    rng = np.random.default_rng(int(10 * shift))
    found = [one for _ in range(300) if (one := alarm_and_range(rng, shift, 60)) is not None]
    assert len(found) > 280
    assert sum(begin <= 60 <= end for _, (begin, end) in found) / len(found) >= least
    assert np.median([end - begin + 1 for _, (begin, end) in found]) <= widest

"""Stretches with something wrong in the data, against naive twins; laws of units and of appended rows."""

from __future__ import annotations

import numpy as np
import pytest

from reference.naive_data_faults import naive_dry, naive_gaps, naive_low_coverage, naive_stuck, naive_ties
from rhovane.stats import data_faults as faults

SEEDS = range(6)


def frequent_faults(rng: np.random.Generator, n: int) -> np.ndarray:
    """Values 0 to 5 with gaps and constant stretches made frequent."""
    values = rng.integers(0, 6, n).astype(float)
    for _ in range(n // 30):
        start, length = rng.integers(n), rng.integers(1, 40)
        values[start : start + length] = rng.choice([np.nan, 0.0, 2.0])
    return values


def pairs(runs: faults.Runs, column: int = 0) -> list[tuple[int, int]]:
    mine = runs.series == column
    return list(zip(runs.begin[mine].tolist(), runs.end[mine].tolist(), strict=True))


@pytest.mark.parametrize("seed", SEEDS)
def test_gaps_are_those_of_the_definition(seed: int):
    rng = np.random.default_rng(seed)
    values = np.column_stack([frequent_faults(rng, 600), frequent_faults(rng, 600)])
    first = np.array([-5, 40])
    runs = faults.gap_runs(np.isfinite(values), first, 6)
    for column in (0, 1):
        expected = naive_gaps(values[:, column].tolist(), int(first[column]), 6)
        assert expected
        assert pairs(runs, column) == expected


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("accumulates", [False, True])
def test_stuck_values_are_those_of_the_definition(seed: int, accumulates: bool):
    rng = np.random.default_rng(seed)
    values = frequent_faults(rng, 1500)
    values[900:930] = 4.0
    runs = faults.stuck_runs(values[:, None], np.array([accumulates]), 12)
    expected = naive_stuck(values.tolist(), accumulates, 12)
    assert any(a <= 900 and b >= 929 for a, b in expected)
    assert pairs(runs) == expected
    np.testing.assert_array_equal(runs.measure, values[runs.begin])


def test_a_series_that_often_repeats_its_value_needs_a_longer_run():
    rng = np.random.default_rng(1)
    often = np.repeat(rng.integers(0, 50, 200), 5).astype(float)  # four repeats in five hours
    seldom = rng.normal(size=1000)
    for values in (often, seldom):
        values[800:840] = 7.0
    runs = faults.stuck_runs(np.column_stack([often, seldom]), np.zeros(2, dtype=bool), 24)
    assert runs.series.tolist() == [1]


def test_a_night_without_sun_is_not_stuck_but_a_dead_sensor_is():
    hour = np.arange(24 * 60)
    sun = np.maximum(0, np.sin(2 * np.pi * (hour - 10) / 24) - 0.5) * (1 + 0.1 * np.sin(hour))
    assert len(faults.stuck_runs(sun[:, None], np.array([False]), 24).begin) == 0
    sun[24 * 50 :] = 0.0
    assert len(faults.stuck_runs(sun[:, None], np.array([False]), 24).begin) == 1


@pytest.mark.parametrize("seed", SEEDS)
def test_low_coverage_is_that_of_the_definition(seed: int):
    rng = np.random.default_rng(seed)
    per_day = rng.choice([0, 24, 20], size=(90, 2), p=[0.3, 0.4, 0.3])
    first_day = np.array([-3, 10])
    runs = faults.low_coverage_runs(per_day, first_day, 7, 0.6)
    for column in (0, 1):
        expected = naive_low_coverage(per_day[:, column].tolist(), int(first_day[column]), 7, 0.6)
        assert expected
        assert pairs(runs, column) == expected


@pytest.mark.parametrize("seed", SEEDS)
def test_dry_gauges_are_those_of_the_definition(seed: int):
    rng = np.random.default_rng(seed)
    other = np.where(rng.random(2500) < 0.03, 1.0, 0.0)
    gauge = np.where((other > 0) & (rng.random(2500) < 0.4), 0.4, 0.0)
    gauge[rng.random(2500) < 0.05] = np.nan
    gauge[1000:1600] = 0.0
    runs = faults.dry_runs(gauge, other[:, None], 5)
    expected = naive_dry(gauge.tolist(), other.tolist(), 5)
    assert expected
    assert pairs(runs) == expected


@pytest.mark.parametrize("seed", SEEDS)
def test_ties_of_a_week_are_those_of_the_definition(seed: int):
    rng = np.random.default_rng(seed)
    values = np.column_stack([frequent_faults(rng, 336), np.round(rng.normal(size=336), 1)])
    values[:100, 1] = np.nan
    found = faults.weekly_ties(values)
    for week in (0, 1):
        for column in (0, 1):
            expected = naive_ties(values[168 * week : 168 * week + 168, column].tolist())
            np.testing.assert_allclose(found[week, column], expected, rtol=1e-12)
    assert np.isnan(found[0, 1])


def test_a_coarser_resolution_is_found_in_its_first_whole_week_and_once():
    values = np.round(np.random.default_rng(3).normal(20, 5, (168 * 12, 1)), 1)
    values[168 * 8 :] = np.round(values[168 * 8 :])
    week, series, before = faults.ties_raised(faults.weekly_ties(values))
    assert (week.tolist(), series.tolist()) == ([8], [0])
    assert before[0] < 0.02


def all_findings(values: np.ndarray) -> list[object]:
    n = values.shape[1]
    runs = [
        faults.gap_runs(np.isfinite(values), np.zeros(n, dtype=np.int64), 6),
        faults.stuck_runs(values, np.zeros(n, dtype=bool), 12),
        faults.dry_runs(values[:, 0], values[:, 1:], 5),
    ]
    week, series, _ = faults.ties_raised(faults.weekly_ties(values[: len(values) // 168 * 168]))
    return [(pairs(r, c)) for r in runs for c in range(n)] + [week.tolist(), series.tolist()]


def test_a_change_of_unit_leaves_all_times_alone():
    rng = np.random.default_rng(5)
    values = np.column_stack([frequent_faults(rng, 168 * 10), frequent_faults(rng, 168 * 10)])
    assert all_findings(values) == all_findings(4.0 * values)
    assert any(all_findings(values))


def test_appended_rows_change_nothing_that_was_over_before():
    rng = np.random.default_rng(6)
    values = np.column_stack([frequent_faults(rng, 2000), frequent_faults(rng, 2000)])
    short, long = (faults.stuck_runs(v, np.zeros(2, dtype=bool), 12) for v in (values[:1400], values))
    over = [p for c in (0, 1) for p in pairs(short, c) if p[1] < 1399]
    assert over
    assert over == [p for c in (0, 1) for p in pairs(long, c) if p[1] < 1399]

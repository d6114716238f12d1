"""Quality checks: each flag from its definition, and no flag depends on what comes after its day."""

from __future__ import annotations

import numpy as np

from rhovane.stats import series_checks as checks

NAN = float("nan")


def flags(found: np.ndarray) -> list[int]:
    return found.tolist()


def test_gap_fails_once_it_has_lasted_too_long():
    values = np.array([1.0, NAN, NAN, NAN, 2.0, NAN])
    assert flags(checks.gap_check(values, longest_hours=2)) == [1, 9, 9, 4, 1, 9]


def test_gross_range_fails_outside_and_suspects_near_the_edge():
    values = np.array([-11.0, -5.0, 0.0, 50.0, 401.0, NAN])
    found = checks.gross_range_check(values, low=-10, high=400, suspect_low=-4, suspect_high=40)
    assert flags(found) == [4, 3, 1, 3, 4, 9]
    assert flags(checks.gross_range_check(values, high=400)) == [1, 1, 1, 1, 4, 9]


def test_rate_of_change_looks_at_the_hour_before():
    values = np.array([1.0, 4.0, NAN, 4.0, 20.0])
    assert flags(checks.rate_of_change_check(values, suspect=2, fail=10)) == [2, 3, 9, 2, 4]


def test_spike_looks_at_both_sides_but_not_past_the_day():
    values = np.zeros(48)
    values[[5, 23, 30]] = (6.0, 6.0, 30.0)
    values[40] = NAN
    found = checks.spike_check(values, suspect=5, fail=20)
    assert (found[5], found[23], found[30], found[40]) == (3, 2, 4, 9)
    assert (found[0], found[39], found[41], found[47]) == (2, 2, 2, 2)
    assert (found[4], found[29]) == (1, 3)  # the spike moves the mean of its neighbours by half of itself


def test_flat_line_counts_the_hours_up_to_now():
    values = np.array([5.0, 5.0, 5.04, 5.0, 5.0, 6.0, NAN, 6.0])
    found = checks.flat_line_check(values, suspect_hours=2, fail_hours=4, resolution=0.05)
    assert flags(found) == [1, 1, 3, 3, 4, 1, 9, 1]
    assert flags(checks.flat_line_check(values, suspect_hours=2)) == [1, 1, 1, 1, 1, 1, 9, 1]


def test_climatology_knows_the_hour_of_the_day():
    rng = np.random.default_rng(2)
    hour = np.arange(24 * 40) % 24
    values = 10 + 8.0 * (hour >= 12) + rng.normal(0, 0.5, len(hour))
    values[24 * 30 + 3] = 18.0  # usual at noon, not at three
    found = checks.climatology_check(values, suspect=8, fail=40)
    assert found[24 * 30 + 3] == 3
    assert (found[24 * 30 :] == 3).sum() == 1
    assert set(flags(found[: 24 * 20])) == {2}


def test_neighbour_knows_the_usual_difference():
    rng = np.random.default_rng(3)
    neighbour = np.cumsum(rng.normal(0, 3, 24 * 40))
    values = neighbour + 7 + rng.normal(0, 1, len(neighbour))
    values[24 * 35 + 5] += 30
    neighbour[24 * 36] = NAN
    found = checks.neighbour_check(values, neighbour, suspect=10, fail=100)
    assert found[24 * 35 + 5] == 3
    assert found[24 * 36] == 2
    assert (found == 3).sum() == 1


def test_the_worse_flag_counts_and_not_evaluated_says_nothing():
    one = np.array([1, 1, 2, 2, 3, 4, 9], dtype=np.int8)
    other = np.array([2, 3, 1, 4, 1, 3, 1], dtype=np.int8)
    assert flags(checks.worse_flag(one, other)) == [1, 3, 1, 4, 3, 4, 9]
    assert flags(checks.worse_flag(other, one)) == [1, 3, 1, 4, 3, 4, 9]


def test_appended_days_change_no_flag_and_no_value():
    rng = np.random.default_rng(4)
    values = np.round(rng.gamma(2, 5, 24 * 90))
    values[rng.random(len(values)) < 0.1] = NAN
    neighbour = values + rng.normal(size=len(values))
    before = values.copy()

    def every_flag(n: int) -> list[np.ndarray]:
        x, y = values[:n], neighbour[:n]
        return [
            checks.gap_check(x, longest_hours=1),
            checks.gross_range_check(x, low=1, high=30),
            checks.rate_of_change_check(x, suspect=10, fail=20),
            checks.spike_check(x, suspect=10, fail=20),
            checks.flat_line_check(x, suspect_hours=2, fail_hours=3),
            checks.climatology_check(x, suspect=2, fail=4),
            checks.neighbour_check(x, y, suspect=2, fail=4),
        ]

    for short, long in zip(every_flag(24 * 70), every_flag(24 * 90), strict=True):
        np.testing.assert_array_equal(short, long[: 24 * 70])
        assert len(set(flags(short))) > 2
    np.testing.assert_array_equal(values, before)


def test_a_flag_depends_on_the_look_back_alone():
    rng = np.random.default_rng(5)
    values = rng.gamma(2, 5, 24 * 100)
    whole = checks.climatology_check(values, suspect=2, fail=4)
    part = checks.climatology_check(values[24 * 30 :], suspect=2, fail=4)
    np.testing.assert_array_equal(whole[-24 * 10 :], part[-24 * 10 :])

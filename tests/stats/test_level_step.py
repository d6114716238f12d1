"""Steps in level: against a naive twin, laws, and what a unit, a zero and the weather do."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reference.naive_data_faults import naive_step
from rhovane.stats import level_step as steps
from rhovane.stats.unit_switch import keeps_course, matching_offset, matching_unit, shifted_zero
from rhovane_demo.world import make_world

N_DAYS = 120
GROUP = [(0, 1, 2, 3)]
RATIO = [True] * 4


def network(seed: int, n_days: int = N_DAYS) -> np.ndarray:
    """Hourly concentrations of four stations under common weather, shape (24 n_days, 4)."""
    rng = np.random.default_rng(seed)
    weather = np.repeat(np.cumsum(rng.normal(0, 0.15, n_days)), 24) + rng.normal(0, 0.4, 24 * n_days)
    own = rng.normal(0, 0.3, (24 * n_days, 4)) + np.repeat(rng.normal(0, 0.06, (n_days, 4)), 24, axis=0)
    return np.round(np.array([40, 25, 12, 6]) * np.exp(weather[:, None] + own), 1)


def found(values: np.ndarray, **options) -> list[tuple[int, int]]:
    result = steps.level_steps(steps.daily_levels(values), GROUP, RATIO, **options)
    return list(zip(result.day.tolist(), result.series.tolist(), strict=True))


@pytest.mark.parametrize("seed", range(4))
def test_size_and_strength_are_those_of_the_definition(seed: int):
    values = network(seed)
    values[np.random.default_rng(seed).random(values.shape) < 0.2] = np.nan
    values[24 * 70 :, 1] *= 1.9
    values[24 * 60 : 24 * 62, 1] = np.nan
    levels = steps.daily_levels(values)
    for day in range(28, N_DAYS - 7):
        table = steps.judge_steps(levels, GROUP, RATIO, strength=0.0, days=range(day, day + 1))
        for column in range(4):
            expected = naive_step(levels.T.tolist(), column, day)
            if not math.isnan(table.size[0, column]):
                np.testing.assert_allclose(
                    (table.size[0, column], table.strength[0, column]), expected, rtol=1e-9
                )
    assert np.isfinite(steps.judge_steps(levels, GROUP, RATIO, strength=2.5, days=range(70, 71)).size[0, 1])


def test_the_level_of_a_day_is_the_median_of_its_observations():
    values = network(3)
    values[24 * 5 : 24 * 5 + 12, 0] = np.nan
    values[24 * 6 : 24 * 6 + 13, 0] = np.nan
    levels = steps.daily_levels(values)
    np.testing.assert_allclose(levels[:5, 2], np.median(values[: 24 * 5, 2].reshape(5, 24), axis=1))
    assert levels[5, 0] == np.median(values[24 * 5 + 12 : 24 * 6, 0])
    assert np.isnan(levels[6, 0])


def test_a_unit_switch_is_found_and_dated_and_nothing_else_is():
    dated = []
    for seed in range(20):
        values = network(seed)
        values[24 * 77 :, 2] *= 1.9125
        ((day, series),) = found(values)
        assert series == 2, seed
        dated.append(day)
    assert dated.count(77) >= 19
    assert set(dated) <= {76, 77, 78}


@pytest.mark.parametrize("seed", range(8))
def test_weather_that_all_series_share_is_no_step(seed: int):
    values = network(seed)
    values[24 * 77 :] *= 2.5
    assert found(values) == []


def test_of_two_series_the_one_that_moved_is_named():
    values = network(4)[:, :2]
    values[24 * 60 :, 0] *= 0.3
    result = steps.level_steps(steps.daily_levels(values), [(0, 1)], [True, True])
    assert (result.day.tolist(), result.series.tolist()) == ([60], [0])
    assert math.exp(result.size[0]) == pytest.approx(0.3, rel=0.2)


def test_a_temperature_steps_by_a_difference_also_below_zero():
    rng = np.random.default_rng(8)
    values = rng.normal(-2, 4, (24 * N_DAYS, 1)) + rng.normal(0, 0.3, (24 * N_DAYS, 3))
    values[24 * 80 :, 1] += 1.5
    result = steps.level_steps(steps.daily_levels(values), [(0, 1, 2)], [False] * 3)
    assert (result.day.tolist(), result.series.tolist()) == ([80], [1])
    assert result.size[0] == pytest.approx(1.5, abs=0.2)


def test_a_change_of_unit_of_the_whole_series_moves_no_step():
    values = network(5)
    values[24 * 77 :, 2] *= 1.9
    assert found(values) == found(values * np.array([1, 0.5, 1000, 2]))


def test_appended_days_move_no_step_that_is_two_weeks_old():
    values = network(6)
    values[24 * 50 :, 0] *= 2.0
    values[24 * 90 :, 3] *= 0.4
    early = found(values[: 24 * 100])
    assert (50, 0) in early
    assert [s for s in found(values) if s[0] < 100 - steps.AFTER_DAYS - steps.APART_DAYS] == [
        s for s in early if s[0] < 100 - steps.AFTER_DAYS - steps.APART_DAYS
    ]


def test_days_judged_in_parts_are_those_judged_at_once():
    values = network(7, 200)
    values[24 * 150 :, 0] *= 2.0
    levels = steps.daily_levels(values)
    whole = steps.judge_steps(levels, GROUP, RATIO, strength=1.5, days=range(200))
    for day in (40, 63, 64, 150, 193):
        begin = day - steps.BEFORE_DAYS
        part = steps.judge_steps(levels[begin:], GROUP, RATIO, strength=1.5, days=range(28, 29))
        for name in ("size", "error", "strength"):
            np.testing.assert_array_equal(getattr(part, name)[0], getattr(whole, name)[day])
    np.testing.assert_array_equal(found(values, first=140), [s for s in found(values) if s[0] >= 140])


def test_the_demo_world_with_nothing_planted_has_few_steps():
    n_found, series_years = 0, 0.0
    for seed in (31, 32, 33, 34):
        world = make_world(seed=seed, events=False)
        values = np.where(world.quality < 3, world.values, np.nan)[23:]
        quantity = [key.partition(".")[2] for key in world.keys]
        names = [q for q in dict.fromkeys(quantity) if q not in ("rain", "wind_direction")]
        groups = [[i for i, q in enumerate(quantity) if q == name] for name in names]
        levels = steps.daily_levels(values[: len(values) // 24 * 24])
        n_found += len(steps.level_steps(levels, groups, [q != "temperature" for q in quantity]).day)
        series_years += 1.5 * len(world.keys)
    assert n_found <= series_years / 3
    assert n_found <= 8


def test_known_units_are_recognised_both_ways_and_others_are_not():
    for factor in (1.88, 1.91, 1 / 1.9):
        assert matching_unit("NO2", math.log(factor), 0.07, 4.0) is not None
    assert matching_unit("NO2", math.log(0.30), 0.1, 5.0) is None
    assert matching_unit("NO2", math.log(1.9), 0.07, 2.6) is None  # too weak to be called so
    assert matching_unit("PM25", math.log(1.9), 0.07, 4.0) is None
    assert matching_unit("PM25", math.log(0.001), 0.07, 40.0) is not None
    assert matching_unit("wind_speed", math.log(3.6), 0.02, 40.0) is not None
    assert matching_offset(-273.0, 0.1) == -273.15
    assert matching_offset(20.0, 0.1) is None


def test_molar_volume_factors_are_those_of_the_gas_law():
    for quantity, at_25, at_20 in (("NO2", 1.880, 1.912), ("O3", 1.962, 1.995), ("CO", 1.145, 1.164)):
        assert matching_unit(quantity, math.log(at_25), 0.001, 4.0) is not None
        assert matching_unit(quantity, math.log(at_20), 0.001, 4.0) is not None
        assert matching_unit(quantity, math.log(at_20 + 0.05), 0.001, 4.0) is None


def test_a_change_of_unit_keeps_the_course_of_the_day_and_a_drift_does_not():
    values = network(10)
    before, after, others = values[: 24 * 28, 1], values[24 * 28 : 24 * 35, 1], values[:, [0, 2, 3]]
    sides = (others[: 24 * 28], others[24 * 28 : 24 * 35])
    assert keeps_course(before, 1.9 * after, *sides)
    assert not keeps_course(before, 0.3 * after + 25, *sides)
    assert keeps_course(before, after, *(side[:, :0] for side in sides))
    assert not keeps_course(before, np.full(len(after), np.nan), *sides)


def test_a_shifted_zero_is_told_from_a_factor():
    rng = np.random.default_rng(9)
    before, after = np.exp(rng.normal(2.5, 0.8, (2, 672)))
    assert shifted_zero(before, after - 3.0, 1.0) == pytest.approx(-3.0, abs=0.8)
    assert shifted_zero(before, 0.8 * (after - 4.0), 0.8) == pytest.approx(-3.2, abs=0.8)
    assert shifted_zero(before, 0.6 * after, 1.0) is None
    assert shifted_zero(before + 200, after + 203, 1.0) is None  # quartiles too near each other to tell

"""Multiplicity, wind components, removal of the daily cycle."""

import math

import numpy as np
import pytest
from scipy.stats import false_discovery_control, norm

from reference import rank_correlation as naive
from rhovane.stats import false_discovery, rank_correlation_test, remove_cycle, wind_along, wind_components


def test_adjusted_p_values_equal_the_definition_and_scipy():
    rng = np.random.default_rng(1)
    for seed in range(10):
        p = np.round(rng.random(20) ** 3, 2)
        for method in ("bh", "by"):
            found = false_discovery(p, method)
            np.testing.assert_allclose(found, naive.adjusted(p.tolist(), method == "by"), atol=1e-14)
            np.testing.assert_allclose(
                found, false_discovery_control(p, method=method), atol=1e-14, err_msg=f"{seed}"
            )


def test_tests_that_were_not_assessable_do_not_count():
    p = np.array([[0.01, np.nan], [0.04, 0.03]])
    found = false_discovery(p)
    assert found.shape == (2, 2)
    assert math.isnan(found[0, 1])
    np.testing.assert_allclose(found[~np.isnan(p)], naive.adjusted([0.01, 0.04, 0.03]))
    assert np.isnan(false_discovery([np.nan, np.nan])).all()
    assert false_discovery([]).shape == (0,)


def test_impossible_p_values_are_refused():
    with pytest.raises(ValueError, match=r"p holds values from -0.1 to 0.5; 0 to 1 is allowed"):
        false_discovery([0.5, -0.1])
    with pytest.raises(ValueError, match=r"method='holm' is not known"):
        false_discovery([0.5], "holm")


def test_wind_from_the_four_quarters():
    wind = wind_components([2.0, 2.0, 2.0, 2.0], [0.0, 90.0, 180.0, 270.0])
    np.testing.assert_allclose(wind.eastward, [0, -2, 0, 2], atol=1e-12)
    np.testing.assert_allclose(wind.northward, [-2, 0, 2, 0], atol=1e-12)


def test_component_along_a_bearing_equals_the_projection():
    rng = np.random.default_rng(2)
    speed, direction = rng.random(50) * 10, rng.random(50) * 360
    wind = wind_components(speed, direction)
    for bearing in (0.0, 45.0, 200.0):
        projected = wind.eastward * math.sin(math.radians(bearing)) + wind.northward * math.cos(
            math.radians(bearing)
        )
        np.testing.assert_allclose(wind_along(speed, direction, bearing), projected, atol=1e-12)


def test_a_calm_has_no_component_whatever_its_direction():
    wind = wind_components([0.0, 0.0, np.nan, 1.0], [123.0, np.nan, 10.0, np.nan])
    assert wind.eastward[0] == wind.eastward[1] == wind.northward[1] == 0.0
    assert np.isnan(wind.eastward[2:]).all()
    assert wind_along([0.0], [np.nan], 10.0)[0] == 0.0


@pytest.mark.parametrize(
    ("speed", "direction", "bearing", "message"),
    [
        ([-1.0], [10.0], 0.0, "negative"),
        ([1.0], [361.0], 0.0, "0 to 360 is allowed"),
        ([1.0, 2.0], [10.0], 0.0, "both must share one grid"),
        ([1.0], [10.0], -5.0, "bearing_deg=-5.0 is out of range"),
    ],
)
def test_impossible_wind_is_refused(speed, direction, bearing, message):
    with pytest.raises(ValueError, match=message):
        wind_along(speed, direction, bearing)


def cyclic(seed, days, amplitude=2.0):
    rng = np.random.default_rng(seed)
    hour = np.arange(days * 24) % 24
    working = (np.arange(days * 24) // 24) % 7 < 5
    level = amplitude * np.sin(2 * np.pi * hour / 24) * np.where(working, 1.0, 0.3)
    return np.exp(level + rng.normal(size=days * 24)), hour, working


def test_cycle_removal_equals_its_definition():
    x, hour, working = cyclic(1, 40)
    x[rng_gap(1, len(x))] = np.nan
    x = x.round(0)
    share = naive.trailing_share(x.tolist(), 720, 48)
    score = [norm.ppf(min(1 - 1e-4, max(1e-4, s))) if s == s else math.nan for s in share]
    slots = [(int(h), bool(w)) for h, w in zip(hour, working, strict=True)]
    expected = naive.cycle_removed(score, slots, 28 * 24, 4)
    np.testing.assert_allclose(remove_cycle(x, hour, working), expected, atol=1e-12)


def rng_gap(seed, n):
    return np.random.default_rng(seed).random(n) < 0.1


def test_a_shared_cycle_no_longer_passes_for_a_relationship():
    called = {"kept": 0, "removed": 0}
    for seed in range(40):
        x, hour, working = cyclic(2 * seed + 100, 90)
        y, _, _ = cyclic(2 * seed + 101, 90)
        called["kept"] += rank_correlation_test(x[-672:], y[-672:]).p_value < 0.05
        flat_x, flat_y = remove_cycle(x, hour, working)[-672:], remove_cycle(y, hour, working)[-672:]
        called["removed"] += rank_correlation_test(flat_x, flat_y).p_value < 0.05
    assert called["kept"] >= 38
    assert called["removed"] <= 7


def test_cycle_removal_uses_nothing_later_and_ranks_only():
    x, hour, working = cyclic(3, 80)
    whole = remove_cycle(x, hour, working)
    np.testing.assert_array_equal(whole[:1500], remove_cycle(x[:1500], hour[:1500], working[:1500]))
    np.testing.assert_array_equal(whole, remove_cycle(np.log(x), hour, working))
    late = remove_cycle(x[480:], hour[480:], working[480:])
    np.testing.assert_array_equal(whole[480 + 58 * 24 :], late[58 * 24 :])


def test_early_rows_and_gaps_have_no_score():
    x, hour, working = cyclic(4, 60)
    x[1200] = np.nan
    found = remove_cycle(x, hour, working)
    assert np.isnan(found[: 5 * 24]).all()
    assert math.isnan(found[1200])
    assert not np.isnan(np.delete(found[40 * 24 :], 1200 - 40 * 24)).any()


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"hour_of_day": np.zeros(9, int)}, r"hour_of_day has shape \(9,\)"),
        ({"hour_of_day": np.zeros(10)}, r"hour_of_day has type float64"),
        ({"hour_of_day": np.full(10, -1)}, r"whole numbers from 0 up"),
        ({"working_day": np.ones(10)}, r"working_day has type float64; bool is allowed"),
        ({"steps_per_day": 0}, r"steps_per_day=0 is out of range"),
    ],
)
def test_mistakes_in_the_calendar_are_refused(change, message):
    arguments = {"hour_of_day": np.zeros(10, int), "working_day": np.ones(10, bool)} | change
    with pytest.raises(ValueError, match=message):
        remove_cycle(np.arange(10.0), **arguments)

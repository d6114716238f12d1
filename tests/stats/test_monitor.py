"""Monitoring readings directly: the laws that make an alarm trustworthy, and planted changes found in days."""

from __future__ import annotations

import datetime as dt
from typing import Any

import numpy as np
import pytest
from scipy.signal import lfilter

from rhovane.stats.monitor import NetworkAlarm, monitor_network, monitor_pair

START = dt.datetime(2025, 1, 1, tzinfo=dt.UTC)
NAMES = ["A.NO2", "B.NO2", "C.NO2", "A.O3", "B.O3"]
PAIRS = [(0, 1), (0, 2), (1, 2), (3, 4), (0, 3, 2)]


def sticky(rng: np.random.Generator, n: int) -> np.ndarray:
    return np.asarray(lfilter([np.sqrt(1 - 0.81)], [1, -0.9], rng.normal(size=n)))


def related(
    seed: int, days: int, before: float, after: float, change_day: int
) -> tuple[np.ndarray, np.ndarray]:
    """Lognormal series with a daily cycle and gaps, whose rank correlation changes on a day."""
    rng = np.random.default_rng(seed)
    n = 24 * days
    x, other = sticky(rng, n), sticky(rng, n)
    r = 2 * np.sin(np.pi * np.where(np.arange(n) < 24 * change_day, before, after) / 6)
    y = r * x + np.sqrt(1 - r**2) * other
    hour = np.arange(n) * np.pi / 12
    out = []
    for z, phase in ((x, 2.0), (y, 3.5)):
        v = np.exp(z + np.cos(hour - phase))
        for begin in rng.integers(0, n - 30, days // 12):
            v[begin : begin + 15] = np.nan
        out.append(v)
    return out[0], out[1]


def small_network(seed: int, days: int = 200, failing_day: int = 150) -> np.ndarray:
    """Five series around common parts; the first loses its tie on a day."""
    rng = np.random.default_rng(seed)
    n = 24 * days
    no2, o3 = sticky(rng, n), sticky(rng, n)
    columns = [c + 0.5 * sticky(rng, n) for c in (no2, no2, no2, o3, o3)]
    columns[3] = columns[3] - 0.4 * np.roll(columns[0], 2)
    late = np.arange(n) >= 24 * failing_day
    columns[0] = np.where(late, sticky(rng, n), columns[0])
    values = np.round(np.stack(columns, axis=1), 2)
    values[rng.random(values.shape) < 0.03] = np.nan
    return values


def alarms_of(
    values: np.ndarray, pairs: list[tuple[int, ...]] = PAIRS, **options: Any
) -> tuple[NetworkAlarm, ...]:
    options = {"names": NAMES, "false_alarms_per_year": 2.0, "start": START} | options
    return monitor_network(values, pairs, **options).alarms


def test_a_lost_relation_is_found_within_days() -> None:
    delays = []
    for seed in range(16):
        x, y = related(seed, 190, 0.6, 0.0, 150)
        found = monitor_pair(x, y, start=START).alarms
        if found and found[0].day < 150:
            continue  # a false alarm: the pair is not watched again before it is over
        delays.append(found[0].day - 149 if found else 99)
        assert not found or found[0].direction == "weaker"
    assert len(delays) >= 14, "a false alarm in 40 days is rare at .1 a year"
    assert np.median(delays) <= 4, delays
    assert max(delays) <= 12, delays


def test_a_failing_series_is_named_by_its_column() -> None:
    found = [a for a in alarms_of(small_network(1)) if a.day >= 150]
    assert 150 <= found[0].day <= 156
    assert found[0].suspect == ("series", 0)
    assert set(found[0].pairs) <= {(0, 1), (0, 2), (0, 3)}


def test_truncating_the_readings_never_changes_earlier_alarms() -> None:
    values = small_network(2)
    whole = alarms_of(values, false_alarms_per_year=6.0)
    assert whole
    for day in (120, 150, 152, 155, 170):
        part = alarms_of(values[: 24 * (day + 1)], false_alarms_per_year=6.0)
        assert part == tuple(a for a in whole if a.day <= day), f"day {day}"
    half_a_day_more = alarms_of(values[: 24 * 171 + 12], false_alarms_per_year=6.0)
    assert half_a_day_more == tuple(a for a in whole if a.day <= 170)


@pytest.mark.parametrize("seed", [20, 21, 22])
def test_what_comes_later_never_changes_a_day(seed: int) -> None:
    values = small_network(seed)
    other = values.copy()
    other[24 * 156 :] = np.random.default_rng(seed).normal(size=other[24 * 156 :].shape)
    one, two = (
        monitor_network(v, PAIRS, names=NAMES, start=START, false_alarms_per_year=4.0).watch
        for v in (values, other)
    )
    for name in ("score", "reference_mean", "deviation", "evidence", "threshold", "state"):
        np.testing.assert_array_equal(getattr(one, name)[:156], getattr(two, name)[:156], err_msg=name)
    early = [[(i.alarm_day, i.judged) for i in w.incidents if i.alarm_day < 156] for w in (one, two)]
    assert early[0] == early[1]
    assert early[0]


@pytest.mark.parametrize("seed", [3, 13, 23])
def test_strictly_increasing_transforms_and_other_units_change_nothing(seed: int) -> None:
    values = small_network(seed)
    bent = np.stack(
        [
            np.exp(values[:, 0]),
            values[:, 1] ** 3,
            1.9125 * values[:, 2] + 40.0,
            np.arctan(values[:, 3]),
            values[:, 4],
        ],
        1,
    )
    one, other = (
        monitor_network(v, PAIRS, names=NAMES, start=START, false_alarms_per_year=4.0) for v in (values, bent)
    )
    assert one.alarms
    assert one.alarms == other.alarms
    np.testing.assert_array_equal(one.watch.evidence, other.watch.evidence)
    pair, bent_pair = (
        monitor_pair(v[:, 0], v[:, 1], start=START, false_alarms_per_year=2.0) for v in (values, bent)
    )
    assert pair.alarms == bent_pair.alarms
    np.testing.assert_array_equal(pair.watch.evidence, bent_pair.watch.evidence)


@pytest.mark.parametrize("seed", [4, 14, 24])
def test_the_order_of_series_and_pairs_does_not_matter(seed: int) -> None:
    values = small_network(seed)
    order = [int(k) for k in np.random.default_rng(seed).permutation(5)]
    moved = [(order.index(i), order.index(j), *lag) for i, j, *lag in PAIRS][::-1]
    one = alarms_of(values)
    other = alarms_of(values[:, order], moved, names=[NAMES[k] for k in order])
    assert one
    assert [(a.day, a.direction, a.kind) for a in one] == [(a.day, a.direction, a.kind) for a in other]
    for a, b in zip(one, other, strict=True):
        assert {*a.pairs} == {(order[i], order[j]) for i, j in b.pairs}
        if a.suspect[0] == "series":
            assert a.suspect[1] == order[b.suspect[1]]


def test_a_pair_read_the_other_way_round_is_judged_alike() -> None:
    x, y = related(12, 200, 0.6, 0.0, 150)
    one, other = (monitor_pair(*v, start=START, false_alarms_per_year=1.0) for v in ((x, y), (y, x)))
    assert one.alarms
    assert one.alarms == other.alarms


def test_missing_readings_never_alarm() -> None:
    x, y = related(9, 220, 0.6, 0.6, 300)
    y[24 * 130 : 24 * 170] = np.nan
    x[24 * 180 : 24 * 220] = np.nan
    alarms = monitor_pair(x, y, start=START, false_alarms_per_year=3.0).alarms
    assert not [a for a in alarms if 130 <= a.day < 170 or a.day >= 180]


def test_a_clock_that_slips_is_told_as_timing() -> None:
    rng = np.random.default_rng(5)
    n = 24 * 170
    common = sticky(rng, n)
    values = np.stack([common + 0.3 * sticky(rng, n) for _ in range(3)], axis=1)
    values[24 * 140 :, 1] = values[24 * 140 - 1 : -1, 1]
    found = [
        a for a in alarms_of(values, [(0, 1), (1, 2), (0, 2)], names=["A.t", "B.t", "C.t"]) if a.day >= 140
    ]
    assert found[0].kind == "timing"
    assert found[0].day <= 143


def test_half_hourly_readings_are_watched_too() -> None:
    x, y = related(10, 340, 0.6, -0.1, 280)
    found = monitor_pair(x, y, start=START, step="30min").alarms
    assert [a for a in found if 140 <= a.day <= 150]


def test_a_network_without_names_has_no_stations() -> None:
    for alarm in alarms_of(small_network(1), names=None):
        assert alarm.suspect[0] in ("pair", "series")
        assert not isinstance(alarm.suspect[1], str)


def test_start_is_utc_in_whatever_form() -> None:
    x, y = related(11, 160, 0.6, 0.0, 120)
    forms = [START, START.replace(tzinfo=None), np.datetime64("2025-01-01T00:00")]
    assert len({monitor_pair(x, y, start=s).alarms for s in forms}) == 1


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"start": "2025-01-01"}, "is not a datetime"),
        ({"start": dt.datetime(2025, 1, 1, tzinfo=dt.timezone(dt.timedelta(hours=1)))}, "convert it to UTC"),
        ({"start": np.datetime64("NaT")}, "is not a time"),
        ({"step": "7min"}, "step='7min' is not known"),
        ({"false_alarms_per_year": -1.0}, "above 0"),
        ({"baseline_days": 7}, "too few"),
        ({"names": ["A.NO2"]}, "names has 1 entries for 5 series"),
        ({"names": ["A.NO2", "B", "C.NO2", "A.O3", "B.O3"]}, "write STATION.quantity"),
        ({"pairs": [(0, 9)]}, "outside 0 to 4"),
        ({"pairs": [(1, 1)]}, "pairs a series with itself"),
        ({"pairs": [(0, 1, 2, 3)]}, "is not \\(i, j\\)"),
        ({"values": np.zeros(48)}, "1 dimensions"),
    ],
)
def test_a_mistake_is_refused(change: dict[str, Any], message: str) -> None:
    given = {
        "values": np.zeros((48, 5)),
        "pairs": PAIRS,
        "start": START,
        "false_alarms_per_year": 1.0,
        "names": NAMES,
    }
    given |= change
    with pytest.raises(ValueError, match=message):
        monitor_network(given.pop("values"), given.pop("pairs"), **given)


def test_two_series_of_different_length_are_refused() -> None:
    with pytest.raises(ValueError, match="same shape"):
        monitor_pair(np.zeros(48), np.zeros(24), start=START)


def test_alarms_unpack_as_documented() -> None:
    rng = np.random.default_rng(8)
    x = rng.normal(size=24 * 160)
    y = x + 0.3 * rng.normal(size=len(x))
    y[24 * 130 :] = rng.normal(size=24 * 30)
    start = np.datetime64("2025-01-01")
    ((day, direction, kind),) = monitor_pair(x, y, start=start, false_alarms_per_year=0.1).alarms
    assert day >= 130
    assert (direction, kind) == ("weaker", "strength")
    network = monitor_network(np.column_stack((x, y)), [(0, 1)], start=start, false_alarms_per_year=0.1)
    ((day_too, _, _, pairs, suspect),) = network.alarms
    assert day_too == day
    assert pairs == ((0, 1),)
    assert suspect == ("pair", (0, 1))

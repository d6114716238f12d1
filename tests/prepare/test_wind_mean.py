"""The hourly mean of a wind direction: of unit vectors, or of wind vectors where its speed is known."""

import numpy as np

from rhovane.model import Series
from rhovane.prepare import to_grid

STEPS = 6  # ten-minute steps in an hour
DIRECTION = Series("A.wind_direction", "deg", "circular", 10, speed="A.wind_speed")
SPEED = Series("A.wind_speed", "m/s", "linear", 10)


def hourly(direction, speed, *, weighted=True):
    """Hourly direction from ten-minute directions and speeds of whole hours; NaN marks a missing reading."""
    n = len(direction)
    one = DIRECTION if weighted else Series("A.wind_direction", "deg", "circular", 10)
    grid = to_grid(
        [one, SPEED],
        0,
        n * 600,
        position=np.repeat([0, 1], n),
        second=np.tile(600 * np.arange(n), 2),
        value=np.concatenate([direction, speed]),
        flag=np.ones(2 * n, dtype=int),
        accepted_flags={1},
    )
    return grid.values[:, 0]


def naive(direction, speed):
    """By definition: the direction from which the mean vector of each hour blows; NaN below 5 valid steps."""
    out = []
    for i in range(0, len(direction), STEPS):
        both = [
            (d, s)
            for d, s in zip(direction[i : i + STEPS], speed[i : i + STEPS], strict=True)
            if d == d and s == s
        ]
        x = sum(s * np.sin(np.radians(d)) for d, s in both)
        y = sum(s * np.cos(np.radians(d)) for d, s in both)
        calm = all(s == 0 for _, s in both)
        out.append(np.nan if len(both) < 5 or calm else np.degrees(np.arctan2(x, y)) % 360)
    return np.array(out)


def test_the_mean_vector_agrees_with_its_definition():
    rng = np.random.default_rng(11)
    direction = rng.integers(0, 360, 6 * 200).astype(float)
    speed = rng.choice([0.0, 0.5, 2.0, 9.0], 6 * 200)
    direction[rng.random(1200) < 0.06] = np.nan
    speed[rng.random(1200) < 0.06] = np.nan
    speed[:6] = 0.0
    expected = naive(direction, speed)
    assert 20 < np.isnan(expected).sum() < 150
    found = hourly(direction, speed)
    np.testing.assert_array_equal(np.isnan(found), np.isnan(expected))
    apart = np.abs(found - expected) % 360
    assert np.nanmax(np.minimum(apart, 360 - apart)) < 1e-9


def test_a_gale_counts_more_than_a_breath():
    direction, speed = np.array([0.0] * 3 + [90.0] * 3), np.array([10.0] * 3 + [0.1] * 3)
    assert hourly(direction, speed)[0] < 1
    assert round(float(hourly(direction, speed, weighted=False)[0]), 6) == 45


def test_an_hour_of_calm_has_no_direction():
    assert np.isnan(hourly(np.full(6, 120.0), np.zeros(6))[0])
    assert round(float(hourly(np.full(6, 120.0), np.zeros(6), weighted=False)[0]), 6) == 120

"""The Ostrel Basin, an invented valley: 18 months of hourly readings with known changes hidden in them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane_demo import clocks
from rhovane_demo.basin import make_air, make_calendar, make_roads, make_weather
from rhovane_demo.instruments import (
    FAIL,
    KEYS,
    MISSING,
    UNITS,
    make_quality,
    plant_faults,
    read_all,
    round_readings,
)
from rhovane_demo.noise import Noise
from rhovane_demo.physics import Hourly
from rhovane_demo.planted import Planting


@dataclass(frozen=True)
class World:
    """What the instruments of the Ostrel Basin finally say.

    ``hour_start`` (n_hours,) is datetime64[s] in UTC; ``keys`` (27,) the series; ``values`` (n_hours, 27) float64,
    rounded as the instruments round, NaN where there is no reading; ``quality`` (n_hours, 27) uint8: 1 pass,
    3 suspect, 4 failed (check gas), 9 missing; ``units`` the unit of each key. ``values`` is NaN wherever
    ``quality`` is 4 or 9. ``events`` tells whether changes and decoys are planted.
    """

    seed: int
    events: bool
    hour_start: clocks.Hours
    keys: tuple[str, ...]
    values: Hourly
    quality: NDArray[np.uint8]
    units: dict[str, str]

    def column(self, key: str) -> int:
        """Position of a series in ``values``.

        Raises
        ------
        ValueError
            The demo world has no such series.
        """
        if key not in self.keys:
            raise ValueError(f"the demo world has no series {key!r}; it has {', '.join(self.keys)}")
        return self.keys.index(key)

    def series(self, key: str) -> Hourly:
        """One series, shape (n_hours,)."""
        return self.values[:, self.column(key)]


def make_world(seed: int = 7, events: bool = True) -> World:
    """The Ostrel Basin from 2024-07-01 to 2025-12-31, hourly.

    Parameters
    ----------
    seed : int
        Zero or more; another seed is another weather with the same changes on the same days.
    events : bool
        False plants nothing: no change, no decoy. Weather, holidays, outages and every random draw stay the same.

    Returns
    -------
    World
        13,176 hours of 27 series.

    Raises
    ------
    ValueError
        ``seed`` is negative.
    """
    if seed < 0:
        raise ValueError(f"seed={seed} is negative; choose 0 or more")
    hour_start = clocks.utc_hours()
    noise = Noise(seed, len(hour_start))
    planting = Planting(hour_start, events)
    calendar = make_calendar(hour_start)
    weather = make_weather(calendar, noise, planting)
    roads = make_roads(calendar, noise, planting)
    air = make_air(calendar, weather, roads, noise, planting)
    read = read_all(air, weather, roads, noise)
    plant_faults(read, weather, noise, planting)
    values = round_readings(read)
    quality = make_quality(hour_start, noise)
    quality[np.isnan(values)] = MISSING
    values[(quality == MISSING) | (quality == FAIL)] = np.nan
    return World(seed, events, hour_start, KEYS, values, quality, dict(UNITS))

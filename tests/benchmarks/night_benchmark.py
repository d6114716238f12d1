"""What one night costs on a network of 150 series and 500 pairs, with one to five years of history behind it.

Run: ``python tests/benchmarks/night_benchmark.py [years …]`` (default 1 3 5). Each history is taken in and computed once
(minutes); then single nights follow, each a process of its own as cron would start it: a day's files
in, windows, evidence, alerts, end. The best of the nights counts, the first one compiles and is left out.
"""

from __future__ import annotations

import datetime as dt
import json
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from rhovane.settings import load_settings
from rhovane.store import open_store

STATIONS, QUANTITIES = 25, ("NO2", "O3", "PM25", "PM10", "temperature", "traffic")
PAIRS = 500
FIRST = dt.date(2021, 1, 1)
NIGHTS = 4
DAY = dt.timedelta(days=1)

HEAD = """
[network]
name = "Benchmark network (invented)"

[correlation]
window_hours = 720
lags = [-24, 24]

[alerts]
false_alarms_per_year = 4.0
"""
SOURCE = """
[[source]]
name = "{station}"
form = "long csv"
files = "feed/{station}-*.csv"
clock = "UTC"
label = "start"
missing = [""]
[source.columns]
time = "time"
quantity = "series"
value = "value"
[source.series]
"""


def settings_text() -> str:
    """All stations, series and pairs: every pair of stations that are neighbours, and quantities within a station."""
    keys = [f"S{i:02d}.{q}" for i in range(STATIONS) for q in QUANTITIES]
    within = [(a, b) for i in range(STATIONS) for a, b in _two(keys[i * 6 : i * 6 + 6])]
    between = [
        (f"S{i:02d}.{q}", f"S{j:02d}.{q}")
        for d in range(1, STATIONS)
        for i, j in ((k, k + d) for k in range(STATIONS - d))
        for q in QUANTITIES
    ]
    pairs = (within + between)[:PAIRS]
    parts = [HEAD]
    for i in range(STATIONS):
        parts.append(SOURCE.format(station=f"S{i:02d}"))
        parts += [f'"{q}" = "S{i:02d}.{q}"\n' for q in QUANTITIES]
    parts += [f'\n[[series]]\nkey = "{key}"\nunit = "1"\n' for key in keys]
    parts += [f'\n[[pair]]\nfirst = "{a}"\nsecond = "{b}"\n' for a, b in pairs]
    return "".join(parts)


def _two(keys: list[str]) -> list[tuple[str, str]]:
    return [(a, b) for i, a in enumerate(keys) for b in keys[i + 1 :]]


def readings(n_days: int, seed: int = 1) -> np.ndarray:
    """Slow processes shared by a quantity and by a station, one decimal, 5 % random gaps, an outage a year each."""
    rng = np.random.default_rng(seed)
    hours = 24 * n_days

    def slow(n: int) -> np.ndarray:
        noise = rng.normal(size=(hours, n))
        for t in range(1, hours):
            noise[t] += 0.9 * noise[t - 1]
        return noise

    common, local, own = slow(len(QUANTITIES)), slow(STATIONS), slow(STATIONS * len(QUANTITIES))
    values = (
        20 + 2 * (np.tile(common, STATIONS) + np.repeat(local, len(QUANTITIES), axis=1)) + 2 * own
    ).round(1)
    values[rng.random(values.shape) < 0.05] = np.nan
    for column in range(values.shape[1]):
        for start in rng.integers(0, hours - 72, size=max(1, n_days // 365)):
            values[start : start + 72, column] = np.nan
    return values


def write_days(folder: Path, values: np.ndarray, first: int, last: int, name: str) -> None:
    """One long CSV file a station with the days ``first`` to ``last``."""
    hours = [
        dt.datetime.combine(FIRST, dt.time()) + dt.timedelta(hours=h) for h in range(24 * first, 24 * last)
    ]
    stamps = [h.strftime("%Y-%m-%d %H:%M") for h in hours]
    for i in range(STATIONS):
        lines = ["time,series,value"]
        block = values[24 * first : 24 * last, 6 * i : 6 * i + 6]
        for stamp, row in zip(stamps, block.tolist(), strict=True):
            lines += [f"{stamp},{q},{'' if v != v else v}" for q, v in zip(QUANTITIES, row, strict=True)]
        (folder / f"S{i:02d}-{name}.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")


def night(config: Path, day: dt.date) -> float:
    """Seconds of one night as a process of its own."""
    started = time.perf_counter()
    command = ["nightly", "--as-of", str(day), "--config", str(config)]
    subprocess.run(
        [sys.executable, "-c", "from rhovane.cli import main; main()", *command],
        check=True,
        stdout=subprocess.DEVNULL,
    )
    return time.perf_counter() - started


def measure(years: int, root: Path) -> None:
    """Build a history and print what its nights cost."""
    work = root / f"{years}"
    (work / "feed").mkdir(parents=True)
    config = work / "monitor.toml"
    config.write_text(settings_text(), encoding="utf-8")
    n_days = 365 * years
    values = readings(n_days + NIGHTS)
    write_days(work / "feed", values, 0, n_days, "history")
    whole = night(config, FIRST + (n_days - 1) * DAY)
    seconds = []
    for i in range(NIGHTS):
        write_days(work / "feed", values, n_days + i, n_days + i + 1, f"day{i}")
        seconds.append(night(config, FIRST + (n_days + i) * DAY))
    settings = load_settings(config)
    with open_store(settings.store_path, read_only=True) as store:
        ledger = store.nights(NIGHTS + 1)
    best = min(range(1, NIGHTS), key=lambda i: seconds[i])
    steps = {s["step"]: s["seconds"] for s in ledger[NIGHTS - 1 - best].steps}
    first = {s["step"]: round(s["seconds"], 1) for s in ledger[NIGHTS].steps}
    print(f"{years} years: history {whole:.0f} s {json.dumps(first)}")
    print(
        f"{years} years: a night {seconds[best]:.2f} s (all: {[round(s, 2) for s in seconds]}) {json.dumps(steps)}",
        flush=True,
    )


def main() -> None:
    """Measure every history asked for."""
    years = [int(a) for a in sys.argv[1:]] or [1, 3, 5]
    with tempfile.TemporaryDirectory() as root:
        for each in years:
            measure(each, Path(root))


if __name__ == "__main__":
    main()

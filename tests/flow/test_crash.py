"""Nights killed with SIGKILL at random moments: after the next start everything is as if nothing had happened."""

from __future__ import annotations

import datetime as dt
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np

from flow.small_network import HEADER, SETTINGS, START, related_series, row
from rhovane.review import alert_entries
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store

KILLS = 12
DAY = dt.timedelta(days=1)
FIRST_NIGHT, LAST_NIGHT = START.date() + 70 * DAY, START.date() + 110 * DAY
CHANGE_DAY = 90
SEED = 20

WALK = """
import datetime as dt, sys
from pathlib import Path
from rhovane.pipeline import walk_nights
from rhovane.settings import load_settings
from rhovane.store import open_store

settings = load_settings(Path(sys.argv[1]))
first, last = map(dt.date.fromisoformat, sys.argv[2:4])
moment = lambda day: dt.datetime.combine(day, dt.time(28 - 24), dt.UTC) + dt.timedelta(days=1)
with open_store(settings.store_path) as store:
    print("open", flush=True)
    for report in walk_nights(settings, store, first, last, moment_of=moment):
        print(report.as_of, report.outcome, flush=True)
"""


def network_in(folder: Path) -> Settings:
    """A network whose relation breaks on day 90, delivered in one file a day."""
    (folder / "feed").mkdir(parents=True)
    text = SETTINGS.replace("false_alarms_per_year = 1", "false_alarms_per_year = 1\nbaseline_days = 30")
    (folder / "monitor.toml").write_text(text, encoding="utf-8")
    n = 24 * 111
    x, y = related_series(n, 0.9, seed=5)
    y[24 * CHANGE_DAY :] = related_series(n, 0.0, seed=6)[1][24 * CHANGE_DAY :]
    for day in range(111):
        hours = range(24 * day, 24 * day + 24)
        text = HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in hours)
        (folder / "feed" / f"{day:03d}.csv").write_text(text, encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def start_walk(settings: Settings) -> subprocess.Popen[str]:
    arguments = [str(settings.origin), FIRST_NIGHT.isoformat(), LAST_NIGHT.isoformat()]
    return subprocess.Popen(
        [sys.executable, "-c", WALK, *arguments], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )


def walk_to_the_end(settings: Settings) -> None:
    walk = start_walk(settings)
    _, errors = walk.communicate(timeout=120)
    assert walk.returncode == 0, errors


def final_state(settings: Settings) -> dict[str, object]:
    """Everything that matters, without the numbers that count attempts."""
    now = dt.datetime(2026, 1, 1, tzinfo=dt.UTC)
    with open_store(settings.store_path) as store:
        assert store.verify_alert_chain() is None
        assert store.verify() == []
        state: dict[str, object] = {}
        for name, found in (("windows", store.read_windows()), ("evidence", store.read_evidence())):
            state |= {f"{name}.{k}": v for k, v in found.items() if k != "night_id"}
        readings = store.read_readings(["A.NO2", "B.NO2"], START, START + 400 * DAY)
        order = np.lexsort((readings.ts, readings.position))
        state |= {k: getattr(readings, k)[order] for k in ("position", "ts", "value", "flag")}
        state["alerts"] = [
            (
                e.alert.id,
                e.alert.pair_key,
                e.alert.alarm_day,
                e.alert.onset_day,
                e.alert.night_as_of,
                e.alert.before,
                e.alert.after,
                [(v.kind, v.at, v.note) for v in e.events],
            )
            for e in alert_entries(store, now)
        ]
        finished = [n for n in store.nights(1000) if n.outcome != "running"]
        state["nights"] = sorted((n.as_of, n.outcome) for n in finished)
    return state


def test_killed_nights_leave_the_same_store_and_log_as_undisturbed_ones(tmp_path: Path):
    undisturbed, killed = network_in(tmp_path / "undisturbed"), network_in(tmp_path / "killed")
    walk_to_the_end(undisturbed)
    moments = random.Random(SEED)
    n_killed = 0
    for _ in range(KILLS):
        walk = start_walk(killed)
        assert walk.stdout is not None
        walk.stdout.readline()  # the store is open; from here on any moment may be hit
        time.sleep(moments.uniform(0.0, 0.4))
        if walk.poll() is None:
            walk.send_signal(signal.SIGKILL)
            n_killed += 1
        walk.communicate()
    walk_to_the_end(killed)
    expected, found = final_state(undisturbed), final_state(killed)
    assert n_killed >= KILLS // 2
    assert len(expected["alerts"]) == 1, "the change is meant to be raised"
    assert len(expected["nights"]) == 41
    for name, value in expected.items():
        if isinstance(value, np.ndarray):
            np.testing.assert_array_equal(found[name], value, err_msg=f"{name} (seed {SEED})")
        else:
            assert found[name] == value, f"{name} (seed {SEED})"

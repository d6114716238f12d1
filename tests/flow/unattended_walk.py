"""A service on a small network, night after night with a clock that is moved; killed at random moments when asked to.

As a program: ``python tests/flow/unattended_walk.py FOLDER NIGHTS KILLS SEED LONGEST_S`` kills KILLS walks of the
service one after the other, each after a random time, lets the last one end, and prints what each was at when it
was killed. The walks are forked from a process that has everything loaded and no store open.
"""

from __future__ import annotations

import datetime as dt
import os
import random
import signal
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from flow.small_network import HEADER, SETTINGS, START, related_series, row
from rhovane.pipeline import run_night, walk_nights  # noqa: F401  loaded before the walks are forked
from rhovane.schedule import Keeper
from rhovane.settings import Settings, load_settings
from rhovane.stats import compile_ahead
from rhovane.store import open_store
from schedule.invented_clock import InventedClock, LogReader

DAY, HOUR = dt.timedelta(days=1), dt.timedelta(hours=1)
HISTORY_DAYS = 92  # taken in by the first night
CHANGE_DAYS = (90, 114)  # the relation breaks, and comes back


def network_in(folder: Path, *, lines: str = "") -> Settings:
    """Settings with a file channel, backups and checks; the feed is delivered day by day."""
    (folder / "feed").mkdir(parents=True, exist_ok=True)
    text = SETTINGS.replace("false_alarms_per_year = 1", "false_alarms_per_year = 1\nbaseline_days = 30")
    text += '[service]\nmin_free_mb = 0\n[delivery.file]\npath = "out.jsonl"\n' + lines
    (folder / "monitor.toml").write_text(text, encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def readings(n_days: int) -> tuple[np.ndarray, np.ndarray]:
    """Two related series whose relation is gone between the days of change."""
    n = 24 * n_days
    x, y = related_series(n, 0.9, seed=5)
    gone = slice(24 * CHANGE_DAYS[0], 24 * CHANGE_DAYS[1])
    y[gone] = related_series(n, 0.0, seed=6)[1][gone]
    return x, y


def deliver(settings: Settings, values: tuple[np.ndarray, np.ndarray], day: int) -> None:
    """Put the feed file of a day into its folder, whole, unless it is there."""
    path = settings.work_folder / "feed" / f"{day:04d}.csv"
    if not path.exists():
        x, y = values
        hours = range(24 * day, 24 * day + 24)
        part = path.with_suffix(".part")
        text = HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in hours)
        part.write_text(text, encoding="utf-8")
        part.replace(path)


def walk(
    settings: Settings,
    n_nights: int,
    *,
    at: Callable[[str], None] = lambda _stage: None,
    after_night: Callable[[int], None] = lambda _night: None,
) -> None:
    """Deliver and run the nights that are missing, each as the service does; ``at`` hears what it is at."""
    values = readings(HISTORY_DAYS + n_nights)
    clock, reader = InventedClock(START), LogReader()
    reader.emit = lambda record: at(record.facts.get("step", "")) if "step" in record.facts else None
    keeper = Keeper(settings, lambda: open_store(settings.store_path), clock, reader.log())
    for name, stage in (("_keep", "upkeep"), ("_send", "delivery")):
        setattr(keeper, name, _announced(getattr(keeper, name), stage, at))
    with open_store(settings.store_path) as store:
        done = store.newest_date()
    first = 0 if done is None else (done - START.date()).days - HISTORY_DAYS + 1
    for night in range(
        max(0, first - 1), n_nights
    ):  # the last one again: it may not have been told or copied
        last_day = HISTORY_DAYS + night - 1
        at("feed")
        for day in range(last_day + 1) if night == 0 else [last_day]:
            deliver(settings, values, day)
        clock.set_to(START + (last_day + 1) * DAY + 4 * HOUR)
        clock.seconds_elapsed += 86_400
        keeper.run_due_nights()
        keeper.beat()
        after_night(night)


def _announced(do: Callable[..., None], stage: str, at: Callable[[str], None]) -> Callable[..., None]:
    def doing(**how: bool) -> None:
        at(stage)
        do(**how)

    return doing


def killed_walks(settings: Settings, n_nights: int, kills: int, seed: int, longest_s: float) -> list[str]:
    """Kill walks one after the other, and let a last one end; what each was at when it was killed."""
    moments = random.Random(seed)
    stages = []
    while len(stages) < kills:
        stage = _killed_after(lambda at: walk(settings, n_nights, at=at), moments.uniform(0.0, longest_s))
        if stage is None:
            break
        stages.append(stage)
    assert _killed_after(lambda at: walk(settings, n_nights, at=at), None) is None
    return stages


def _killed_after(do: Callable[[Callable[[str], None]], None], seconds: float | None) -> str | None:
    """Do something in a process of its own and kill it; None when it had ended before, else what it was at."""
    reading, writing = os.pipe()
    child = os.fork()
    if child == 0:
        code = 1
        try:
            do(lambda stage: os.write(writing, (stage + "\n").encode()) and None)
            code = 0
        finally:
            os._exit(code)
    os.close(writing)
    with os.fdopen(reading) as stream:
        stages = [stream.readline().strip()]  # from here on any moment may be hit
        if seconds is not None:
            time.sleep(seconds)
            os.kill(child, signal.SIGKILL)
        stages += stream.read().split("\n")[:-1]
    _, status = os.waitpid(child, 0)
    if os.WIFSIGNALED(status):
        return stages[-1]
    if os.WEXITSTATUS(status) != 0:
        raise RuntimeError("the walk failed by itself; see above")
    return None


def main(folder: str, nights: str, kills: str, seed: str, longest_s: str) -> None:
    """Run as a program."""
    for part in compile_ahead.PARTS:
        compile_ahead.compile_part(part)
    settings = network_in(Path(folder))
    for stage in killed_walks(settings, int(nights), int(kills), int(seed), float(longest_s)):
        print(stage, flush=True)


if __name__ == "__main__":
    main(*sys.argv[1:])

"""The service as a process: it runs what is due, shows that it lives, and ends when it is told to."""

from __future__ import annotations

import datetime as dt
import json
import signal
import subprocess
import sys
import threading
import time
import urllib.request
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from apscheduler.events import (
    EVENT_JOB_ERROR,
    EVENT_JOB_MAX_INSTANCES,
    EVENT_JOB_MISSED,
    JobExecutionEvent,
    JobSubmissionEvent,
)

from flow.small_network import HEADER, SETTINGS, related_series
from rhovane.model import ExitCode
from rhovane.schedule import Keeper, SystemClock
from rhovane.schedule.service import _jobs, _note, run_service
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store, read_liveness
from schedule.invented_clock import LogReader

N_DAYS = 12
COMMAND = [sys.executable, "-c", "from rhovane.cli import main; main()"]
PATIENCE_S = 120  # a machine with other work compiles the statistics first


def network_in(folder: Path, n_days: int = N_DAYS) -> Settings:
    """A small network whose readings end yesterday."""
    (folder / "feed").mkdir()
    lines = '[service]\nheartbeat_s = 1\nlog_file = "watch.log"\nmin_free_mb = 0\n[delivery.file]\npath = "out.jsonl"\n'
    (folder / "monitor.toml").write_text(SETTINGS + lines, encoding="utf-8")
    start = dt.datetime.combine(dt.datetime.now(dt.UTC).date(), dt.time(), dt.UTC) - dt.timedelta(days=n_days)
    columns = dict(zip("AB", related_series(24 * n_days, 0.9, seed=3), strict=True))
    rows = [
        f"{start + dt.timedelta(hours=h):%Y-%m-%d %H:%M},{station},NO2,{values[h]},ug/m3,G\n"
        for h in range(24 * n_days)
        for station, values in columns.items()
    ]
    (folder / "feed" / "all.csv").write_text(HEADER + "".join(rows), encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def log_of(settings: Settings) -> list[dict[str, object]]:
    path = settings.work_folder / "watch.log"
    return [json.loads(line) for line in path.read_text("utf-8").splitlines()] if path.exists() else []


def wait_for(condition, what: str) -> None:
    until = time.monotonic() + PATIENCE_S
    while not condition():
        assert time.monotonic() < until, f"{what} did not happen within {PATIENCE_S} s"
        time.sleep(0.02)


@contextmanager
def service_of(settings: Settings) -> Iterator[subprocess.Popen[str]]:
    command = [*COMMAND, "service", "--port", "0", "--config", str(settings.origin)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    try:
        yield process
    finally:
        process.kill()
        process.communicate()


def run(settings: Settings, *arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*COMMAND, *arguments, "--config", str(settings.origin)],
        capture_output=True,
        text=True,
        timeout=PATIENCE_S,
    )


def ended_after(process: subprocess.Popen[str]) -> float:
    """Seconds from SIGTERM to the end."""
    begun = time.monotonic()
    process.send_signal(signal.SIGTERM)
    process.wait(PATIENCE_S)
    return time.monotonic() - begun


def test_the_service_runs_what_is_due_and_ends_on_sigterm(tmp_path):
    settings = network_in(tmp_path)
    with service_of(settings) as process:
        wait_for(lambda: any(line["text"] == "messages delivered" for line in log_of(settings)), "the night")
        wait_for(lambda: read_liveness(settings.store_path).doing == "", "rest")
        status = json.loads(run(settings, "status", "--json").stdout)
        assert status["last_night"]["outcome"] == "complete"
        assert (status["service"]["alive"], status["service"]["pid"]) == (True, process.pid)
        assert status["exit_code"] == ExitCode.WELL
        served = next(line["address"] for line in log_of(settings) if line["text"] == "the page is served")
        with urllib.request.urlopen(str(served), timeout=PATIENCE_S) as answer:
            assert "Morning list" in answer.read().decode("utf-8")
        second = run(settings, "service", "--no-page")
        assert second.returncode == ExitCode.STORE_LOCKED
        assert "Another service runs" in second.stderr
        assert ended_after(process) < 3  # 0.1 s on a free machine
        assert process.returncode == 0
    assert read_liveness(settings.store_path).state == "stopped"
    assert log_of(settings)[-1]["at_a_safe_point"] is True
    (digest,) = (settings.work_folder / "out.jsonl").read_text("utf-8").splitlines()
    assert json.loads(digest)["data"]["outcome"] == "complete"
    assert run(settings, "nightly", "--catch-up").returncode == ExitCode.NOTHING_NEW, (
        "no night is due any more"
    )


def test_a_night_at_work_ends_with_the_service_and_is_taken_up(tmp_path):
    settings = network_in(tmp_path, n_days=60)
    with service_of(settings) as process:
        wait_for(lambda: any(line.get("step") == "evidence" for line in log_of(settings)), "evidence")
        assert ended_after(process) < 3
        assert process.returncode == 0
    with open_store(settings.store_path) as store:
        found = (store.newest_date(), len(store.read_windows()["lag"]), len(store.outbox()))
    assert found in ((None, 0, 0), (found[0], 5 * 54, 1)), "all of the night or nothing"
    after = run(settings, "nightly", "--catch-up")
    with open_store(settings.store_path) as store:
        assert store.newest_date() == dt.datetime.now(dt.UTC).date() - dt.timedelta(days=1), after.stderr
        assert len(store.outbox()) == 1


def test_overlap_misfire_and_errors_of_jobs_are_recorded(tmp_path):
    reader = LogReader()
    keeper = Keeper(network_in(tmp_path), lambda: None, SystemClock(), reader.log())
    moment = dt.datetime(2025, 3, 1, 3, 40, tzinfo=dt.UTC)
    _note(keeper, JobSubmissionEvent(EVENT_JOB_MAX_INSTANCES, "poll", "default", [moment]))
    _note(keeper, JobExecutionEvent(EVENT_JOB_MISSED, "night", "default", moment))
    error = KeyError("x")
    _note(keeper, JobExecutionEvent(EVENT_JOB_ERROR, "night", "default", moment, exception=error))
    keeper.beat()
    events = read_liveness(keeper.settings.store_path).events
    assert [e.kind for e in events] == ["overlap", "misfire", "job failed"]
    assert "2025-03-01 03:40" in events[1].text
    assert "KeyError: 'x'" in events[2].text


def test_the_night_is_planned_on_standard_time(tmp_path):
    text = SETTINGS.replace(
        'standard_time = "+00:00"', 'standard_time = "-05:30"\ncivil_zone = "America/New_York"'
    )
    (tmp_path / "monitor.toml").write_text(text + '[night]\nat = "02:30"\n', encoding="utf-8")
    keeper = Keeper(load_settings(tmp_path / "monitor.toml"), lambda: None, SystemClock(), LogReader().log())
    trigger = next(trigger for name, _, trigger in _jobs(keeper) if name == "night")
    moment, fired = dt.datetime(2025, 3, 7, 8, 1, tzinfo=dt.UTC), []
    while moment < dt.datetime(2025, 3, 12, tzinfo=dt.UTC):  # New York goes to summer time on 9 March
        moment = trigger.get_next_fire_time(None, moment).astimezone(dt.UTC)
        fired.append(moment)
        moment += dt.timedelta(microseconds=1)
    assert fired == [dt.datetime(2025, 3, 8 + i, 8, tzinfo=dt.UTC) for i in range(5)]


def test_what_runs_beside_the_service_is_begun_and_left(tmp_path):
    settings = network_in(tmp_path)
    reader = LogReader()
    keeper = Keeper(settings, lambda: open_store(settings.store_path), SystemClock(), reader.log())
    keeper.run_due_nights()
    begun = threading.Event()

    def page() -> None:
        begun.set()
        keeper.stop.set()
        threading.Event().wait(60)

    before = signal.getsignal(signal.SIGTERM)
    assert run_service(keeper, beside=[page])
    assert begun.is_set()
    assert signal.getsignal(signal.SIGTERM) is before

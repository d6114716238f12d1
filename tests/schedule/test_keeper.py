"""The service's jobs on a small network, with a clock that the tests move."""

from __future__ import annotations

import datetime as dt
import json
import tomllib
from collections.abc import Callable
from pathlib import Path

import pytest

from delivery.receivers import HttpReceiver
from flow.small_network import HEADER, SETTINGS, START, related_series, row
from rhovane.model import MessageKind
from rhovane.pipeline import nightly
from rhovane.schedule import Keeper
from rhovane.settings import Settings, settings_from
from rhovane.store import Store, open_store, read_liveness
from schedule.invented_clock import InventedClock, LogReader
from store.building import hold, processes

DAY, HOUR = dt.timedelta(days=1), dt.timedelta(hours=1)
N_DAYS = 14
FIRST = START.date()
FILE = '[delivery.file]\npath = "out.jsonl"\n'


@pytest.fixture
def network(tmp_path: Path) -> Callable[[str], Settings]:
    """Settings of the small network with further lines; two weeks of feed in a file a day."""
    (tmp_path / "feed").mkdir()
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    for day in range(N_DAYS):
        hours = range(24 * day, 24 * day + 24)
        text = HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in hours)
        (tmp_path / "feed" / f"{day:02d}.csv").write_text(text, encoding="utf-8")

    def make(lines: str = "") -> Settings:
        return settings_from(tomllib.loads(SETTINGS + lines), tmp_path / "monitor.toml")

    return make


class Watch:
    """A keeper with its clock and log; it begins in the morning after day ``after``."""

    def __init__(self, settings: Settings, after: int = 9) -> None:
        self.settings = settings
        self.clock = InventedClock(START + (after + 1) * DAY + 5 * HOUR)
        self.reader = LogReader()
        self.keeper = Keeper(settings, self.open_store, self.clock, self.reader.log())

    def open_store(self) -> Store:
        return open_store(self.settings.store_path, lock_wait_s=0.05)

    def nights(self) -> list[tuple[dt.date, str]]:
        with open_store(self.settings.store_path, read_only=True) as store:
            return [(n.as_of, n.outcome) for n in reversed(store.nights(100))]

    def said(self, words: str) -> list[dict[str, object]]:
        return [line for line in self.reader.lines if words in str(line["text"])]

    def events(self) -> list[str]:
        found = read_liveness(self.settings.store_path)
        return [] if found is None else [e.kind for e in found.events]


def dates(first: int, last: int) -> list[tuple[dt.date, str]]:
    return [(FIRST + i * DAY, "complete") for i in range(first, last + 1)]


def test_missed_nights_are_run_in_order_once_and_a_second_look_does_nothing(network):
    watch = Watch(network())
    watch.keeper.run_due_nights()
    assert watch.nights() == dates(9, 9), "the first night takes in all there is"
    watch.clock.pass_time(3 * DAY, asleep=True)
    watch.keeper.run_due_nights()
    watch.keeper.run_due_nights()
    assert watch.nights() == dates(9, 12)
    watch.clock.set_to(watch.clock.now() - 2 * DAY)
    watch.keeper.run_due_nights()
    assert not watch.keeper.night_wanted()
    watch.clock.pass_time(3 * DAY)
    watch.keeper.run_due_nights()
    assert watch.nights() == dates(9, 13)


def test_nights_too_many_to_make_up_for_are_told(network):
    watch = Watch(network("[service]\ncatch_up_nights = 2\n" + FILE))
    watch.keeper.run_due_nights()
    watch.clock.pass_time(4 * DAY)
    watch.keeper.run_due_nights()
    assert watch.nights() == dates(9, 9) + dates(12, 13)
    with watch.open_store() as store:
        (told,) = store.outbox(kind=MessageKind.NOTICE)
    assert told.message.subject == "nights missed"
    assert "2025-01-11 to 2025-01-12" in told.message.text
    assert told.delivered_at is not None


def test_after_the_night_the_store_is_checked_copied_and_the_digest_sent(network):
    watch = Watch(network(FILE))
    watch.keeper.run_due_nights()
    (line,) = (watch.settings.work_folder / "out.jsonl").read_text("utf-8").splitlines()
    assert json.loads(line)["subject"] == "night 2025-01-10"
    (copy,) = (watch.settings.work_folder / "backup").glob("*.duckdb")
    with open_store(copy, read_only=True) as store:
        assert store.newest_date() == FIRST + 9 * DAY
        assert store.verify() == []
    assert not watch.keeper.send_wanted()


def test_a_store_with_faults_is_told_and_not_copied_over_a_good_copy(network, monkeypatch):
    watch = Watch(network(FILE))
    monkeypatch.setattr(Store, "verify", lambda _self: ["2 hours have two current readings"])
    watch.keeper.run_due_nights()
    assert list(watch.settings.work_folder.glob("backup/*")) == []
    assert watch.keeper.faults == ["2 hours have two current readings"]
    lines = (watch.settings.work_folder / "out.jsonl").read_text("utf-8").splitlines()
    assert [json.loads(line)["subject"] for line in lines] == ["night 2025-01-10", "store"]


def test_a_copy_that_a_killed_service_did_not_get_to_is_made_up_for(network, monkeypatch):
    watch = Watch(network())
    with monkeypatch.context() as patched:
        patched.setattr(Keeper, "_keep", lambda _self, **_how: None)
        watch.keeper.run_due_nights()
    (copies := watch.settings.work_folder / "backup").mkdir()
    Watch(watch.settings).keeper.run_due_nights()
    (copy,) = copies.glob("*.duckdb")
    made = copy.stat().st_mtime_ns
    Watch(watch.settings).keeper.run_due_nights()
    assert copy.stat().st_mtime_ns == made, "a copy that holds every night is not made again"


def test_a_copy_that_cannot_be_made_is_told_and_spoils_nothing_else(network):
    watch = Watch(network(FILE))
    (watch.settings.work_folder / "backup").write_text("a file in the way")
    watch.keeper.run_due_nights()
    watch.keeper.send()
    assert watch.nights() == dates(9, 9)
    lines = (watch.settings.work_folder / "out.jsonl").read_text("utf-8").splitlines()
    assert [json.loads(line)["subject"] for line in lines] == ["night 2025-01-10", "upkeep failed"]


def test_a_night_that_fails_is_tried_again_after_growing_pauses_and_later_nights_wait(network, monkeypatch):
    watch = Watch(network())
    good = nightly.STEPS
    watch.keeper.run_due_nights()

    def fail(_night: object) -> str:
        raise MemoryError("no memory for this")

    broken = tuple((name, fail if name == "windows" else do) for name, do in good)
    monkeypatch.setattr(
        nightly.run_night, "__kwdefaults__", {**nightly.run_night.__kwdefaults__, "steps": broken}
    )
    watch.clock.pass_time(2 * DAY)
    tries = 0
    for _ in range(30):  # half an hour of heartbeats, a minute apart
        if watch.keeper.night_wanted():
            watch.keeper.run_due_nights()
            tries += 1
        watch.clock.pass_time(dt.timedelta(minutes=1))
    assert tries == 5  # after 0, 1, 3, 7 and 15 minutes
    assert watch.nights()[1:] == [(FIRST + 10 * DAY, "failed")] * 5
    assert watch.said("MemoryError: no memory for this")
    assert watch.said("night failed")[0]["next_command"] == "rhovane nightly --as-of 2025-01-11"
    monkeypatch.undo()
    watch.clock.pass_time(HOUR)
    watch.keeper.run_due_nights()
    assert [n for n in watch.nights() if n[1] == "complete"] == dates(9, 11)


def test_a_locked_store_is_waited_for(network):
    watch = Watch(network(FILE))
    held, release = processes.Event(), processes.Event()
    other = processes.Process(target=hold, args=(watch.settings.store_path, held, release))
    other.start()
    assert held.wait(60)
    watch.keeper.run_due_nights()
    watch.keeper.poll()
    assert len(watch.said("is in use by")) == 3  # night, sending, look into the feed
    assert not watch.keeper.night_wanted()
    release.set()
    other.join(60)
    watch.clock.pass_time(dt.timedelta(minutes=1))
    assert watch.keeper.night_wanted()
    watch.keeper.run_due_nights()
    assert watch.nights() == dates(9, 9)


def test_a_night_told_to_stop_is_taken_up_by_the_next_service(network):
    watch = Watch(network())
    asked: list[str] = []
    stop = watch.keeper.stop
    watch.reader.emit = lambda record: (  # the service is told to end while the night computes its windows
        stop.set() if record.facts.get("step") == "windows" else asked.append(record.getMessage())
    )
    watch.keeper.run_due_nights()
    assert watch.nights() == [(FIRST + 9 * DAY, "stopped")]
    with watch.open_store() as store:
        assert len(store.read_windows()["lag"]) == 0
        assert store.last_ingest_id() == N_DAYS, "what was taken in stays"
    after = Watch(watch.settings)
    after.keeper.run_due_nights()
    assert after.nights() == [(FIRST + 9 * DAY, "stopped"), *dates(9, 9)]


def test_the_feed_is_looked_into_through_the_day(network):
    watch = Watch(network())
    held_back = watch.settings.work_folder / "feed" / "13.csv"
    text = held_back.read_text("utf-8")
    held_back.unlink()
    watch.keeper.run_due_nights()
    held_back.write_text(text, encoding="utf-8")
    watch.keeper.poll()
    (line,) = watch.said("file taken in")
    assert (line["file"], line["new"]) == ("feed/13.csv", 48)


def test_a_delivery_that_fails_is_tried_again_with_the_same_id(network):
    receiver = HttpReceiver(answers=[503, 503, 204])
    with receiver.listen() as port:
        watch = Watch(network(f'[delivery.http]\nurl = "http://localhost:{port}/"\n'))
        watch.keeper.run_due_nights()
        tries = [len(receiver.requests)]
        for _ in range(20):
            watch.clock.pass_time(dt.timedelta(minutes=1))
            watch.keeper.send()
            tries.append(len(receiver.requests))
    assert [tries.index(n) for n in (1, 2, 3)] == [0, 5, 15]  # after 5 minutes, and after 10 more
    assert len({json.loads(body)["id"] for _, _, body in receiver.requests}) == 1
    with watch.open_store() as store:
        (entry,) = store.outbox()
    assert (entry.attempts, entry.last_error) == (3, None)
    assert entry.delivered_at == START + 10 * DAY + 5 * HOUR + dt.timedelta(minutes=15)
    assert watch.said("answered 503")


def test_a_heartbeat_tells_of_a_clock_that_was_set_and_of_sleep(network):
    watch = Watch(network(FILE))
    watch.keeper.run_due_nights()
    watch.keeper.beat()
    assert watch.events() == []
    watch.clock.pass_time(HOUR, asleep=True)
    assert watch.keeper.beat().was_suspended
    watch.clock.set_to(watch.clock.now() - HOUR)
    assert watch.keeper.beat().was_set
    assert watch.events() == ["suspended", "clock"]
    watch.keeper.send()
    with watch.open_store() as store:
        assert [e.message.subject for e in store.outbox(kind=MessageKind.NOTICE)] == ["clock"]
    sign = read_liveness(watch.settings.store_path)
    assert sign.state == "running"
    assert sign.next_night == START + 11 * DAY + dt.timedelta(hours=3, minutes=40)
    again = Watch(watch.settings)
    again.keeper.beat()
    assert again.events() == ["suspended", "clock"], "a restart forgets nothing"


def test_a_small_correction_of_the_clock_is_written_down_and_nobody_is_woken(network):
    watch = Watch(network(FILE))
    watch.keeper.beat()
    watch.clock.set_to(watch.clock.now() + dt.timedelta(seconds=59))
    watch.keeper.beat()
    watch.keeper.run_due_nights()
    assert watch.events() == ["clock corrected"]
    with watch.open_store() as store:
        assert store.outbox(kind=MessageKind.NOTICE) == []


def test_little_disk_space_is_told_once(network):
    watch = Watch(network("[service]\nmin_free_mb = 100000000\n"))
    for _ in range(3):
        watch.keeper.beat()
    assert watch.events() == ["disk"]

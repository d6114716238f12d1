"""Is the watch itself well: what `status` finds, and with which code it ends."""

from __future__ import annotations

import datetime as dt
import tomllib
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from flow.small_network import SETTINGS
from rhovane.model import ExitCode, Message, MessageKind
from rhovane.review import falling_coverage, network_status
from rhovane.settings import Settings, settings_from
from rhovane.store import WINDOW_COLUMNS, Attempt, Liveness, Noticed, Store, open_store, write_liveness

DAY, HOUR, MINUTE = dt.timedelta(days=1), dt.timedelta(hours=1), dt.timedelta(minutes=1)
NIGHT = dt.date(2025, 3, 1)
RAN = dt.datetime(2025, 3, 2, 3, 40, tzinfo=dt.UTC)
PAIR = "A.NO2~B.NO2"


@pytest.fixture
def network(tmp_path: Path) -> Callable[[str], Settings]:
    def make(lines: str = "[service]\nmin_free_mb = 0\n") -> Settings:
        return settings_from(tomllib.loads(SETTINGS + lines), tmp_path / "monitor.toml")

    return make


def a_night(store: Store, day: dt.date = NIGHT, outcome: str = "complete", **counts: object) -> int:
    number = store.begin_night(kind="nightly", as_of=day, now=RAN, settings_hash="s", program_version="1")
    store.finish_night(number, now=RAN, outcome=outcome, steps=[], counts=counts)
    return number


def status(settings: Settings, now: dt.datetime = RAN + HOUR, prepare: Callable[[Store], object] = a_night):
    with open_store(settings.store_path) as store:
        prepare(store)
    with open_store(settings.store_path, read_only=True) as store:
        return network_status(settings, store, now)


def kinds(found) -> list[str]:
    return [c.kind for c in found.concerns]


def test_a_watch_in_order_has_no_concerns(network):
    found = status(network())
    assert (found.exit_code, found.nights_missed, found.concerns) == (ExitCode.WELL, 0, ())


def test_a_night_is_missed_an_hour_after_it_should_have_begun(network):
    settings = network()
    assert status(settings, RAN + DAY + 59 * MINUTE).exit_code is ExitCode.WELL
    late = status(settings, RAN + DAY + 61 * MINUTE, prepare=lambda _s: None)
    assert (late.exit_code, late.nights_missed) == (ExitCode.NIGHT_INCOMPLETE, 1)


@pytest.mark.parametrize("outcome", ["incomplete", "failed", "stopped"])
def test_a_night_that_did_not_end_well_has_its_code(network, outcome):
    assert (
        status(network(), prepare=lambda s: a_night(s, outcome=outcome)).exit_code
        is ExitCode.NIGHT_INCOMPLETE
    )


def test_a_recompute_of_an_older_day_makes_no_night_missed(network):
    def both(store: Store) -> None:
        a_night(store)
        a_night(store, NIGHT - 9 * DAY)

    assert status(network(), prepare=both).nights_missed == 0


def test_a_service_without_a_sign_of_life_is_a_concern_and_one_that_was_stopped_is_not(network):
    settings = network()
    sign = Liveness(4711, RAN, RAN, 30, "running")
    write_liveness(settings.store_path, sign)
    dead = status(settings)
    assert (kinds(dead), dead.exit_code) == (["service"], ExitCode.NEEDS_ATTENTION)
    assert "4711" in dead.concerns[0].found
    assert not dead.service["alive"]
    for well in (replace(sign, beat=RAN + HOUR), replace(sign, state="stopped")):
        write_liveness(settings.store_path, well)
        assert kinds(status(settings)) == []


def test_a_clock_behind_the_ledger_and_one_that_was_set_are_concerns(network):
    settings = network()
    found = status(settings, RAN - 3 * HOUR)
    assert kinds(found) == ["clock"]
    assert "2025-03-02 00:40 UTC, but a night began at 2025-03-02 03:40" in found.concerns[0].found
    events = tuple(Noticed(RAN + i * HOUR, "clock", f"set back {i}") for i in (-25, -1))
    events += (Noticed(RAN, "upkeep failed", "disk full"),)
    sign = Liveness(1, RAN, RAN, 30, "stopped", events=(*events, Noticed(RAN, "suspended", "slept")))
    write_liveness(settings.store_path, sign)
    assert [c.found for c in status(settings, RAN).concerns] == ["set back -1", "disk full"]


def test_little_disk_space_is_a_concern_with_its_setting(network):
    found = status(network("[service]\nmin_free_mb = 100000000\n"))
    assert (kinds(found), found.exit_code) == (["disk"], ExitCode.NEEDS_ATTENTION)
    assert "service.min_free_mb asks for 100000000" in found.concerns[0].found


def test_deliveries_that_keep_failing_and_channels_that_are_gone_are_concerns(network):
    settings = network('[service]\nmin_free_mb = 0\n[delivery.file]\npath = "out"\n')
    message = Message(MessageKind.NOTICE, "store", RAN, "title", "text", {})
    tried = [Attempt(message.id, "file", RAN + i * MINUTE, False, f"try {i}") for i in range(3)]

    def post(store: Store) -> None:
        a_night(store)
        store.post([(message, ["file", "mail"])], now=RAN)
        store.record_attempts(tried[:2])

    assert [c.found.split(":")[0] for c in status(settings, prepare=post).concerns] == ["mail"]
    found = status(settings, prepare=lambda store: store.record_attempts(tried[2:]))
    assert kinds(found) == ["delivery", "delivery"]
    assert found.concerns[0].found == "file: 1 not delivered since 2025-03-02 03:40 UTC: try 2"
    assert "no longer in the settings" in found.concerns[1].found
    assert found.exit_code is ExitCode.NEEDS_ATTENTION


@pytest.mark.parametrize(
    ("before", "now", "told"), [(0.95, 0.84, True), (0.95, 0.86, False), (0.6, 0.8, False)]
)
def test_coverage_that_falls_within_a_week_is_told(network, before, now, told):
    settings = network()
    ends = [dt.datetime.combine(day, dt.time(23), dt.UTC).timestamp() for day in (NIGHT - 7 * DAY, NIGHT)]
    columns = {name: np.zeros(2) for name in WINDOW_COLUMNS} | {
        "pair_key": np.array([PAIR, PAIR], dtype=object),
        "window_end": np.array(ends, np.int64),
        "lag": np.zeros(2, np.int64),
        "n_pairs": np.full(2, 100),
        "coverage": np.array([before, now]),
        "reason": np.array([None, None], dtype=object),
    }
    with open_store(settings.store_path) as store:
        store.write_windows(a_night(store), columns)
        found = falling_coverage(settings, store, NIGHT)
        assert [(f.pair, f.before, f.now) for f in found] == ([(PAIR, before, now)] if told else [])

"""Nights that nobody watches: what fails stays alone, limits and stops leave nothing half-done, each night is told once."""

from __future__ import annotations

import datetime as dt
import math
import tomllib
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from flow.small_network import HEADER, SETTINGS, START, related_series, row
from rhovane.model import MessageKind
from rhovane.pipeline import NightReport, evidence, nightly, run_night, windows
from rhovane.pipeline.context import Night
from rhovane.settings import Settings, settings_from
from rhovane.store import open_store

DAY = dt.timedelta(days=1)
N_DAYS = 12
LAST = START.date() + (N_DAYS - 1) * DAY
FAR = 500  # puts the values of the third series where no other series has any
CHANNEL = '[delivery.file]\npath = "out.jsonl"\n'
THIRD_SERIES = """
[[series]]
key = "C.NO2"
unit = "ug/m3"
[[pair]]
first = "A.NO2"
second = "C.NO2"
[[source]]
name = "other"
form = "long csv"
files = "other/*.csv"
clock = "UTC"
label = "start"
[source.columns]
time = "time"
station = "station"
quantity = "quantity"
value = "value"
[source.series]
"C NO2" = "C.NO2"
"""


def moment(day: dt.date) -> dt.datetime:
    return dt.datetime.combine(day + DAY, dt.time(4), dt.UTC)


@pytest.fixture
def three_stations(tmp_path: Path) -> Callable[[str], Settings]:
    """Two pairs that share a series; the third series has a source of its own."""
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    z, _ = related_series(24 * N_DAYS, 0.9, seed=8)
    for name, columns in (("feed", {"A": x, "B": y}), ("other", {"C": z + FAR})):
        (tmp_path / name).mkdir()
        lines = [row(h, s, v[h]) for h in range(24 * N_DAYS) for s, v in columns.items()]
        (tmp_path / name / "all.csv").write_text(HEADER + "".join(lines), encoding="utf-8")

    def make(lines: str = "") -> Settings:
        return settings_from(tomllib.loads(SETTINGS + THIRD_SERIES + lines), tmp_path / "monitor.toml")

    return make


def night(settings: Settings, day: dt.date = LAST, **more: object) -> NightReport:
    with open_store(settings.store_path) as store:
        return run_night(settings, store, as_of=day, now=moment(day), **more)


def results(settings: Settings) -> dict[str, np.ndarray]:
    """Windows and evidence without the numbers of the nights."""
    with open_store(settings.store_path) as store:
        found = {f"windows.{k}": v for k, v in store.read_windows().items()}
        found |= {f"evidence.{k}": v for k, v in store.read_evidence().items()}
    return {k: v for k, v in found.items() if not k.endswith("night_id")}


def same(one: dict[str, np.ndarray], other: dict[str, np.ndarray]) -> None:
    assert one.keys() == other.keys()
    for name, values in one.items():
        np.testing.assert_array_equal(values, other[name], err_msg=name)


def pairs_with_results(settings: Settings) -> set[str]:
    with open_store(settings.store_path) as store:
        return set(store.read_evidence()["pair_key"].tolist())


@pytest.fixture
def undisturbed(three_stations) -> dict[str, np.ndarray]:
    settings = three_stations('[store]\nfile = "undisturbed.duckdb"\n')
    assert night(settings).outcome == "complete"
    return results(settings)


# -- what fails stays alone ----------------------------------------------------------------------------


def test_a_source_that_cannot_be_read_leaves_the_others_alone_and_is_told_on_the_third_night(three_stations):
    settings = three_stations(CHANNEL)
    (settings.work_folder / "other" / "all.csv").unlink()
    told = []
    for i in (3, 3, 2, 1, 0):  # the first of these nights is run twice, which is one night
        report = night(settings, LAST - i * DAY)
        assert report.outcome == "incomplete"
        with open_store(settings.store_path) as store:
            notices = [e.message for e in store.outbox(kind=MessageKind.NOTICE)]
        told.append((report.counts["failing"]["source other"], len(notices)))
    assert told == [(1, 0), (1, 0), (2, 0), (3, 1), (4, 1)]
    assert notices[0].data["part"] == "source other"
    assert "A.NO2~B.NO2" in pairs_with_results(settings)


def test_a_series_that_breaks_takes_only_its_own_pairs_along(three_stations, undisturbed, monkeypatch):
    settings = three_stations()
    good = evidence.series_scores

    def scores(values, days, **more):
        if np.nanmax(values) > FAR:
            raise ZeroDivisionError("a fault of this series")
        return good(values, days, **more)

    monkeypatch.setattr(evidence, "series_scores", scores)
    report = night(settings)
    assert report.outcome == "incomplete"
    assert [(t.part, t.reason) for t in report.troubles] == [
        ("pair A.NO2~C.NO2", "series C.NO2: ZeroDivisionError: a fault of this series")
    ]
    assert pairs_with_results(settings) == {"A.NO2~B.NO2"}
    monkeypatch.undo()
    assert night(settings).outcome == "complete"
    same(results(settings), undisturbed)


def test_a_pair_that_breaks_leaves_the_others_alone(three_stations, undisturbed, monkeypatch):
    settings = three_stations()
    good = windows.pair_windows

    def broken(night_: Night, watched, grid):
        if watched.pair.key == "A.NO2~C.NO2":
            raise IndexError("a fault of this pair")
        return good(night_, watched, grid)

    monkeypatch.setattr(windows, "pair_windows", broken)
    report = night(settings)
    assert [(t.part, t.reason) for t in report.troubles] == [
        ("pair A.NO2~C.NO2", "IndexError: a fault of this pair")
    ]
    monkeypatch.undo()
    assert night(settings).outcome == "complete"
    same(results(settings), undisturbed)


def test_a_step_that_fails_as_a_whole_leaves_reason_and_next_command(three_stations):
    settings = three_stations(CHANNEL)

    def fail(_night: Night) -> str:
        raise MemoryError("none left")

    steps = tuple((name, fail if name == "evidence" else do) for name, do in nightly.STEPS)
    report = night(settings, steps=steps)
    assert (report.outcome, report.counts["next"]) == ("failed", f"nightly --as-of {LAST}")
    with open_store(settings.store_path) as store:
        (digest,) = [e.message for e in store.outbox()]
        assert len(store.read_windows()["lag"]) == 0
    assert digest.data["outcome"] == "failed"
    assert "MemoryError: none left" in digest.text
    assert f"Next: rhovane nightly --as-of {LAST}" in digest.text


def test_news_that_cannot_be_written_down_fail_the_night_visibly(three_stations, monkeypatch):
    settings = three_stations(CHANNEL)

    def fail(*_: object) -> None:
        raise KeyError("headline")

    monkeypatch.setattr(nightly, "post_news", fail)
    report = night(settings)
    assert (report.outcome, report.troubles[-1].reason) == ("failed", "KeyError: 'headline'")
    with open_store(settings.store_path) as store:
        assert [n.outcome for n in store.nights()] == ["failed"]
        assert len(store.read_windows()["lag"]) == 0, (
            "what cannot be told is not kept; the night is run again"
        )


# -- limits and stops ----------------------------------------------------------------------------------


def test_a_step_out_of_time_leaves_the_rest_to_the_next_night(three_stations, undisturbed):
    hurried = three_stations("[night]\nstep_limit_minutes = 1e-9\n")
    report = night(hurried)
    assert report.outcome == "incomplete"
    reasons = {(t.step, t.part) for t in report.troubles}
    assert ("ingest", "the rest of the feed") in reasons
    assert any(part == "time for step ingest" for _, part in reasons)
    unhurried = three_stations()
    with open_store(unhurried.store_path) as store:
        assert store.last_ingest_id() == 0
    assert night(unhurried).outcome == "complete"
    same(results(unhurried), undisturbed)


@pytest.mark.parametrize("slow", ["windows", "evidence"])
def test_pairs_out_of_time_are_taken_up_by_the_next_night(three_stations, undisturbed, slow):
    settings = three_stations()

    def hurried(do):
        def step(one: Night) -> str:
            one.step_ends = -math.inf
            return do(one)

        return step

    steps = tuple((name, hurried(do) if name == slow else do) for name, do in nightly.STEPS)
    report = night(settings, steps=steps)
    assert report.outcome == "incomplete"
    assert [t.part for t in report.troubles] == ["pair A.NO2~B.NO2", "pair A.NO2~C.NO2"]
    assert "night.step_limit_minutes" in report.troubles[0].reason
    assert night(settings).outcome == "complete"
    same(results(settings), undisturbed)


def test_memory_above_the_limit_is_recorded_and_every_step_has_its_peak(three_stations, monkeypatch):
    settings = three_stations("[night]\nmemory_limit_mb = 900\n")
    grown = iter([100] * 4 + [1000] * 100)
    monkeypatch.setattr(nightly, "peak_memory_mb", lambda: next(grown))
    report = night(settings)
    (trouble,) = report.troubles
    assert trouble.reason == "the process held 1000 MB, night.memory_limit_mb allows 900"
    with open_store(settings.store_path) as store:
        (ledger,) = store.nights()
    assert [step["peak_mb"] for step in ledger.steps] == [100, *[1000] * (len(nightly.STEPS) - 1)]


def test_a_night_stopped_anywhere_leaves_nothing_of_its_results_and_is_taken_up(three_stations, undisturbed):
    settings = three_stations(CHANNEL)
    n_asked = stopped = 0
    for stop_at in (0, 1, 3, 5, 6, 7, 9, 11, 12, 100):
        asked = iter(range(10_000))
        report = night(settings, stop=lambda asked=asked, stop_at=stop_at: next(asked) >= stop_at)
        n_asked = next(asked)
        if report.outcome != "stopped":
            break
        stopped += 1
        with open_store(settings.store_path) as store:
            assert len(store.read_windows()["lag"]) == len(store.read_evidence()["day"]) == 0
            assert store.outbox() == store.alerts() == []
            assert store.newest_date() is None
    assert stopped >= 8, f"the night asked {n_asked} times"
    assert report.outcome == "complete"
    same(results(settings), undisturbed)
    with open_store(settings.store_path) as store:
        assert [e.message.kind for e in store.outbox()] == [MessageKind.DIGEST]


# -- told once -----------------------------------------------------------------------------------------


def test_a_night_run_again_is_told_again_only_when_it_ends_otherwise(three_stations):
    settings = three_stations(CHANNEL)
    elsewhere = settings.work_folder / "other" / "all.csv"
    text = elsewhere.read_text("utf-8")
    elsewhere.unlink()
    night(settings)
    night(settings)
    elsewhere.write_text(text, encoding="utf-8")
    night(settings)
    night(settings)
    with open_store(settings.store_path) as store:
        digests = [e.message for e in store.outbox(kind=MessageKind.DIGEST)]
    assert [m.data["outcome"] for m in digests] == ["incomplete", "complete"]
    assert len({m.id for m in digests}) == 2
    assert "C.NO2: never seen" in digests[0].data["silent"]
    assert not any("C.NO2: never seen" in text for text in digests[1].data["silent"])


def test_without_a_channel_nothing_is_put_into_the_outbox(three_stations):
    settings = three_stations()
    night(settings)
    with open_store(settings.store_path) as store:
        assert store.outbox() == []

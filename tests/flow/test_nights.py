"""Whole nights on a small network: what is raised, what is said when there is no data, what a repeat does."""

from __future__ import annotations

import datetime as dt
import os
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from flow.small_network import HEADER, SETTINGS, START, related_series, row
from rhovane.model import EventKind, ExitCode
from rhovane.pipeline import STEPS, run_night, walk_nights
from rhovane.pipeline.memory import NightMemory
from rhovane.review import alert_entries, network_status
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store

FIRST = START.date()
DAY = dt.timedelta(days=1)
N_DAYS = 170
CHANGE_DAY = 140
PAIR = "A.NO2~B.NO2"


def moment(day: dt.date) -> dt.datetime:
    return dt.datetime.combine(day + DAY, dt.time(4), dt.UTC)


def lines(hours: range, x: np.ndarray, y: np.ndarray) -> str:
    return HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in hours)


@pytest.fixture(scope="module")
def changing() -> tuple[np.ndarray, np.ndarray]:
    """A strong relation that is gone from day 140 on."""
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    _, other = related_series(24 * N_DAYS, 0.0, seed=4)
    y[24 * CHANGE_DAY :] = other[24 * CHANGE_DAY :]
    return x, y


def network_of(folder: Path, changing: tuple[np.ndarray, np.ndarray]) -> Settings:
    """A network in a folder of its own, all its readings delivered."""
    (folder / "feed").mkdir(parents=True)
    (folder / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    (folder / "feed" / "all.csv").write_text(lines(range(24 * N_DAYS), *changing), encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def run(settings: Settings, last: dt.date, first: dt.date | None = None):
    with open_store(settings.store_path) as store:
        if first is None:
            return [run_night(settings, store, as_of=last, now=moment(last))]
        return list(walk_nights(settings, store, first, last, moment_of=moment))


def entries_of(settings: Settings, now: dt.datetime):
    with open_store(settings.store_path, read_only=True) as store:
        return alert_entries(store, now)


def facts(settings: Settings) -> list[tuple[object, ...]]:
    found = entries_of(settings, moment(FIRST + 400 * DAY))
    return [(e.alert.pair_key, e.alert.alarm_day, e.alert.onset_day, e.alert.direction) for e in found]


def test_a_change_is_raised_once_with_onset_before_and_after(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    deliver("all.csv", lines(range(24 * N_DAYS), *changing))
    run(network, FIRST + (N_DAYS - 1) * DAY)
    (entry,) = entries_of(network, moment(FIRST + N_DAYS * DAY))
    alert = entry.alert
    assert (alert.pair_key, alert.direction) == (PAIR, "weaker")
    assert alert.alarm_day >= FIRST + CHANGE_DAY * DAY
    assert abs((alert.onset_day - (FIRST + CHANGE_DAY * DAY)).days) <= 2
    assert alert.before.statistic > 0.7
    assert abs(alert.after.statistic) < 0.3
    assert alert.before.n_effective < alert.before.n_pairs
    assert alert.evidence > alert.threshold
    assert entry.events[0].kind is EventKind.RAISED


def test_walking_night_by_night_raises_what_one_night_over_the_history_raises(tmp_path: Path, changing):
    walked, at_once = (network_of(tmp_path / name, changing) for name in ("walked", "at_once"))
    last = FIRST + (N_DAYS - 1) * DAY
    reports = run(walked, last, first=FIRST + 120 * DAY)
    run(at_once, last)
    assert facts(walked) == facts(at_once)
    assert len(facts(walked)) == 1
    raised = [r.as_of for r in reports if r.counts.get("alerts new")]
    assert raised == [facts(walked)[0][1]]
    with open_store(walked.store_path) as one, open_store(at_once.store_path) as other:
        evidence = [s.read_evidence(start=FIRST + 60 * DAY) for s in (one, other)]
        windows = [
            s.read_windows(start=moment(FIRST + 120 * DAY), end=moment(last + DAY)) for s in (one, other)
        ]
    for found in (evidence, windows):
        assert len(found[0]["pair_key"]) > 0
        for name in found[0]:
            if name != "night_id":
                np.testing.assert_array_equal(found[0][name], found[1][name], err_msg=name)


def test_windows_that_an_interrupted_walk_had_left_are_computed_by_the_next_night(tmp_path: Path, changing):
    interrupted, at_once = (network_of(tmp_path / name, changing) for name in ("interrupted", "at_once"))
    first = next(FIRST + d * DAY for d in range(60, 67) if (FIRST + d * DAY).toordinal() % 7 == 1)
    with open_store(interrupted.store_path) as store:
        walk = walk_nights(interrupted, store, first, first + 20 * DAY, moment_of=moment)
        for _, report in zip(range(4), walk, strict=False):
            assert next(s.summary for s in report.steps if s.name == "windows").startswith("left to")
        walk.close()
        assert len(store.read_windows()["lag"]) == 0
    for each in (interrupted, at_once):
        run(each, first + 4 * DAY)
    with open_store(interrupted.store_path) as one, open_store(at_once.store_path) as other:
        found = [store.read_windows() for store in (one, other)]
        assert "windows left" not in one.last_finished_night().counts
    assert len(found[0]["lag"]) > 0
    for name in set(found[0]) - {"night_id"}:
        np.testing.assert_array_equal(found[0][name], found[1][name], err_msg=name)


def test_a_night_uses_nothing_later_than_its_day(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    deliver("all.csv", lines(range(24 * N_DAYS), *changing))
    run(network, FIRST + (CHANGE_DAY - 1) * DAY)
    assert facts(network) == []
    with open_store(network.store_path) as store:
        ends = store.read_windows(PAIR)["window_end"]
    assert ends.max() == int(START.timestamp()) + 3600 * (24 * CHANGE_DAY - 1)


def test_a_repeated_night_finds_nothing_new_and_raises_nothing_again(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    deliver("all.csv", lines(range(24 * N_DAYS), *changing))
    last = FIRST + (N_DAYS - 1) * DAY
    run(network, last)
    before = entries_of(network, moment(last))
    (again,) = run(network, last)
    assert again.exit_code is ExitCode.NOTHING_NEW
    assert entries_of(network, moment(last)) == before


def test_silence_for_lack_of_data_is_said_and_is_not_silence(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    x, y = changing
    n = 24 * 60
    deliver("a.csv", lines(range(n), x, y))
    last = FIRST + 69 * DAY
    run(network, last)
    with open_store(network.store_path) as store:
        status = network_status(network, store, moment(last), as_of=last)
        windows = store.read_windows(PAIR, lag=0)
    assert [s["series"] for s in status.silent_series] == ["A.NO2", "B.NO2"]
    assert status.silent_series[0]["hours_behind"] == 10 * 24
    assert [p["pair"] for p in status.silent_pairs] == [PAIR]
    assert np.isnan(windows["statistic"][-1])
    assert windows["reason"][-1]
    assert facts(network) == []


def test_a_stuck_sensor_is_not_computable_and_never_zero(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    x, y = changing
    y = y.copy()
    y[24 * 30 :] = 7.0
    deliver("a.csv", lines(range(24 * 50), x, y))
    run(network, FIRST + 49 * DAY)
    with open_store(network.store_path) as store:
        windows = store.read_windows(PAIR, lag=0)
    assert np.isnan(windows["statistic"][-1])
    assert "constant" in windows["reason"][-1]
    assert facts(network) == []


def test_late_readings_are_taken_in_and_the_windows_they_touch_computed_again(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    x, y = changing
    early = [h for h in range(24 * 60) if not 24 * 40 <= h < 24 * 45]
    text = HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in early)
    deliver("early.csv", text)
    run(network, FIRST + 59 * DAY)
    deliver("late.csv", lines(range(24 * 40, 24 * 45), x, y))
    (report,) = run(network, FIRST + 60 * DAY)
    assert report.counts["readings new"] == 2 * 24 * 5
    whole = network.work_folder / "whole"
    (whole / "feed").mkdir(parents=True)
    (whole / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    (whole / "feed" / "all.csv").write_text(lines(range(24 * 60), x, y), encoding="utf-8")
    undisturbed = load_settings(whole / "monitor.toml")
    run(undisturbed, FIRST + 60 * DAY)
    with open_store(network.store_path) as one, open_store(undisturbed.store_path) as other:
        ours, theirs = one.read_windows(PAIR), other.read_windows(PAIR)
        evidence = [one.read_evidence(), other.read_evidence()]
    for name in ("window_end", "lag", "statistic", "n_pairs", "n_effective", "p_value", "low", "high"):
        np.testing.assert_array_equal(ours[name], theirs[name], err_msg=name)
    for name in evidence[0]:
        if name != "night_id":
            np.testing.assert_array_equal(evidence[0][name], evidence[1][name], err_msg=name)


def test_a_pair_that_fails_does_not_stop_the_rest_and_is_taken_up_again(tmp_path: Path, changing):
    x, y = changing
    text = (
        SETTINGS.replace('"B NO2" = "B.NO2"', '"B NO2" = "B.NO2"\n"D NO2" = "D.NO2"')
        + '[[series]]\nkey = "D.NO2"\nunit = "ug/m3"\n[[pair]]\nfirst = "A.NO2"\nsecond = "B.NO2"\nadjusted_for = ["D.NO2"]\n'
    )
    (tmp_path / "feed").mkdir()
    (tmp_path / "monitor.toml").write_text(text, encoding="utf-8")
    settings = load_settings(tmp_path / "monitor.toml")
    feed = HEADER + "".join(
        row(h, "A", x[h]) + row(h, "B", y[h]) + row(h, "D", x[h] * 2) for h in range(24 * 30)
    )
    (tmp_path / "feed" / "a.csv").write_text(feed, encoding="utf-8")
    (first,) = run(settings, FIRST + 29 * DAY)
    assert first.outcome == "incomplete"
    assert first.exit_code is ExitCode.NIGHT_INCOMPLETE
    assert {t.part for t in first.troubles} == {f"pair {PAIR}[adjusted]"}
    with open_store(settings.store_path) as store:
        assert len(store.read_windows(PAIR)["lag"]) > 0
        assert store.last_finished_night().counts["left"] == {f"{PAIR}[adjusted]": FIRST.isoformat()}


def test_a_revision_that_removes_a_change_supersedes_its_alert_and_deletes_nothing(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    x, y = changing
    straight = related_series(24 * N_DAYS, 0.9, seed=3)[1]
    path = deliver("all.csv", lines(range(24 * N_DAYS), x, y))
    os.utime(path, (1_735_000_000, 1_735_000_000))
    last = FIRST + (N_DAYS - 1) * DAY
    run(network, last)
    assert len(facts(network)) == 1
    text = HEADER + "".join(row(h, "B", straight[h]) for h in range(24 * CHANGE_DAY, 24 * N_DAYS))
    os.utime(deliver("corrected.csv", text), (1_735_000_100, 1_735_000_100))
    run(network, last + DAY)
    (entry,) = entries_of(network, moment(last + DAY))
    assert [e.kind for e in entry.events] == [EventKind.RAISED, EventKind.SUPERSEDED]
    assert entry.standing.superseded


def test_a_step_that_breaks_leaves_the_reason_in_the_ledger_and_the_next_night_does_its_work(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    def broken(night):
        night.store.write_windows(
            night.id,
            {k: [] for k in ("pair_key",)},
        )
        return ""

    deliver("all.csv", lines(range(24 * 20), *changing))
    last = FIRST + 19 * DAY
    with open_store(network.store_path) as store:
        steps = tuple((name, broken if name == "evidence" else do) for name, do in STEPS)
        report = run_night(network, store, as_of=last, now=moment(last), steps=steps)
        assert report.outcome == "failed"
        assert report.exit_code is ExitCode.NIGHT_INCOMPLETE
        assert report.troubles[0].step == "evidence"
        assert store.nights(1)[0].outcome == "failed"
        assert len(store.read_windows(PAIR)["lag"]) == 0
        status = network_status(network, store, moment(last), as_of=last)
        assert status.exit_code is ExitCode.NIGHT_INCOMPLETE
        assert status.last_night["outcome"] == "failed"
        whole = run_night(network, store, as_of=last, now=moment(last))
        assert whole.outcome == "complete"
        assert len(store.read_windows(PAIR)["lag"]) > 0


def test_a_failed_night_of_a_walk_loses_no_alert(
    network: Settings, deliver: Callable[[str, str], Path], changing
):
    deliver("all.csv", lines(range(24 * N_DAYS), *changing))
    memory = NightMemory()

    def breaks(_night):
        raise OSError("disk full")

    with open_store(network.store_path) as store:
        for number in range(CHANGE_DAY - 2, N_DAYS):
            day = FIRST + number * DAY
            failing = CHANGE_DAY <= number < CHANGE_DAY + 10  # the nights on which the alert would be raised
            steps = (*STEPS, ("report", breaks)) if failing else STEPS
            report = run_night(network, store, as_of=day, now=moment(day), steps=steps, memory=memory)
            assert (report.outcome == "failed") == failing
    assert len(facts(network)) == 1


def test_a_night_of_a_walk_that_fails_is_written_down_and_the_next_one_makes_up_for_it(
    network: Settings, deliver: Callable[[str, str], Path], changing, monkeypatch
):
    deliver("all.csv", lines(range(24 * N_DAYS), *changing))
    broken = FIRST + 130 * DAY

    do = dict(STEPS)["evidence"]

    def fail_once(night):
        if night.as_of == broken:
            raise OSError("the disk is away")
        return do(night)

    failing = tuple((name, fail_once if name == "evidence" else step) for name, step in STEPS)
    monkeypatch.setattr("rhovane.pipeline.walk.STEPS", failing)
    monkeypatch.setattr("rhovane.pipeline.walk.LEAVING_WINDOWS", failing)
    reports = run(network, FIRST + 133 * DAY, first=FIRST + 128 * DAY)
    assert [r.outcome for r in reports] == [
        "complete",
        "complete",
        "failed",
        "complete",
        "complete",
        "complete",
    ]
    with open_store(network.store_path, read_only=True) as store:
        ledger = store.nights(10)[::-1]
        days = store.read_evidence(pair_keys=[PAIR])["day"]
    assert [n.outcome for n in ledger] == [r.outcome for r in reports]
    assert "the disk is away" in str(ledger[2].steps)
    assert np.array_equal(np.unique(np.diff(days)), [np.timedelta64(1, "D")]), (
        "the day of the failed night is there"
    )

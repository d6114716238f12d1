"""The morning list told from the store: verdicts, arrivals, groups, past nights as they stood."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import pytest

from rhovane.model import EventKind, NotFound
from rhovane.review import morning_of, pairs_now, record_decision, series_sheet, window_track
from rhovane.review.alert_list import alert_entries
from rhovane.store import open_store
from web.morning_network import (
    LAST_DAY,
    MORNING,
    N_DAYS,
    network_of_a_failed_night,
    network_of_one_night,
    reviewed_network,
    settings_in,
)

DAY = dt.timedelta(days=1)


@pytest.fixture(scope="module")
def network(tmp_path_factory: pytest.TempPathFactory):
    """Settings of a network with one alert, and its store open for reading."""
    settings = reviewed_network(tmp_path_factory.mktemp("network"))
    with open_store(settings.store_path) as store:
        yield settings, store


def test_a_complete_night_tells_what_arrived_and_what_it_raised(network):
    morning = morning_of(*network, MORNING)
    assert (morning.verdict, morning.missed, morning.is_newest) == ("complete", 0, True)
    (arrival,) = morning.arrivals
    assert (arrival.source, arrival.files, arrival.new, arrival.rejected) == ("air", 1, 2 * 24 * N_DAYS, 1)
    assert arrival.first == dt.datetime(2025, 1, 1, tzinfo=dt.UTC)
    assert [row["line"] for row in morning.rejected] == [2 * 24 * N_DAYS + 2]
    (group,) = morning.raised
    assert (group.kind, group.name, len(group.entries)) == ("pair", "A.NO2~B.NO2", 1)
    assert morning.held == ("A.NO2~B.NO2",)
    assert [s.what for s in morning.silent_series] == ["C.NO2"]
    assert [s.what for s in morning.silent_pairs] == ["C.NO2~A.NO2"]


def test_a_morning_days_later_counts_the_nights_that_are_missing(network):
    morning = morning_of(*network, MORNING + 4 * DAY)
    assert (morning.verdict, morning.missed) == ("missed", 4)
    assert morning_of(*network, MORNING + 4 * DAY, as_of=LAST_DAY).verdict == "complete"


def test_the_verdict_before_any_night_is_never(tmp_path: Path):
    settings = settings_in(tmp_path)
    with open_store(settings.store_path) as store:
        morning = morning_of(settings, store, MORNING)
        assert (morning.verdict, morning.night, morning.raised) == ("never", None, ())
        assert len(morning.silent_series) == 3


def test_a_failed_night_keeps_its_step_and_reason(tmp_path: Path):
    settings = network_of_a_failed_night(tmp_path)
    with open_store(settings.store_path) as store:
        morning = morning_of(settings, store, dt.datetime(2025, 1, 5, 7, tzinfo=dt.UTC))
    assert morning.verdict == "failed"
    (trouble,) = morning.troubles
    assert trouble["step"] == "windows"
    assert "the disk said" in trouble["reason"]
    assert morning.previous.as_of == dt.date(2025, 1, 3)


def test_a_night_that_began_and_did_not_end_is_interrupted(tmp_path: Path):
    settings = network_of_one_night(tmp_path)
    now = dt.datetime(2025, 1, 5, 3, 40, tzinfo=dt.UTC)
    with open_store(settings.store_path) as store:
        store.begin_night(
            kind="nightly", as_of=dt.date(2025, 1, 4), now=now, settings_hash="x", program_version="0"
        )
        assert morning_of(settings, store, now).verdict == "interrupted"


def test_a_past_night_is_told_with_the_log_as_it_stood(tmp_path: Path):
    settings = reviewed_network(tmp_path)
    later = MORNING + DAY
    with open_store(settings.store_path) as store:
        record_decision(store, 1, EventKind.ACKNOWLEDGED, now=MORNING, who="ana")
        second = store.begin_night(
            kind="nightly", as_of=LAST_DAY + DAY, now=later, settings_hash="x", program_version="0"
        )
        store.finish_night(second, now=later, outcome="complete", steps=[], counts={})
        past = morning_of(settings, store, later, night=LAST_DAY)
        newest = morning_of(settings, store, later)
        assert (past.n_raised, past.unreviewed, past.is_newest) == (1, 1, False)
        assert (newest.n_raised, newest.unreviewed, newest.is_newest) == (0, 0, True)
        assert len(newest.open_groups) == 1  # it lasts, although somebody has seen it
        assert newest.arrivals == ()
        with pytest.raises(NotFound, match="the newest is"):
            morning_of(settings, store, later, night=dt.date(2020, 1, 1))


def test_the_newest_window_of_each_pair_is_told_with_its_open_alert(network):
    settings, store = network
    first, second = pairs_now(settings, store, alert_entries(store, MORNING))
    assert first.open_alerts == (1,)
    assert first.low < first.statistic < first.high
    assert second.statistic is None
    assert second.reason
    track = window_track(settings, store, "A.NO2~B.NO2")
    assert track.statistic[-1] == first.statistic
    assert track.map[-1, list(track.lags).index(0)] == first.statistic
    part = track.between(LAST_DAY - 3 * DAY, LAST_DAY)
    assert len(part) == len(part.map) == 4


def test_a_series_sheet_counts_readings_by_flag_and_day(network):
    settings, store = network
    entries = alert_entries(store, MORNING)
    sheet = series_sheet(settings, store, "A.NO2", entries, last=LAST_DAY + 2 * DAY, n_days=10)
    assert sheet.days.by_flag["pass"].tolist() == [24] * 8 + [0, 0]
    assert sheet.days.by_flag["no reading"].tolist() == [0] * 8 + [24, 24]
    assert sheet.days.observations(("pass", "suspect")).tolist() == [24] * 8 + [0, 0]
    assert [p.key for p in sheet.pairs] == ["A.NO2~B.NO2", "C.NO2~A.NO2"]
    assert [e.alert.id for e in sheet.entries] == [1]
    with pytest.raises(NotFound, match="no such series"):
        series_sheet(settings, store, "Z.NO2", entries, last=LAST_DAY, n_days=10)

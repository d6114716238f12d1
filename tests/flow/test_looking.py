"""Sheets show the very numbers that the night recorded."""

from __future__ import annotations

import datetime as dt
import re
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from reference.rank_correlation import spearman
from rhovane.cli import main
from rhovane.model import ExitCode
from rhovane.pipeline.looking import alert_sheet, pair_sheet, stored_evidence
from rhovane.report import alert_document, night_document
from rhovane.review import alert_entry, morning_of
from rhovane.store import open_store
from web.morning_network import HOSTILE, LAST_DAY, MORNING, reviewed_network, settings_in


@pytest.fixture(scope="module")
def network(tmp_path_factory: pytest.TempPathFactory):
    settings = reviewed_network(tmp_path_factory.mktemp("network"))
    with open_store(settings.store_path, read_only=True) as store:
        yield settings, store, stored_evidence(settings, store, MORNING).replayed(settings)


def test_the_replayed_evidence_is_the_one_that_raised_the_alert(network):
    _settings, store, tracks = network
    alert = alert_entry(store, 1, MORNING).alert
    track = tracks.of(alert.pair_key)
    day = np.flatnonzero(track.day == np.datetime64(alert.alarm_day))[0]
    assert track.evidence[day] == alert.evidence
    assert track.threshold[day] == alert.threshold
    before = track.evidence[:day]
    assert (before[np.isfinite(before)] <= alert.threshold).all()
    assert tracks.of("no~pair") is None


def test_the_scatter_has_the_correlation_that_was_recorded(network):
    settings, store, tracks = network
    entry = alert_entry(store, 1, MORNING)
    view = alert_sheet(settings, store, entry, tracks)
    for scatter, estimate in ((view.before, entry.alert.before), (view.after, entry.alert.after)):
        assert len(scatter.x) == estimate.n_pairs
        assert spearman(scatter.x, scatter.y) == pytest.approx(estimate.statistic, abs=1e-12)
        assert 0 < scatter.x.min() < scatter.x.max() < 1


def test_charts_of_an_alert_show_its_reference_and_its_days(network):
    settings, store, tracks = network
    entry = alert_entry(store, 1, MORNING)
    pictures = alert_sheet(settings, store, entry, tracks).pictures
    onset = np.datetime64(entry.alert.onset_day)
    assert pictures.windows.day[0] == onset - 90
    assert pictures.windows.day[-1] == np.datetime64(LAST_DAY)
    before = pictures.windows.statistic[pictures.windows.day < onset]
    inside = (before >= pictures.reference_low) & (before <= pictures.reference_high)
    assert 0.85 <= inside.mean() <= 0.95
    early = alert_sheet(settings, store, entry, tracks, until=entry.alert.alarm_day)
    assert early.pictures.windows.day[-1] == np.datetime64(entry.alert.alarm_day)


def test_an_alert_of_a_pair_that_is_watched_no_more_still_has_its_facts(network):
    settings, store, _ = network
    fewer = settings.model_copy(update={"pair": settings.pair[1:]})
    view = alert_sheet(fewer, store, alert_entry(store, 1, MORNING), None)
    assert view.pictures is None
    assert "not watched any more" in alert_document(fewer, view, MORNING)


def test_a_pair_without_any_correlation_has_a_sheet_that_says_so(network):
    settings, store, tracks = network
    view = pair_sheet(settings, store, "C.NO2~A.NO2", MORNING, tracks)
    assert np.isnan(view.pictures.windows.statistic).all()


@pytest.mark.parametrize("kind", ["night", "alert"])
def test_a_report_needs_nothing_but_itself(network, kind):
    settings, store, tracks = network
    view = alert_sheet(settings, store, alert_entry(store, 1, MORNING), tracks)
    if kind == "night":
        text = night_document(settings, morning_of(settings, store, MORNING), [view], MORNING)
    else:
        text = alert_document(settings, view, MORNING)
    assert not re.search(r"(?:src|href)=\"(?!#)", text)
    assert "url(" not in text
    assert "<script" not in text
    assert HOSTILE not in text
    assert "default-src 'none'" in text
    for words in ("Association is not cause", "crossed its threshold", "up to ingest 1", "UTC+00:00"):
        assert words in text, words
    assert text.count("<svg") > 8


def run(*args: str):
    return CliRunner().invoke(main, list(args), catch_exceptions=False)


def test_the_report_command_writes_night_and_handover_sheet(network, tmp_path: Path):
    settings, _store, _ = network
    config = str(settings.origin)
    done = run("report", "--night", str(LAST_DAY), "--config", config)
    assert done.exit_code == ExitCode.WELL
    written = settings.work_folder / "reports" / f"night-{LAST_DAY}.html"
    assert f"Written: {written}" in done.output
    assert 'id="alert-1"' in written.read_text("utf-8")
    assert run("report", "--alert", "1", "--out", str(tmp_path / "a.html"), "--config", config).exit_code == 0
    assert "handover sheet" in (tmp_path / "a.html").read_text("utf-8")
    assert not list(settings.work_folder.glob("reports/.*"))


def test_a_report_of_what_is_not_there_says_so(network, tmp_path: Path):
    settings, _, _ = network
    config = str(settings.origin)
    missing = run("report", "--night", "2020-01-01", "--config", config)
    assert missing.exit_code == ExitCode.FAILED
    assert "No night covers up to 2020-01-01" in missing.output
    assert "no such alert" in run("report", "--alert", "9", "--config", config).output
    both = run("report", "--alert", "1", "--night", "2025-06-19", "--config", config)
    assert "not both" in both.output
    nowhere = run("report", "--out", str(tmp_path / "no" / "a.html"), "--config", config)
    assert "cannot be written" in nowhere.output


def test_the_page_command_refuses_other_addresses_without_a_token(network):
    settings, _, _ = network
    done = run("page", "--host", "0.0.0.0", "--port", "0", "--config", str(settings.origin))
    assert done.exit_code == ExitCode.FAILED
    assert "--token-file" in done.output


def test_evidence_of_a_store_without_nights_is_none(tmp_path: Path):
    settings = settings_in(tmp_path)
    with open_store(settings.store_path) as store:
        assert stored_evidence(settings, store, dt.datetime(2025, 1, 1, tzinfo=dt.UTC)) is None

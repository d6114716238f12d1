"""Bad input: each kind gives a message with file, line, column or key and the remedy; good rows still go in."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from pathlib import Path

import pytest

from flow.small_network import HEADER, SETTINGS, START, row
from rhovane.model import SettingsError
from rhovane.pipeline import STEPS, run_night
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store

NOW = dt.datetime(2025, 1, 3, 4, tzinfo=dt.UTC)
INGEST_ONLY = tuple(step for step in STEPS if step[0] == "ingest")
GOOD = row(0, "A", 10.5) + row(1, "A", 11.0)


def read_once(settings: Settings):
    """One night's ingest; its report, the current readings of A, and the quarantine."""
    with open_store(settings.store_path) as store:
        report = run_night(settings, store, as_of=dt.date(2025, 1, 2), now=NOW, steps=INGEST_ONLY)
        found = store.read_readings(["A.NO2"], START, START + dt.timedelta(days=2))
        values = [v for _, v in sorted(zip(found.ts.tolist(), found.value.tolist(), strict=True))]
        rejected = store.rejected_rows()
    rows = list(zip(*(rejected[k] for k in ("path", "line", "column_name", "raw", "reason")), strict=True))
    return report, values, rows


@pytest.mark.parametrize(
    ("bad", "line", "column", "told"),
    [
        (row(2, "A", "n/a"), 4, "value", "n/a"),
        (row(2, "A", 12).replace("2025-01-01 02:00", "2025-01-01 26:00"), 4, "time", "26:00"),
        (row(2, "A", 12, unit="degC"), 4, "unit", "degC"),
        (row(2, "A", 12, flag="Z"), 4, "flag", "Z"),
        (row(2, "C", 12), 4, "", "C NO2"),
        (row(0, "A", 10.5), 4, "", "line 2"),
        ("2025-01-01 02:00,A,NO2\n", 4, "", ""),
    ],
    ids=["text", "impossible time", "unit", "flag code", "unknown code", "repeated row", "too few columns"],
)
def test_a_bad_row_is_kept_with_its_place_and_reason_and_the_good_rows_go_in(
    network: Settings, deliver: Callable[[str, str], Path], bad: str, line: int, column: str, told: str
):
    deliver("a.csv", HEADER + GOOD + bad)
    report, values, rejected = read_once(network)
    assert values == [10.5, 11.0]
    assert len(rejected) == 1
    path, at, in_column, raw, reason = rejected[0]
    assert (path, at) == ("feed/a.csv", line)
    assert in_column == column or column == ""
    assert told in f"{raw} {reason}"
    assert len(reason) > 20
    assert report.counts["rows rejected"] == 1
    assert report.outcome == "complete"


def test_a_second_reading_of_the_same_bytes_adds_nothing(
    network: Settings, deliver: Callable[[str, str], Path]
):
    text = HEADER + GOOD + row(2, "A", "n/a")
    deliver("a.csv", text)
    read_once(network)
    deliver("copy.csv", text)
    report, values, rejected = read_once(network)
    assert values == [10.5, 11.0]
    assert len(rejected) == 1
    assert report.counts["readings new"] == report.counts["readings revised"] == 0


def test_an_empty_file_stands_in_quarantine_as_a_whole(
    network: Settings, deliver: Callable[[str, str], Path]
):
    deliver("a.csv", HEADER + GOOD)
    deliver("empty.csv", "")
    _, values, rejected = read_once(network)
    assert values == [10.5, 11.0]
    assert [(r[0], r[1]) for r in rejected] == [("feed/empty.csv", 0)]
    assert "empty" in rejected[0][4].lower()


def test_a_file_with_the_wrong_delimiter_says_so(network: Settings, deliver: Callable[[str, str], Path]):
    deliver("a.csv", (HEADER + GOOD).replace(",", ";"))
    _, values, rejected = read_once(network)
    assert values == []
    assert rejected
    assert "delimiter" in " ".join(r[4] for r in rejected)


def test_a_file_cut_in_the_middle_keeps_its_whole_rows(
    network: Settings, deliver: Callable[[str, str], Path]
):
    deliver("a.csv", HEADER + GOOD + row(2, "A", 12)[:20])
    _, values, rejected = read_once(network)
    assert values == [10.5, 11.0]
    assert [(r[0], r[1]) for r in rejected] == [("feed/a.csv", 4)]
    assert "cut" in rejected[0][4]


def test_a_missing_folder_is_told_and_the_night_goes_on_incomplete(tmp_path: Path):
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    settings = load_settings(tmp_path / "monitor.toml")
    report, values, _ = read_once(settings)
    assert report.outcome == "incomplete"
    assert values == []
    assert "feed" in report.troubles[0].reason
    assert "source air" in report.troubles[0].part


def test_a_value_that_changes_later_is_revised_and_the_earlier_one_kept(
    network: Settings, deliver: Callable[[str, str], Path]
):
    import os

    first = deliver("a.csv", HEADER + GOOD)
    os.utime(first, (1_700_000_000, 1_700_000_000))
    read_once(network)
    second = deliver("b.csv", HEADER + row(0, "A", 99.0))
    os.utime(second, (1_700_000_100, 1_700_000_100))
    report, values, _ = read_once(network)
    assert values == [99.0, 11.0]
    assert report.counts["readings revised"] == 1
    with open_store(network.store_path) as store:
        earlier = store.read_readings(["A.NO2"], START, START + dt.timedelta(days=1), max_ingest_id=1)
        assert sorted(earlier.value.tolist()) == [10.5, 11.0]


def test_a_clock_that_is_not_declared_is_refused_before_anything_is_read(tmp_path: Path):
    (tmp_path / "monitor.toml").write_text(SETTINGS.replace('clock = "UTC"\n', ""), encoding="utf-8")
    with pytest.raises(SettingsError, match=r"source\[0\] \(air\)\.clock: must be given"):
        load_settings(tmp_path / "monitor.toml")


def test_an_unknown_key_is_refused_before_anything_is_read(tmp_path: Path):
    (tmp_path / "monitor.toml").write_text(SETTINGS.replace("window_hours", "window_hour"), encoding="utf-8")
    with pytest.raises(SettingsError, match=r"correlation\.window_hour: not a setting"):
        load_settings(tmp_path / "monitor.toml")

"""Exports: complete files or none."""

import csv
import datetime as dt

import pytest

from rhovane.model import RhovaneError
from rhovane.store import NewAlert, NewAlertEvent, read_parquet
from store.building import KEYS, NOW, parsed_file

ROWS = [
    {"series": KEYS[0], "hour": 0, "value": 1.5},
    {"series": KEYS[0], "hour": 1, "value": None},
    {"series": KEYS[1], "hour": 0, "value": 120.0, "flag": 3},
]


def read_csv(path):
    with path.open(newline="") as stream:
        return list(csv.DictReader(stream))


def test_readings_are_written_with_units_and_words(store, tmp_path):
    store.append_files([parsed_file(ROWS)], now=NOW)
    assert store.export_readings(tmp_path / "r.csv") == 3
    rows = read_csv(tmp_path / "r.csv")
    assert rows[0] == {
        "series": "ASHFORD.NO2", "unit": "ug/m3", "hour_start_utc": "2023-11-14 22:00:00", "value": "1.5",
        "flag": "pass", "stage": "preliminary", "result_time_utc": "2023-11-14 22:00:00", "ingest_id": "1",
    }  # fmt: skip
    assert [(r["value"], r["flag"]) for r in rows] == [("1.5", "pass"), ("", "missing"), ("120.0", "suspect")]
    assert store.export_readings(tmp_path / "r.parquet") == 3
    assert read_parquet(tmp_path / "r.parquet")["value"].tolist()[::2] == [1.5, 120.0]


def test_readings_of_an_earlier_ingest_are_written_as_they_were(store, tmp_path):
    store.append_files([parsed_file(ROWS)], now=NOW)
    store.append_files([parsed_file([ROWS[0] | {"value": 9.0, "stage": 2}])], now=NOW)
    assert store.export_readings(tmp_path / "then.csv", max_ingest_id=1) == 3
    assert store.export_readings(tmp_path / "now.csv") == 3
    assert [read_csv(tmp_path / name)[0]["value"] for name in ("then.csv", "now.csv")] == ["1.5", "9.0"]
    assert store.export_readings(tmp_path / "before.csv", max_ingest_id=0) == 0


def test_windows_and_alerts_are_written(store, tmp_path):
    store.write_windows(
        1,
        {
            "pair_key": ["b", "a"], "window_end": [3600, 3600], "lag": -1, "statistic": [0.5, float("nan")],
            "n_pairs": 9, "coverage": 1.0, "n_effective": 5.0, "p_value": 0.1, "low": 0.1, "high": 0.9,
            "reason": ["", "too few pairs"],
        },
    )  # fmt: skip
    assert store.export_windows(tmp_path / "w.csv") == 2
    rows = read_csv(tmp_path / "w.csv")
    assert [(r["pair"], r["statistic"], r["reason"]) for r in rows] == [
        ("a", "", "too few pairs"),
        ("b", "0.5", ""),
    ]
    assert rows[0]["window_end_utc"] == "1970-01-01 01:00:00"
    store.append_alerts(
        [NewAlert("a", dt.date(2024, 5, 1), 1, {"x": 1}), NewAlert("b", dt.date(2024, 5, 1), 1)]
    )
    store.append_alert_events(
        [NewAlertEvent(1, NOW, "raised"), NewAlertEvent(1, NOW, "acknowledged", "k", 'said "no"')]
    )
    assert store.export_alerts(tmp_path / "a.csv") == 3
    rows = read_csv(tmp_path / "a.csv")
    assert [(r["alert_id"], r["event_kind"], r["note"]) for r in rows] == [
        ("1", "raised", ""),
        ("1", "acknowledged", 'said "no"'),
        ("2", "", ""),
    ]


def test_failed_export_leaves_the_earlier_file_and_nothing_else(store, tmp_path):
    place = tmp_path / "it's here"
    place.mkdir()
    target = place / "r.csv"
    store.append_files([parsed_file(ROWS)], now=NOW)
    assert store.export_readings(target) == 3
    before = target.read_bytes()
    store.execute("alter table series rename column unit to units")
    with pytest.raises(RhovaneError, match="the database reports"):
        store.export_readings(target)
    assert target.read_bytes() == before
    assert [p.name for p in place.iterdir()] == ["r.csv"]


def test_place_that_cannot_be_written_is_named_with_a_remedy(store, tmp_path):
    with pytest.raises(RhovaneError, match=r"ends in \.csv, \.parquet or \.json"):
        store.export_windows(tmp_path / "w.xlsx")
    (tmp_path / "taken.csv").mkdir()
    with pytest.raises(RhovaneError, match="cannot be replaced"):
        store.export_windows(tmp_path / "taken.csv")
    assert not list(tmp_path.glob(".*"))
    with pytest.raises(RhovaneError, match="no such folder"):
        store.export_windows(tmp_path / "none" / "w.csv")

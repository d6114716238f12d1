"""When the settings of a source change, its files are read again, and the store is as if it had always been so."""

from __future__ import annotations

import datetime as dt
import os
from pathlib import Path

import numpy as np
import pytest

from flow.small_network import HEADER, SETTINGS, START, row
from rhovane.pipeline import STEPS, run_night
from rhovane.pipeline.arrays import load_grid
from rhovane.settings import Settings, load_settings
from rhovane.store import Store, open_store

NOW = dt.datetime(2025, 3, 1, 4, tzinfo=dt.UTC)
DAYS = 4
SERIES = ["A.NO2", "B.NO2"]


def feed(folder: Path) -> None:
    """Two files that overlap and disagree, one with a code that nobody mapped."""
    (folder / "feed").mkdir(parents=True)
    for name, hours, plus in (("a.csv", range(60), 0), ("b.csv", range(40, 24 * DAYS), 5)):
        lines = [
            row(h, s, h % 7 + plus + (s == "B"), flag="S" if h % 11 == 0 else "G")
            for h in hours
            for s in "AB"
        ]
        (folder / "feed" / name).write_text(HEADER + "".join(lines))


def settings_in(folder: Path, *changes: tuple[str, str]) -> Settings:
    text = SETTINGS
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    (folder / "monitor.toml").write_text(text)
    return load_settings(folder / "monitor.toml")


def night(settings: Settings, store: Store) -> str:
    day = (START + dt.timedelta(days=DAYS)).date()
    report = run_night(settings, store, as_of=day, now=NOW, steps=STEPS[:2])
    assert report.outcome == "complete", report.troubles
    return report.steps[0].summary


def seen(settings: Settings, store: Store, upto: int | None = None) -> np.ndarray:
    """Everything on the grid, from a day before the first reading to a day after the last."""
    first = START.date() - dt.timedelta(days=1)
    last = first + dt.timedelta(days=DAYS + 2)
    return load_grid(settings, store, SERIES, first, last, max_ingest_id=upto).values


CHANGES = {
    "clock": [('clock = "UTC"', 'clock = "+02:00"')],
    "label": [('label = "start"', 'label = "end"')],
    "flags": [('"F" = "fail"', '"F" = "fail"\n"S" = "pass"')],
    "unit": [
        ('"ug/m3"', '"ug/m3"'),
        ("[source.flags]", '[source.unit_names]\n"ug/m3" = "mg/m3"\n[source.flags]'),
    ],
    "series": [('"A NO2" = "A.NO2"', '"A NO2" = "B.NO2"'), ('"B NO2" = "B.NO2"', '"B NO2" = "A.NO2"')],
    "missing": [('missing = ["NA"]', 'missing = ["NA", "3"]')],
}


@pytest.mark.parametrize("changes", CHANGES.values(), ids=CHANGES)
def test_the_store_is_as_if_the_new_settings_had_always_held(tmp_path: Path, changes):
    for name in ("old", "new"):
        feed(tmp_path / name)
    before, fresh = settings_in(tmp_path / "old"), settings_in(tmp_path / "new", *changes)
    with open_store(before.store_path) as store:
        night(before, store)
        as_read_first, data_version = seen(before, store), store.last_ingest_id()
        changed = settings_in(tmp_path / "old", *changes)
        told = night(changed, store)
        assert "source air: settings changed; 2 files read again" in told
        found = seen(changed, store)
        assert "settings changed" not in night(changed, store)  # once
        for outcome in store.rows(
            "select rows_read, rows_new + rows_revised + rows_unchanged + rows_rejected from ingest"
        ):
            assert outcome[0] == outcome[1]
        # Nothing is lost: what the first night saw can be rebuilt.
        rebuilt = seen(before, store, upto=data_version)
        np.testing.assert_array_equal(rebuilt, as_read_first)
    with open_store(fresh.store_path) as store:
        night(fresh, store)
        expected = seen(fresh, store)
    np.testing.assert_array_equal(found, expected)
    assert not np.array_equal(found, as_read_first, equal_nan=True)


def test_settings_changed_and_changed_back_give_what_was_there_before(tmp_path: Path):
    feed(tmp_path)
    first = settings_in(tmp_path)
    with open_store(first.store_path) as store:
        night(first, store)
        before = seen(first, store)
        night(settings_in(tmp_path, *CHANGES["clock"]), store)
        again = settings_in(tmp_path)
        assert "2 files read again" in night(again, store)
        np.testing.assert_array_equal(seen(again, store), before)


def test_files_that_are_gone_keep_what_they_delivered(tmp_path: Path):
    feed(tmp_path)
    first = settings_in(tmp_path)
    with open_store(first.store_path) as store:
        night(first, store)
        before = seen(first, store)
        (tmp_path / "feed/a.csv").unlink()
        changed = settings_in(tmp_path, *CHANGES["missing"])
        told = night(changed, store)
        assert "1 files read again, 1 no longer there" in told
        found = seen(changed, store)
    kept = slice(24, 24 + 40)  # hours that only the vanished file had
    np.testing.assert_array_equal(found[kept], before[kept])


def test_settings_that_change_no_reading_read_nothing_again(tmp_path: Path):
    feed(tmp_path)
    with open_store(tmp_path / "rhovane.duckdb") as store:
        night(settings_in(tmp_path), store)
        calmer = settings_in(
            tmp_path, ('missing = ["NA"]', 'missing = ["NA"]\nsize_limit_mb = 9\nsettle_s = 1')
        )
        assert "settings changed" not in night(calmer, store)


def test_a_store_from_before_settings_were_remembered_reads_again_only_after_a_change(tmp_path: Path):
    feed(tmp_path)
    first = settings_in(tmp_path)
    with open_store(first.store_path) as store:
        night(first, store)
        with store.transaction():
            store.execute("update ingest set rules = null")
            store.execute("update feed_file set rules = null")
    with open_store(first.store_path) as store:
        assert "settings changed" not in night(first, store)
        assert "2 files read again" in night(settings_in(tmp_path, *CHANGES["flags"]), store)


def test_sources_that_share_a_series_are_read_again_together(tmp_path: Path):
    feed(tmp_path)
    (tmp_path / "other").mkdir()
    (tmp_path / "other/c.csv").write_text(
        "time,v\n" + "".join(f"{START + dt.timedelta(hours=h):%Y-%m-%d %H:%M},{h}\n" for h in range(50))
    )
    second = (
        '\n[[source]]\nname = "spare"\nform = "wide csv"\nfiles = "other/*.csv"\nclock = "UTC"\nlabel = "start"\n'
        'columns = { time = "time" }\nseries = { v = "A.NO2" }\n\n[[series]]\nkey = "A.NO2"'
    )
    with_two = ('\n[[series]]\nkey = "A.NO2"', second)
    with open_store(tmp_path / "rhovane.duckdb") as store:
        night(settings_in(tmp_path, with_two), store)
        told = night(settings_in(tmp_path, with_two, *CHANGES["clock"]), store)
    assert "source air: settings changed; 2 files read again" in told
    assert "source spare" in told


def test_files_that_are_still_being_written_are_left_for_the_next_pass(tmp_path: Path):
    feed(tmp_path)
    settings = settings_in(tmp_path, ('missing = ["NA"]', 'missing = ["NA"]\nsettle_s = 60'))
    moment = NOW.timestamp()
    os.utime(tmp_path / "feed/a.csv", (moment - 300, moment - 300))
    os.utime(tmp_path / "feed/b.csv", (moment - 20, moment - 20))
    with open_store(settings.store_path) as store:
        assert "1 files: " in (told := night(settings, store))
        assert "1 files left for the next pass" in told
        os.utime(tmp_path / "feed/b.csv", (moment - 60, moment - 60))
        assert "left for the next pass" not in night(settings, store)
        assert store.ingests()["path"].tolist() == ["feed/a.csv", "feed/b.csv"]

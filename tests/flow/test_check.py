"""The dry run tells beforehand what the ingest then does, and names what looks wrong with numbers."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import numpy as np
import pytest

from flow.small_network import HEADER, SETTINGS, related_series, row
from rhovane.pipeline.checking import dry_run, ingest_now
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store

NOW = dt.datetime(2025, 6, 1, tzinfo=dt.UTC)
OLD, NEW = range(40 * 24), range(40 * 24, 60 * 24)


@pytest.fixture
def settings(tmp_path: Path) -> Settings:
    (tmp_path / "feed").mkdir()
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    return load_settings(tmp_path / "monitor.toml")


def deliver(settings: Settings, name: str, hours: range, a: np.ndarray, b: np.ndarray) -> None:
    lines = [row(h, station, values[h]) for h in hours for station, values in (("A", a), ("B", b))]
    (settings.work_folder / "feed" / name).write_text(HEADER + "".join(lines))


def signs_after(settings: Settings, a: np.ndarray, b: np.ndarray) -> dict[tuple[str, str], str]:
    """Signs in new readings, by series and kind, after the old ones have been taken in."""
    with open_store(settings.store_path) as store:
        deliver(settings, "old.csv", OLD, *related_series(60 * 24, 0.9, 3))
        ingest_now(settings, store, (), None, now=NOW)
        deliver(settings, "new.csv", NEW, a, b)
        (source,) = dry_run(settings, store)
    return {(sign.series, sign.kind): sign.text for sign in source.signs}


def test_what_is_told_is_what_happens(settings: Settings):
    rng = np.random.default_rng(9)
    with open_store(settings.store_path) as store:
        for turn in range(6):
            lines = []
            for _ in range(60):
                value = rng.choice([1.0, 2.0, 3.0, "NA", "oops"])
                lines.append(
                    row(
                        int(rng.integers(30)),
                        str(rng.choice(["A", "B", "X"])),
                        value,
                        flag=str(rng.choice(["G", "F"])),
                    )
                )
            (settings.work_folder / "feed" / f"{turn}.csv").write_text(HEADER + "".join(lines))
            (told,) = dry_run(settings, store)
            done = ingest_now(settings, store, (), None, now=NOW)
            fresh = [o for o in done.outcomes if not o.already_known]
            assert (told.new, told.revised, told.unchanged) == tuple(
                sum(getattr(o, name) for o in fresh) for name in ("new", "revised", "unchanged")
            )
            assert sum(told.rejected_by_reason.values()) + told.good == told.rows
        (after,) = dry_run(settings, store)
        assert (after.new, after.known_files, after.signs) == (0, 6, ())
        assert sum(after.hours_by_series.values()) <= 60


def test_sound_readings_give_no_sign(settings: Settings):
    assert signs_after(settings, *related_series(60 * 24, 0.9, 3)) == {}


def test_a_late_logger_is_named(settings: Settings):
    a, b = related_series(60 * 24, 0.9, 3)
    found = signs_after(settings, np.roll(a, 1), b)
    assert "1 h later against B.NO2 than before" in found["A.NO2", "clock"]


def test_parts_per_billion_are_named(settings: Settings):
    a, b = related_series(60 * 24, 0.9, 3)
    found = signs_after(settings, np.round(np.abs(a) / 1.9125, 1), b)
    text = found["A.NO2", "unit"]
    assert "its ratio to B.NO2 is 0.53" in text
    assert "ppb to µg/m³ at 2" in text


def test_codes_stuck_values_and_twins_are_named(settings: Settings):
    a, b = related_series(60 * 24, 0.9, 3)
    coded = a.copy()
    coded[[1000, 1100, 1200]] = -999
    assert "the value -999 ug/m3 comes 3 times" in signs_after(settings, coded, b)["A.NO2", "sentinel"]


def test_a_stuck_instrument_is_named(settings: Settings):
    a, b = related_series(60 * 24, 0.9, 3)
    a[1000:1050] = 21.5
    found = signs_after(settings, a, b)["A.NO2", "flat"]
    assert "stands at 21.5 ug/m3 for 50 hours from 2025-02-11 16:00 UTC" in found


def test_a_feed_delivered_twice_is_named(settings: Settings):
    a, _ = related_series(60 * 24, 0.9, 3)
    found = signs_after(settings, a, a)
    assert "equals B.NO2 in 480 of 480 hours" in found["A.NO2", "twin"]

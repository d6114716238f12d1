"""Exports: as of a night exactly what its store held; and an export taken in again gives the same readings."""

from __future__ import annotations

import datetime as dt
import json
import shutil
from pathlib import Path

import duckdb
import numpy as np
import pytest

from flow.small_network import HEADER, SETTINGS, START, related_series
from rhovane.model import EventKind, NotFound
from rhovane.pipeline import run_night
from rhovane.pipeline.checking import ingest_now
from rhovane.review import export_table, logged_alerts, record_decision
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store

DAY = dt.timedelta(days=1)
STAGED = SETTINGS.replace('flag = "flag"', 'flag = "flag"\nstage = "stage"\nissued = "issued"').replace(
    "[source.flags]", '[source.stages]\n"P" = "preliminary"\n"V" = "verified"\n[source.flags]'
)
KINDS = ("readings", "windows", "alerts")
CHANGE_DAY = 90
N_DAYS = 130
NIGHTS = (100, 101, 115, 129)  # the relation breaks on day 90; revisions and verified values keep arriving


def moment(day: int) -> dt.datetime:
    return START + (day + 1) * DAY + dt.timedelta(hours=4)


def lines(hours: range, x: np.ndarray, y: np.ndarray, stage: str, day: int) -> str:
    issued = f"{START + (day + 1) * DAY:%Y-%m-%d %H:%M}"
    rows = [HEADER.strip() + ",stage,issued\n"]
    for h in hours:
        for station, values in (("A", x), ("B", y)):
            value = "NA" if np.isnan(values[h]) else values[h]
            rows.append(
                f"{START + dt.timedelta(hours=h):%Y-%m-%d %H:%M},{station},NO2,{value},ug/m3,G,{stage},{issued}\n"
            )
    return "".join(rows)


@pytest.fixture(scope="module")
def history(tmp_path_factory: pytest.TempPathFactory) -> tuple[Settings, dict[dt.date, Path]]:
    """A network walked over some nights, with a copy of its store made after each of them."""
    folder = tmp_path_factory.mktemp("history")
    (folder / "feed").mkdir()
    text = STAGED.replace("false_alarms_per_year = 1", "false_alarms_per_year = 1\nbaseline_days = 30")
    (folder / "monitor.toml").write_text(text, encoding="utf-8")
    settings = load_settings(folder / "monitor.toml")
    rng = np.random.default_rng(6)
    n = 24 * N_DAYS
    x, y = related_series(n, 0.9, seed=5)
    y[24 * CHANGE_DAY :] = related_series(n, 0.0, seed=6)[1][24 * CHANGE_DAY :]
    x[rng.random(n) < 0.02] = np.nan
    copies = {}
    done = 0
    for number, day in enumerate(NIGHTS):
        begin = max(0, done - 24 * 5)  # overlap: the same values again, issued later
        if number:
            revised = begin + np.flatnonzero(rng.random(done - begin) < 0.1)
            x[revised] = np.round(x[revised] + 1.0, 1)
        feed = lines(range(begin, 24 * (day + 1)), x, y, "P", day)
        bad = f"{START:%Y-%m-%d %H:%M},A,NO2,broken {day},ug/m3,G,P,{START:%Y-%m-%d %H:%M}\n"
        (folder / "feed" / f"{day:03d}.csv").write_text(feed + bad, encoding="utf-8")
        if number >= 2:  # the first weeks are verified later, most of them unchanged
            verified = lines(range(24 * 40 * number), x, y, "V", day)
            (folder / "feed" / f"{day:03d} verified.csv").write_text(verified, encoding="utf-8")
        as_of = (START + day * DAY).date()
        with open_store(settings.store_path) as store:
            report = run_night(settings, store, as_of=as_of, now=moment(day))
            assert report.outcome == "complete", report.troubles
        copies[as_of] = folder / f"copy {day}.duckdb"
        shutil.copyfile(settings.store_path, copies[as_of])
        done = 24 * (day + 1)
        with open_store(settings.store_path) as store:
            for alert in logged_alerts(store)[number - 2 :][:1]:
                record_decision(
                    store,
                    alert.id,
                    EventKind.NOTE,
                    now=moment(day) + dt.timedelta(hours=5),
                    who="ana",
                    note="seen",
                )
    return settings, copies


def table(path: Path) -> list[tuple[object, ...]]:
    if path.suffix == ".csv":
        return [tuple(line.split(",")) for line in path.read_text(encoding="utf-8").splitlines()]
    if path.suffix == ".parquet":
        return duckdb.sql(f"from '{path}'").fetchall()
    content = json.loads(path.read_text(encoding="utf-8"))
    return [tuple(row.items()) for row in content[path.stem.partition(" ")[0]]]


def test_the_history_has_what_could_go_wrong(history: tuple[Settings, dict[dt.date, Path]]):
    settings, _ = history
    with open_store(settings.store_path, read_only=True) as store:
        for what in ("reading_history", "reading_confirmation", "rejected", "window_result_history", "alert"):
            assert store.value(f"select count(*) from {what}") > 0, what
        assert store.value("select count(*) from alert_event where kind = 'note'") > 0
        assert store.verify() == []


@pytest.mark.parametrize("suffix", [".csv", ".parquet", ".json"])
@pytest.mark.parametrize("what", KINDS)
def test_export_as_of_a_night_is_the_export_of_the_store_of_that_night(
    history: tuple[Settings, dict[dt.date, Path]], tmp_path: Path, what: str, suffix: str
):
    settings, copies = history
    contents = set()
    for as_of, copy in copies.items():
        now, then = tmp_path / f"{what} now{suffix}", tmp_path / f"{what} then{suffix}"
        with open_store(settings.store_path, read_only=True) as store:
            n = export_table(settings, store, what, now, moment(400), as_of=as_of, plain=True)
        with open_store(copy, read_only=True) as store:
            night = store.last_finished_night()
            assert export_table(settings, store, what, then, night.finished, plain=True) == n
        assert table(now) == table(then)
        contents.add(repr(table(now)))
    assert len(contents) >= 3, "the nights must differ"


def test_alert_list_as_of_a_night_shows_the_states_of_that_night(
    history: tuple[Settings, dict[dt.date, Path]], tmp_path: Path
):
    settings, copies = history
    newest = max(copies)
    with open_store(settings.store_path, read_only=True) as store:
        export_table(settings, store, "alerts", tmp_path / "a.json", moment(400), as_of=newest)
        content = json.loads((tmp_path / "a.json").read_text(encoding="utf-8"))
        assert content["as_of_night"] == newest.isoformat()
        export_table(settings, store, "readings", tmp_path / "r.csv", moment(400), as_of=newest)
        assert f"# As the night of {newest} left it" in (tmp_path / "r.csv").read_text(encoding="utf-8")
        with pytest.raises(
            NotFound, match=r"No night of 2020-01-01 has finished; .* reach from 2025-04-11 to 2025-05-10"
        ):
            export_table(
                settings, store, "readings", tmp_path / "x.csv", moment(400), as_of=dt.date(2020, 1, 1)
            )
    assert not (tmp_path / "x.csv").exists()


READ_BACK = """
[network]
name = "Read back"
[[source]]
name = "export"
form = "long {form}"
files = "feed/*.{form}"
clock = "UTC"
label = "start"
time_format = "%Y-%m-%d %H:%M:%S"
missing = [""]
[source.columns]
time = "hour_start_utc"
quantity = "series"
value = "value"
unit = "unit"
flag = "flag"
stage = "stage"
issued = "result_time_utc"
[source.series]
"A.NO2" = "A.NO2"
"B.NO2" = "B.NO2"
[source.flags]
"pass" = "pass"
"not evaluated" = "not evaluated"
"suspect" = "suspect"
"fail" = "fail"
"missing" = "missing"
[source.stages]
"not verified" = "not verified"
"preliminary" = "preliminary"
"verified" = "verified"
[[series]]
key = "A.NO2"
unit = "ug/m3"
[[series]]
key = "B.NO2"
unit = "ug/m3"
[[pair]]
first = "A.NO2"
second = "B.NO2"
"""


@pytest.mark.parametrize("form", ["csv", "parquet"])
@pytest.mark.parametrize("night", [0, 2])
def test_an_export_taken_in_again_gives_the_same_readings(
    history: tuple[Settings, dict[dt.date, Path]], tmp_path: Path, form: str, night: int
):
    settings, copies = history
    (tmp_path / "feed").mkdir()
    (tmp_path / "monitor.toml").write_text(READ_BACK.format(form=form), encoding="utf-8")
    other = load_settings(tmp_path / "monitor.toml")
    written = tmp_path / "feed" / f"r.{form}"
    with open_store(settings.store_path, read_only=True) as store:
        export_table(settings, store, "readings", written, moment(400), as_of=list(copies)[night], plain=True)
    with open_store(other.store_path) as store:
        done = ingest_now(other, store, (), None, now=moment(400))
        assert (done.outcomes[0].rejected, done.outcomes[0].revised, done.troubles) == (0, 0, ())
        export_table(other, store, "readings", tmp_path / f"again.{form}", moment(400), plain=True)
    drop_ingest_id = [row[:-1] for row in table(tmp_path / f"again.{form}")]
    assert drop_ingest_id == [row[:-1] for row in table(written)]
    assert {"preliminary", "verified"} - {row[5] for row in drop_ingest_id} == (
        {"verified"} if night == 0 else set()
    )

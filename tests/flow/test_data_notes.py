"""Data notes over whole nights: what is wrong with the data is noted, kept, ended, and never an alert."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import numpy as np
import pytest

from rhovane.model import DataNote, NoteKind, NoteState
from rhovane.pipeline import run_night, walk_nights
from rhovane.review import alert_entries, current_notes, network_status, note_state, note_words
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store

START = dt.datetime(2025, 1, 1, tzinfo=dt.UTC)
FIRST = START.date()
DAY = dt.timedelta(days=1)
N_DAYS = 120
SWITCH, GAP, STUCK, DRY = 70, range(40, 45), range(95, 98), range(60, 110)
KEYS = ("A.NO2", "B.NO2", "C.NO2", "D.NO2", "A.rain", "B.rain")

SETTINGS = """
[network]
name = "Four stations"
standard_time = "+01:00"
work_folder = "."
[correlation]
window_hours = 168
lags = [-1, 1]
[alerts]
false_alarms_per_year = 1
[[source]]
name = "air"
form = "wide csv"
files = "feed/*.csv"
clock = "UTC"
label = "start"
missing = ["NA"]
columns = { time = "time" }
[source.series]
"A.NO2" = "A.NO2"
"B.NO2" = "B.NO2"
"C.NO2" = "C.NO2"
"D.NO2" = "D.NO2"
"A.rain" = "A.rain"
"B.rain" = "B.rain"
[[pair]]
first = "A.NO2"
second = "B.NO2"
[[pair]]
first = "C.NO2"
second = "D.NO2"
""" + "".join(
    f'[[series]]\nkey = "{key}"\n'
    + ('unit = "mm"\nkind = "accumulated"\n' if key.endswith("rain") else 'unit = "ug/m3"\n')
    for key in KEYS
)


def readings() -> np.ndarray:
    """Six series with a unit switch, a stuck value and a blocked gauge; day d begins at row 24 d - 1 (UTC)."""
    rng = np.random.default_rng(12)
    n = 24 * N_DAYS
    weather = np.repeat(np.cumsum(rng.normal(0, 0.1, N_DAYS)), 24) + 0.4 * rng.normal(size=n)
    air = np.array([30, 20, 12, 8]) * np.exp(weather[:, None] + 0.2 * rng.normal(size=(n, 4)))
    wet = rng.random(n) < 0.12
    rain = np.where(wet[:, None] & (rng.random((n, 2)) < 0.95), rng.integers(1, 9, (n, 2)) / 5, 0.0)
    values = np.round(np.column_stack([air, rain]), 1)
    values[rows(SWITCH, N_DAYS), 0] = np.round(1.9125 * values[rows(SWITCH, N_DAYS), 0], 1)
    values[rows(STUCK.start, STUCK.stop), 3] = 7.7
    values[rows(DRY.start, DRY.stop), 4] = 0.0
    return values


def rows(first_day: int, stop_day: int) -> slice:
    return slice(24 * first_day - 1, 24 * stop_day - 1)


def feed_lines(values: np.ndarray, hours: range) -> str:
    lines = ["time," + ",".join(KEYS)]
    for h in hours:
        cells = ["NA" if np.isnan(v) else f"{v:g}" for v in values[h]]
        lines.append(f"{START + dt.timedelta(hours=h):%Y-%m-%d %H:%M}," + ",".join(cells))
    return "\n".join(lines) + "\n"


def network_in(folder: Path, text: str = SETTINGS) -> Settings:
    (folder / "feed").mkdir(parents=True)
    (folder / "monitor.toml").write_text(text, encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def moment(day: dt.date) -> dt.datetime:
    return dt.datetime.combine(day + DAY, dt.time(4), dt.UTC)


def standing(notes: list[DataNote]) -> list[tuple[object, ...]]:
    return sorted((n.says() for n in notes if n.state is NoteState.HOLDS), key=repr)


def on_day(day: int) -> dt.datetime:
    return START + dt.timedelta(hours=24 * day - 1)


@pytest.fixture(scope="module")
def walked(tmp_path_factory: pytest.TempPathFactory) -> Settings:
    """Every night from day 35 on; the days of the gap arrive at C and D only on day 55."""
    settings = network_in(tmp_path_factory.mktemp("walked"))
    values = readings()
    early = values.copy()
    early[rows(GAP.start, GAP.stop), 2:4] = np.nan
    feed = settings.work_folder / "feed"

    def deliver(day: dt.date) -> list[Path]:
        number = (day - FIRST).days
        first = 0 if number == 35 else 24 * number
        texts = {f"{day}.csv": feed_lines(early, range(first, 24 * number + 24))}
        if number == 55:
            texts["filled.csv"] = feed_lines(values, range(*rows(GAP.start, GAP.stop).indices(len(values))))
        for name, text in texts.items():
            (feed / name).write_text(text, encoding="utf-8")
        return [feed / name for name in texts]

    with open_store(settings.store_path) as store:
        last = FIRST + (N_DAYS - 1) * DAY
        nights = walk_nights(settings, store, FIRST + 35 * DAY, last, moment_of=moment, arrivals=deliver)
        assert all(report.outcome == "complete" for report in nights)
    return settings


@pytest.fixture(scope="module")
def at_once(tmp_path_factory: pytest.TempPathFactory) -> Settings:
    """One night over everything."""
    settings = network_in(tmp_path_factory.mktemp("at_once"))
    text = feed_lines(readings(), range(24 * N_DAYS))
    (settings.work_folder / "feed" / "all.csv").write_text(text, encoding="utf-8")
    with open_store(settings.store_path) as store:
        last = FIRST + (N_DAYS - 1) * DAY
        assert run_night(settings, store, as_of=last, now=moment(last)).outcome == "complete"
    return settings


def notes_of(settings: Settings, **options) -> list[DataNote]:
    with open_store(settings.store_path, read_only=True) as store:
        return store.data_notes(**options)


def only(notes: list[DataNote], kind: NoteKind, subject: str) -> DataNote:
    (found,) = [n for n in notes if n.kind is kind and n.subject == subject]
    return found


def test_the_planted_faults_are_noted_with_their_times_and_numbers(at_once: Settings):
    notes = notes_of(at_once)
    switch = only(notes, NoteKind.UNIT_SWITCH, "A.NO2")
    assert switch.begin == on_day(SWITCH)
    assert switch.facts["factor"] == pytest.approx(1.91, rel=0.1)
    stuck = only(notes, NoteKind.STUCK, "D.NO2")
    assert (stuck.begin, stuck.end) == (on_day(STUCK.start), on_day(STUCK.stop) - dt.timedelta(hours=1))
    assert note_words(stuck) == "repeats 7.7 for 72 h"
    dry = only(notes, NoteKind.DRY, "A.rain")
    assert on_day(DRY.start) - DAY <= dry.begin <= on_day(DRY.start) + 2 * DAY
    assert on_day(DRY.stop) - 2 * DAY <= dry.end <= on_day(DRY.stop) + 2 * DAY
    assert "B.rain" in note_words(dry)
    assert {n.kind for n in notes} <= {*(n.kind for n in (switch, stuck, dry)), NoteKind.NOT_COMPUTABLE}


def test_walking_night_by_night_ends_with_the_notes_of_one_night_over_everything(
    walked: Settings, at_once: Settings
):
    assert standing(notes_of(walked)) == standing(notes_of(at_once))
    assert len(standing(notes_of(walked))) >= 4


def test_windows_of_the_walk_are_split_where_those_of_one_night_are(walked: Settings, at_once: Settings):
    found = []
    for settings in (walked, at_once):
        with open_store(settings.store_path, read_only=True) as store:
            found.append(store.read_windows(start=moment(FIRST + 35 * DAY)))
    for name in found[0]:
        if name != "night_id":
            np.testing.assert_array_equal(found[0][name], found[1][name], err_msg=name)


def test_a_window_never_mixes_two_units_and_says_why_it_is_not_computable(at_once: Settings):
    with open_store(at_once.store_path, read_only=True) as store:
        windows = store.read_windows("A.NO2~B.NO2", lag=0)
    day = (windows["window_end"] - int(START.timestamp())) // 86_400 + 1
    pairs = {int(d): int(n) for d, n in zip(day, windows["n_pairs"], strict=True)}
    assert pairs[SWITCH] == 168
    assert [pairs[SWITCH + k] for k in range(1, 9)] == [24, 48, 72, 96, 120, 144, 168, 168]
    split = np.flatnonzero(day == SWITCH + 3)[0]
    assert np.isnan(windows["statistic"][split])
    assert windows["reason"][split].endswith(f"split: A.NO2 at {FIRST + SWITCH * DAY}")
    assert np.isfinite(windows["statistic"][np.flatnonzero(day == SWITCH + 6)[0]])
    note = only(notes_of(at_once), NoteKind.NOT_COMPUTABLE, "A.NO2~B.NO2")
    assert (note.begin, note.end) == (on_day(SWITCH), on_day(SWITCH + 5) - dt.timedelta(hours=1))


def test_windows_use_the_newest_segment_of_a_series_only(tmp_path: Path):
    moved = f'segments = [{{ first_day = {FIRST + 100 * DAY}, what = "moved across the road" }}]'
    text = SETTINGS.replace('key = "D.NO2"\nunit = "ug/m3"', f'key = "D.NO2"\nunit = "ug/m3"\n{moved}')
    settings = network_in(tmp_path, text)
    (settings.work_folder / "feed" / "all.csv").write_text(
        feed_lines(readings(), range(24 * N_DAYS)), encoding="utf-8"
    )
    with open_store(settings.store_path) as store:
        last = FIRST + (N_DAYS - 1) * DAY
        assert run_night(settings, store, as_of=last, now=moment(last)).outcome == "complete"
        windows = store.read_windows("C.NO2~D.NO2", lag=0)
    day = (windows["window_end"] - int(START.timestamp())) // 86_400
    pairs = {int(d): int(n) for d, n in zip(day, windows["n_pairs"], strict=True)}
    assert pairs[99] == 168
    assert [pairs[100 + k] for k in range(8)] == [24, 48, 72, 96, 120, 144, 168, 168]
    reason = windows["reason"][np.flatnonzero(day == 102)[0]]
    assert reason.endswith(f"split: D.NO2 at {FIRST + 100 * DAY}")


def test_a_gap_is_open_then_over_then_filled_and_every_version_is_kept(walked: Settings):
    versions = [
        n for n in notes_of(walked, every_version=True) if n.kind is NoteKind.GAP and n.subject == "C.NO2"
    ]
    assert [n.version for n in versions] == [1, 2, 3]
    assert {n.id for n in versions} == {versions[0].id}
    assert [n.begin for n in versions] == [on_day(GAP.start)] * 3
    assert [n.end for n in versions] == [None] + [on_day(GAP.stop) - dt.timedelta(hours=1)] * 2
    assert [n.state for n in versions] == [NoteState.HOLDS, NoteState.HOLDS, NoteState.WITHDRAWN]
    assert note_state(versions[2]) == "filled later"
    assert note_words(versions[1]) == f"no observation for {24 * len(GAP)} h"
    assert only(notes_of(walked), NoteKind.LOW_COVERAGE, "C.NO2").state is NoteState.WITHDRAWN


def test_no_data_note_is_an_alert(walked: Settings):
    with open_store(walked.store_path, read_only=True) as store:
        assert alert_entries(store, moment(FIRST + N_DAYS * DAY)) == []


def test_a_repeated_night_writes_no_note_again(at_once: Settings):
    before = notes_of(at_once, every_version=True)
    with open_store(at_once.store_path) as store:
        last = FIRST + (N_DAYS - 1) * DAY
        run_night(at_once, store, as_of=last, now=moment(last))
        run_night(at_once, store, as_of=last, now=moment(last), recompute_from=FIRST + 50 * DAY)
        run_night(at_once, store, as_of=last - 30 * DAY, now=moment(last))
    assert notes_of(at_once, every_version=True) == before


def test_a_series_that_falls_silent_is_noted_shown_and_counted(tmp_path: Path):
    settings = network_in(tmp_path)
    values = readings()
    values[24 * 30 :, 1] = np.nan
    (tmp_path / "feed" / "a.csv").write_text(feed_lines(values, range(24 * 40)), encoding="utf-8")
    last = FIRST + 39 * DAY
    with open_store(settings.store_path) as store:
        run_night(settings, store, as_of=last, now=moment(last))
        status = network_status(settings, store, moment(last), as_of=last)
        shown = current_notes(settings, store)
    assert status.notes_open >= 3
    gap = only(shown, NoteKind.GAP, "B.NO2")
    assert (gap.begin, gap.end) == (START + dt.timedelta(hours=24 * 30), None)
    assert note_words(gap) == "no observation"
    assert only(shown, NoteKind.NOT_COMPUTABLE, "A.NO2~B.NO2").is_open


def test_own_checks_leave_hours_out_of_windows_and_say_so(tmp_path: Path):
    check = '[[check]]\napplies_to = "A.NO2"\nhigh = 500.0\nspike_suspect = 600.0\n'
    values = readings()
    values[rows(20, 21), 0][[3, 9]] = 999.0
    counts = []
    for name, text in (("off", SETTINGS), ("on", SETTINGS + check)):
        settings = network_in(tmp_path / name, text)
        feed = settings.work_folder / "feed" / "a.csv"
        feed.write_text(feed_lines(values, range(24 * 30)), encoding="utf-8")
        with open_store(settings.store_path) as store:
            for day in (FIRST + 24 * DAY, FIRST + 28 * DAY):
                run_night(settings, store, as_of=day, now=moment(day))
            windows = store.read_windows("A.NO2~B.NO2", lag=0)
            notes = store.data_notes()
        counts.append(dict(zip(windows["window_end"].tolist(), windows["n_pairs"].tolist(), strict=True)))
    off, on = counts
    assert {off[end] - on[end] for end in off} == {0, 2}
    note = only(notes, NoteKind.LEFT_OUT, "A.NO2")
    assert (note.begin, note.end) == (on_day(20), on_day(21) - dt.timedelta(hours=1))
    assert note.facts == {"hours": 2, "checks": "gross range, spike"}

"""What an alert tells: computed with it, kept with it, and computed again bit for bit from the stored inputs."""

from __future__ import annotations

import dataclasses
import datetime as dt
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from flow.small_network import HEADER, SETTINGS, START, related_series, row
from rhovane.model import Alert, NotFound, RhovaneError
from rhovane.pipeline import as_seen_now, reproduce, run_night
from rhovane.pipeline.context import WatchedPair
from rhovane.pipeline.sheet import witnesses_of
from rhovane.review import alert_entries, provenance_of
from rhovane.settings import Settings, load_settings
from rhovane.stats.watch import Watch
from rhovane.store import Store, open_store

FIRST = START.date()
DAY = dt.timedelta(days=1)
N_DAYS, CHANGE_DAY, SEEN_DAY = 400, 370, 379
NOW = dt.datetime(2026, 3, 1, tzinfo=dt.UTC)


@pytest.fixture(scope="module")
def network(tmp_path_factory: pytest.TempPathFactory) -> Settings:
    """A year and a month of readings whose relation breaks on day 370; the night of day 379 has run, then all
    readings of the change were revised, and the night of day 399 has run."""
    folder = tmp_path_factory.mktemp("sheet")
    (folder / "feed").mkdir()
    (folder / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    settings = load_settings(folder / "monitor.toml")
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    other = related_series(24 * N_DAYS, 0.0, seed=4)[1]
    y[24 * CHANGE_DAY :] = np.round(0.4 * other[24 * CHANGE_DAY :], 1)

    def deliver(name: str, first: int, last: int, shift: float = 0.0) -> None:
        text = "".join(row(h, "A", x[h]) + row(h, "B", y[h] + shift) for h in range(24 * first, 24 * last))
        (folder / "feed" / name).write_text(HEADER + text, encoding="utf-8")

    with open_store(settings.store_path) as store:
        deliver("a.csv", 0, 360)
        deliver("b.csv", 360, SEEN_DAY + 1)
        run_night(settings, store, as_of=FIRST + SEEN_DAY * DAY, now=NOW)
        deliver("c.csv", SEEN_DAY - 3, N_DAYS, shift=0.3)
        run_night(settings, store, as_of=FIRST + (N_DAYS - 1) * DAY, now=NOW)
    return settings


@pytest.fixture
def store(network: Settings) -> Iterator[Store]:
    with open_store(network.store_path, read_only=True) as opened:
        yield opened


@pytest.fixture
def alert(store: Store) -> Alert:
    """The alert of the change; the budget of one false alarm a year may have given others before."""
    (one,) = [e.alert for e in alert_entries(store, NOW) if e.alert.alarm_day >= FIRST + CHANGE_DAY * DAY]
    return one


def test_the_sheet_tells_size_onset_level_and_season(alert: Alert):
    sheet = alert.sheet
    assert sheet is not None
    assert (sheet.as_of, sheet.data_version) == (FIRST + SEEN_DAY * DAY, 2)
    assert alert.onset_first <= FIRST + CHANGE_DAY * DAY <= alert.onset_last
    assert (alert.onset_last - alert.onset_first).days <= 25
    assert sheet.change.high < 0
    assert [level.series for level in sheet.levels] == ["A.NO2", "B.NO2"]
    assert sheet.levels[0].ratio.low < 1.0 < sheet.levels[0].ratio.high
    assert sheet.levels[1].ratio.low < 0.4 < sheet.levels[1].ratio.high < 0.8
    assert sheet.levels[1].spread_ratio < 0.7
    assert sheet.slope_before.low > sheet.slope_after.high
    assert sheet.year_earlier.first_day == alert.onset_day - 364 * DAY
    assert sheet.year_earlier.statistic > 0.7
    assert not sheet.as_year_earlier
    assert sheet.episode.days == ()
    assert [(w.pair, w.relation, w.moved) for w in sheet.witnesses] == [("A.NO2~B.NO2", "own", True)]


def test_an_alert_is_computed_again_bit_for_bit_though_its_readings_were_revised(
    network: Settings, store: Store, alert: Alert
):
    found = reproduce(network, store, alert, NOW)
    assert found.computed == alert
    assert found.matches
    changed = dataclasses.replace(alert, evidence=np.nextafter(alert.evidence, np.inf).item())
    assert reproduce(network, store, changed, NOW).differing == ("evidence",)
    later = dataclasses.replace(alert, data_version=store.last_ingest_id())
    differing = reproduce(network, store, later, NOW).differing
    assert "after.statistic" in differing
    assert "before.statistic" not in differing


def test_an_alert_is_computed_with_its_own_settings_whatever_the_file_says_now(
    store: Store, alert: Alert, tmp_path: Path
):
    other = SETTINGS.replace("window_hours = 168", "window_hours = 336")
    (tmp_path / "monitor.toml").write_text(other, encoding="utf-8")
    assert reproduce(load_settings(tmp_path / "monitor.toml"), store, alert, NOW).matches


def test_an_alarm_that_the_evidence_does_not_show_is_not_found(network: Settings, store: Store, alert: Alert):
    found = reproduce(network, store, dataclasses.replace(alert, alarm_day=alert.alarm_day - 9 * DAY), NOW)
    assert found.computed is None
    assert not found.matches


def test_settings_changed_by_hand_or_not_kept_are_told(network: Settings, alert: Alert, tmp_path: Path):
    path = tmp_path / "copy.duckdb"
    path.write_bytes(network.store_path.read_bytes())
    with open_store(path) as store:
        store.execute("update settings_used set text = replace(text, '168', '169')")
        with pytest.raises(RhovaneError, match="changed by hand"):
            reproduce(network, store, alert, NOW)
    with open_store(path) as store:
        store.execute("delete from settings_used")
        with pytest.raises(NotFound, match="did not keep them"):
            reproduce(network, store, alert, NOW)


def test_seen_now_the_alert_has_all_readings_so_far_and_its_raising_is_as_it_was(
    network: Settings, store: Store, alert: Alert
):
    now = as_seen_now(network, store, alert, NOW)
    assert now.sheet.as_of == FIRST + (N_DAYS - 1) * DAY
    assert now.after != alert.after
    assert now.sheet.witnesses[0].n_days == N_DAYS - CHANGE_DAY
    assert now.before == alert.before
    same = {"after": alert.after, "before": alert.before, "sheet": alert.sheet, "hints": alert.hints}
    assert dataclasses.replace(now, **same) == alert
    with pytest.raises(NotFound, match="not watched by this recipe any more"):
        as_seen_now(network, store, dataclasses.replace(alert, recipe_hash="other"), NOW)


def test_the_origin_of_every_reading_is_told_as_it_was_when_the_alert_was_raised(
    network: Settings, store: Store, alert: Alert
):
    found = provenance_of(network, store, alert)
    assert (found.first, found.last) == (alert.before.first_day, alert.after.last_day)
    assert {(o.series, o.path) for o in found.origins} >= {("A.NO2", "feed/b.csv"), ("B.NO2", "feed/b.csv")}
    assert not any(o.path.endswith("c.csv") for o in found.origins)
    n_days = (found.last - found.first).days + 1
    assert sum(o.n_readings for o in found.origins) == 2 * 24 * n_days
    assert {o.path for o in found.origins if o.series == "B.NO2"} == {"feed/b.csv"}
    for o in [one for one in found.origins if one.series == "B.NO2"]:
        lines = (network.work_folder / o.path).read_text("utf-8").splitlines()
        assert lines[o.first_line - 1].startswith(f"{o.first_hour:%Y-%m-%d %H:%M},{o.series[0]},")
        assert lines[o.last_line - 1].startswith(f"{o.last_hour:%Y-%m-%d %H:%M},{o.series[0]},")


def test_settings_are_kept_once_however_many_nights_ran(network: Settings, store: Store):
    assert store.rows("select hash from settings_used") == [(network.settings_hash,)]
    assert store.settings_text(network.settings_hash) == network.text


PAIRS = ("A.NO2~B.NO2", "A.NO2~C.NO2", "B.NO2~C.NO2", "C.NO2~D.NO2", "D.O3~E.O3", "A.O3~B.O3")


@pytest.mark.parametrize(
    ("suspect", "members", "expected"),
    [
        ("series A.NO2", PAIRS[:2], ["own", "own", "partner", "partner", None, None]),
        ("pair A.NO2~B.NO2", PAIRS[:1], ["own", "partner", "partner", "alike", None, None]),
        ("station A", (PAIRS[0], PAIRS[1], PAIRS[5]), ["own", "own", "partner", "partner", "alike", "own"]),
    ],
)
def test_other_pairs_are_asked_by_what_they_share_with_the_suspect(
    network: Settings, suspect: str, members: tuple[str, ...], expected: list[str | None]
):
    recipe = network.pair[0]
    watched = []
    for key in PAIRS:
        one = recipe.model_copy(update=dict(zip(("first", "second"), key.split("~"), strict=True)))
        watched.append(WatchedPair(one, network.pair_of(one)))
    n_days, shape = 200, (200, len(PAIRS))
    score = np.random.default_rng(1).normal(1.0, 0.2, shape)
    score[190:, 2] = -1.0
    ones, none = np.ones(shape), np.full(shape, np.nan)
    seen = Watch(
        np.arange(n_days), (), score, 25 * ones, ones, ones, none, none, none, np.ones(shape, np.int8), ()
    )
    found = witnesses_of(watched, seen, members=members, suspect=suspect, onset=190, last=196)
    relation = {w.pair: w.relation for w in found}
    assert [relation.get(key) for key in PAIRS] == expected
    assert [w.pair for w in found if w.moved] == ["B.NO2~C.NO2"]
    order = ["own", "partner", "alike"]
    assert [w.relation for w in found] == sorted((w.relation for w in found), key=order.index)

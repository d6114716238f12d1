"""Whole nights with a calendar, a site log and outcomes: what they keep from alarming, and what they leave alone."""

from __future__ import annotations

import datetime as dt
import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner

from flow.small_network import HEADER, SETTINGS, START, related_series, row
from rhovane.cli import main
from rhovane.model import EventKind, ExitCode, RhovaneError
from rhovane.pipeline import STEPS, NightReport, reproduce, run_night
from rhovane.pipeline.memory import NightMemory
from rhovane.review import AlertEntry, alert_entries, nearby_entries, network_status, record_decision
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store

FIRST = START.date()
DAY = dt.timedelta(days=1)
N_DAYS = 175
CHANGE_DAY = 140
DECIDED_ON = CHANGE_DAY + 8
NIGHTS = (*range(DECIDED_ON - 1, DECIDED_ON + 4), 156, 161, 168, N_DAYS - 1)  # a night may cover several days
PAIR = "A.NO2~B.NO2"
QUICK = SETTINGS.replace(
    "false_alarms_per_year = 1", "false_alarms_per_year = 1\nrebaseline_days = 14"
).replace(
    "[correlation]", '[calendar]\nfile = "calendar.toml"\n[site_log]\nfile = "site_log.csv"\n[correlation]'
)
LOG_HEADER = "subject,from,to,what,readings\n"


def moment(day: dt.date) -> dt.datetime:
    return dt.datetime.combine(day + DAY, dt.time(4), dt.UTC)


def day(number: int) -> dt.date:
    return FIRST + number * DAY


@pytest.fixture(scope="module")
def feed() -> str:
    """A strong relation that is gone from day 140 on."""
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    y[24 * CHANGE_DAY :] = related_series(24 * N_DAYS, 0.0, seed=4)[1][24 * CHANGE_DAY :]
    return HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in range(24 * N_DAYS))


def network_in(folder: Path, feed: str, *, calendar: str = "", site_log: str = LOG_HEADER) -> Settings:
    (folder / "feed").mkdir(parents=True)
    (folder / "monitor.toml").write_text(QUICK, encoding="utf-8")
    (folder / "calendar.toml").write_text(calendar, encoding="utf-8")
    (folder / "site_log.csv").write_text(site_log, encoding="utf-8")
    (folder / "feed" / "all.csv").write_text(feed, encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def night(settings: Settings, number: int, memory: NightMemory | None = None) -> NightReport:
    with open_store(settings.store_path) as store:
        return run_night(settings, store, as_of=day(number), now=moment(day(number)), memory=memory)


def recompute(settings: Settings, number: int) -> NightReport:
    steps = tuple(step for step in STEPS if step[0] != "ingest")
    with open_store(settings.store_path) as store:
        return run_night(
            settings,
            store,
            as_of=day(number),
            now=moment(day(number)) + DAY,
            kind="recompute",
            steps=steps,
            recompute_from=dt.date.min,
        )


def entries_of(settings: Settings) -> list[AlertEntry]:
    with open_store(settings.store_path, read_only=True) as store:
        return alert_entries(store, moment(day(N_DAYS)))


def evidence_of(settings: Settings) -> dict[str, np.ndarray]:
    with open_store(settings.store_path, read_only=True) as store:
        found = {**store.read_evidence(pair_keys=[PAIR]), **store.read_windows(PAIR)}
    return {name: column for name, column in found.items() if name != "night_id"}


def kinds(entry: AlertEntry) -> list[EventKind]:
    return [event.kind for event in entry.events]


def decide(settings: Settings, number: int, **payload: Any) -> dt.date:
    """Record an outcome on the morning after the night of a day; the first day that it acts on."""
    with open_store(settings.store_path) as store:
        entry = record_decision(
            store,
            1,
            EventKind.OUTCOME,
            now=moment(day(number)) + 5 * dt.timedelta(hours=1),
            who="Ada",
            payload=payload,
        )
    return dt.date.fromisoformat(entry.events[-1].payload["acts_from"])


@pytest.mark.parametrize(
    ("payload", "ending"),
    [
        (None, "unattended"),
        ({"outcome": "false"}, "unattended"),
        ({"outcome": "instrument"}, None),
        ({"outcome": "data handling", "until": "2025-06-10"}, "unattended, later"),
        ({"outcome": "real change", "new_baseline": True}, "decided"),
    ],
    ids=lambda p: str(p.get("outcome") if isinstance(p, dict) else p),
)
def test_an_outcome_acts_from_the_next_night_on_and_a_recompute_agrees_with_the_walk(
    tmp_path: Path, feed: str, payload: dict[str, Any] | None, ending: str | None
):
    settings = network_in(tmp_path, feed)
    memory = NightMemory()
    acts_from = None
    for number in NIGHTS:
        report = night(settings, number, memory)
        assert report.outcome == "complete", report.troubles
        if number == DECIDED_ON and payload is not None:
            (before,) = entries_of(settings)
            acts_from = decide(settings, number, **payload)
            assert acts_from == day(number + 1)
    (entry,) = entries_of(settings)
    alarm = (entry.alert.alarm_day - FIRST).days
    assert CHANGE_DAY <= alarm < DECIDED_ON
    ended = [e for e in entry.events if e.kind is EventKind.NEW_BASELINE]
    if ending is None:
        assert not ended
        assert entry.standing.changed
    elif ending == "decided":
        assert [e.payload["day"] for e in ended] == [str(acts_from)]
        assert "decision of Ada" in ended[0].note
    else:
        # June 10 is day 160: what is set aside until then cannot become the new normal before
        expected = alarm + 14 if ending == "unattended" else 161
        assert [e.payload["day"] for e in ended] == [str(day(expected))]
        assert "has lasted" in ended[0].note
    if payload is not None:
        assert entry.alert == before.alert
        assert entry.events[: len(before.events)] == before.events
    recompute(settings, N_DAYS - 1)
    assert entries_of(settings) == [entry], "the whole history again, given the same log, says the same"


def test_an_outcome_that_is_corrected_acts_until_the_next_does(tmp_path: Path, feed: str):
    settings = network_in(tmp_path, feed)
    night(settings, CHANGE_DAY + 8)
    decide(settings, CHANGE_DAY + 8, outcome="real change", new_baseline=True)
    decide(settings, CHANGE_DAY + 8, outcome="instrument")  # the same morning: the first never acts
    memory = NightMemory()
    for number in (CHANGE_DAY + 9, CHANGE_DAY + 15, CHANGE_DAY + 24):
        night(settings, number, memory)
    assert entries_of(settings)[0].standing.changed
    decide(settings, CHANGE_DAY + 24, outcome="weather or season")
    night(settings, CHANGE_DAY + 25, memory)
    (entry,) = entries_of(settings)
    assert kinds(entry)[-1] is EventKind.NEW_BASELINE
    assert entry.events[-1].payload["day"] == str(day(CHANGE_DAY + 25))


@pytest.mark.parametrize(
    ("payload", "told"),
    [
        ({"outcome": "false", "until": "2025-07-01"}, "for instrument and data-handling"),
        ({"outcome": "instrument", "until": "2025-05-01"}, "name a later end"),
        ({"outcome": "instrument", "new_baseline": True}, "for real-change"),
    ],
)
def test_a_decision_that_contradicts_itself_is_refused_and_nothing_is_written(
    tmp_path: Path, feed: str, payload: dict[str, Any], told: str
):
    settings = network_in(tmp_path, feed)
    night(settings, CHANGE_DAY + 8)
    (before,) = entries_of(settings)
    with pytest.raises(RhovaneError, match=told):
        decide(settings, CHANGE_DAY + 8, **payload)
    assert entries_of(settings) == [before]


def test_days_in_the_site_log_do_not_alarm_and_that_is_said(tmp_path: Path, feed: str):
    works = f"A,{day(CHANGE_DAY - 2)},,inlet being moved,no reference\n"
    settings = network_in(tmp_path, feed, site_log=LOG_HEADER + works)
    report = night(settings, CHANGE_DAY + 12)
    steps = {step.name: step.summary for step in report.steps}
    assert steps["site log"] == "1 entries, 1 new, 0 withdrawn"
    assert steps["alerts"].endswith("; 1 pairs not judged")
    assert entries_of(settings) == []
    with open_store(settings.store_path, read_only=True) as store:
        status = network_status(settings, store, moment(day(CHANGE_DAY + 12)), as_of=day(CHANGE_DAY + 12))
        windows = store.read_windows(PAIR, lag=0)
    assert status.not_judged == {PAIR: "site log 1: inlet being moved"}
    assert np.isfinite(windows["statistic"][-1]), "its correlations are still computed"

    # The entry is taken back: it stays in the store, and from the next night on the days are judged.
    (tmp_path / "site_log.csv").write_text(LOG_HEADER, encoding="utf-8")
    memory = NightMemory()
    reports = [night(settings, CHANGE_DAY + n, memory) for n in (13, 14, 15, 18, 24)]
    assert reports[0].steps[1].summary == "0 entries, 0 new, 1 withdrawn"
    (entry,) = entries_of(settings)
    assert entry.alert.alarm_day >= day(CHANGE_DAY + 13)
    with open_store(settings.store_path, read_only=True) as store:
        (stored,) = store.site_log()
        around = nearby_entries(settings, store, entry.alert)
    assert stored.withdrawn_from == day(CHANGE_DAY + 13)
    assert stored.acts_from is None, "no night had judged anything when it was first read"
    assert around.site_log == (stored,)
    recompute(settings, CHANGE_DAY + 24)
    assert entries_of(settings) == [entry]


def test_an_alert_is_reproduced_with_what_people_knew_in_its_night(tmp_path: Path, feed: str):
    checks = "".join(
        f"A.NO2,{day(d)} 09:00,{day(d)} 12:00,span check,not used\n" for d in (CHANGE_DAY - 9, CHANGE_DAY + 3)
    )
    away = f"B,{day(100)},{day(104)},logger away,no reference\n"
    settings = network_in(tmp_path, feed, site_log=LOG_HEADER + checks + away)
    night(settings, DECIDED_ON)
    (entry,) = entries_of(settings)
    with open_store(settings.store_path, read_only=True) as store:
        assert reproduce(settings, store, entry.alert, moment(day(DECIDED_ON))).matches
    # Later knowledge: entries taken back, another calendar, an outcome. The alert is that of its night.
    (tmp_path / "site_log.csv").write_text(LOG_HEADER, encoding="utf-8")
    (tmp_path / "calendar.toml").write_text(
        f'[[entry]]\ntitle = "fair"\nkind = "not judged"\nfirst = {day(CHANGE_DAY)}\nlast = {day(N_DAYS)}\n',
        encoding="utf-8",
    )
    decide(settings, DECIDED_ON, outcome="instrument")
    changed = load_settings(tmp_path / "monitor.toml")
    night(changed, DECIDED_ON + 1)
    (later,) = entries_of(changed)
    with open_store(changed.store_path, read_only=True) as store:
        found = reproduce(changed, store, later.alert, moment(day(DECIDED_ON + 1)))
    assert later.alert == entry.alert
    assert found.differing == ()
    assert found.matches


def test_an_entry_about_days_gone_by_leaves_earlier_alerts_alone(tmp_path: Path, feed: str):
    settings = network_in(tmp_path, feed)
    night(settings, CHANGE_DAY + 8)
    (before,) = entries_of(settings)
    works = f"B.NO2,{day(CHANGE_DAY - 1)},{day(CHANGE_DAY + 30)},lamp failing,no reference\n"
    (tmp_path / "site_log.csv").write_text(LOG_HEADER + works, encoding="utf-8")
    memory = NightMemory()
    for number in (CHANGE_DAY + 9, CHANGE_DAY + 10, CHANGE_DAY + 19):
        night(settings, number, memory)
    assert entries_of(settings) == [before]
    recompute(settings, CHANGE_DAY + 19)
    assert entries_of(settings) == [before]


def test_days_of_the_calendar_that_are_not_judged_do_not_alarm(tmp_path: Path, feed: str):
    entry = f'[[entry]]\ntitle = "fair"\nkind = "not judged"\nfirst = {day(CHANGE_DAY - 1)}\nlast = {day(CHANGE_DAY + 9)}\n'
    settings = network_in(tmp_path, feed, calendar=entry + 'stations = ["B"]\n')
    night(settings, CHANGE_DAY + 9)
    assert entries_of(settings) == []
    night(settings, CHANGE_DAY + 16)
    (alert,) = entries_of(settings)
    assert alert.alert.alarm_day > day(CHANGE_DAY + 9)
    with open_store(settings.store_path, read_only=True) as store:
        (span,) = nearby_entries(settings, store, alert.alert).calendar
    assert (span.entry.title, span.first, span.last) == ("fair", day(CHANGE_DAY - 1), day(CHANGE_DAY + 9))


@pytest.mark.parametrize("where", ["site log", "calendar"])
def test_readings_taken_out_are_as_if_they_were_missing_from_their_first_hour_on(
    tmp_path: Path, feed: str, where: str
):
    """Days 40 and 60, 9 to 12 o'clock, of A.NO2: taken out after they were computed, and put back in."""
    settings = network_in(tmp_path / "edited", feed)
    night(settings, 69)
    untouched = evidence_of(settings)
    if where == "site log":
        text = LOG_HEADER + "".join(
            f"A.NO2,{day(d)} 09:00,{day(d)} 12:00,span check,not used\n" for d in (40, 60)
        )
        (tmp_path / "edited" / "site_log.csv").write_text(text, encoding="utf-8")
    else:
        rule = "FREQ=DAILY;INTERVAL=20;COUNT=2"
        text = f'[[entry]]\ntitle = "span check"\nkind = "maintenance"\nfirst = {day(40)}\nrule = "{rule}"\n'
        text += 'hours = [9, 12]\nseries = ["A.NO2"]\n'
        (tmp_path / "edited" / "calendar.toml").write_text(text, encoding="utf-8")
    settings = load_settings(tmp_path / "edited" / "monitor.toml")
    report = night(settings, 70)
    assert [s.summary for s in report.steps if s.name == "stale"] == [f"1 of 1 pairs, from {day(40)}"]
    gone = {
        row_start
        for d in (40, 60)
        for h in range(9, 12)
        for row_start in [f"{START + dt.timedelta(days=d, hours=h):%Y-%m-%d %H:%M},A,"]
    }
    kept = "".join(line for line in feed.splitlines(keepends=True) if line[:19] not in gone)
    assert len(feed.splitlines()) - len(kept.splitlines()) == 6
    bare = network_in(tmp_path / "bare", kept)
    night(bare, 70)
    ours, theirs = evidence_of(settings), evidence_of(bare)
    for name in ours:
        np.testing.assert_array_equal(ours[name], theirs[name], err_msg=name)
    assert not np.array_equal(ours["n_pairs"][: len(untouched["n_pairs"])], untouched["n_pairs"])
    (tmp_path / "edited" / "site_log.csv").write_text(LOG_HEADER, encoding="utf-8")
    (tmp_path / "edited" / "calendar.toml").write_text("", encoding="utf-8")
    settings = load_settings(tmp_path / "edited" / "monitor.toml")
    night(settings, 70)
    again = evidence_of(settings)
    for name in ("innovation", "n_pairs", "statistic"):
        kept_days = slice(0, len(untouched[name]))
        np.testing.assert_array_equal(again[name][kept_days], untouched[name], err_msg=name)


def test_a_site_log_with_mistakes_leaves_the_night_incomplete_and_the_rest_goes_on(tmp_path: Path, feed: str):
    visit = f"A,{day(10)},{day(11)},visit,as usual\n"
    settings = network_in(tmp_path, feed, site_log=LOG_HEADER + visit)
    assert night(settings, 30).outcome == "complete"
    (tmp_path / "site_log.csv").write_text(LOG_HEADER + f"C,{day(12)},,visit,\n", encoding="utf-8")
    report = night(settings, 31)
    assert report.exit_code is ExitCode.NIGHT_INCOMPLETE
    assert [(t.step, "line 2, column subject" in t.reason) for t in report.troubles] == [("site log", True)]
    with open_store(settings.store_path, read_only=True) as store:
        assert [s.stands for s in store.site_log()] == [True]
        assert store.read_windows(PAIR)["window_end"].max() == int(moment(day(31)).timestamp()) - 5 * 3600
    (tmp_path / "site_log.csv").unlink()
    assert night(settings, 32).outcome == "incomplete"
    (tmp_path / "site_log.csv").write_text(LOG_HEADER + visit, encoding="utf-8")
    assert night(settings, 33).outcome == "complete"


def run(folder: Path, *args: str) -> Any:
    return CliRunner().invoke(main, [*args, "--config", str(folder / "monitor.toml")], catch_exceptions=False)


def test_the_commands_show_and_steer(tmp_path: Path, feed: str):
    works = f'A,{day(CHANGE_DAY - 3)},{day(CHANGE_DAY)},"lamp, inlet",as usual\n'
    fair = f'[[entry]]\ntitle = "fair"\nkind = "other days"\nfirst = {day(CHANGE_DAY + 3)}\n'
    settings = network_in(tmp_path, feed, site_log=LOG_HEADER + works, calendar=fair)
    assert "1 calendar and 1 site log entries" in run(tmp_path, "check").output
    night(settings, CHANGE_DAY + 8)
    text = run(tmp_path, "alert", "1").output
    assert "A: lamp, inlet (readings as usual)" in text
    assert f"{day(CHANGE_DAY + 3)}  fair (other days)" in text
    sheet = json.loads(run(tmp_path, "alert", "1", "--json").output)
    assert [(s["subject"], s["from"]) for s in sheet["site_log"]] == [
        ("A", f"{day(CHANGE_DAY - 3)}T00:00:00+00:00")
    ]
    assert [c["title"] for c in sheet["calendar"]] == ["fair"]

    done = run(tmp_path, "outcome", "1", "instrument", "--until", str(day(CHANGE_DAY + 9)), "--who", "Ada")
    assert done.exit_code == ExitCode.WELL, done.output
    assert f"acts from the night of {day(CHANGE_DAY + 9)}" in done.output
    (event,) = json.loads(run(tmp_path, "alert", "1", "--json").output)["events"][1:]
    assert event["payload"] == {
        "outcome": "instrument",
        "until": str(day(CHANGE_DAY + 9)),
        "acts_from": str(day(CHANGE_DAY + 9)),
    }
    counts = json.loads(run(tmp_path, "alerts", "--counts", "--json").output)
    assert counts["alerts"] == 1
    assert counts["confirmed_share"] == 1.0
    assert "something was behind 100% of those decided" in run(tmp_path, "alerts", "--counts").output

    added = run(
        tmp_path, "sitelog", "--add", "B.NO2", "--from", str(day(150)), "--what", "new lamp", "--who", "Ada"
    )
    assert added.exit_code == ExitCode.WELL, added.output
    listed = json.loads(run(tmp_path, "sitelog", "--json").output)
    assert [(e["number"], e["who"], e["readings"]) for e in listed] == [
        (1, "site log file", "as usual"),
        (2, "Ada", "no reference"),
    ]
    assert listed[1]["acts_from"] == str(day(CHANGE_DAY + 9))
    night(settings, CHANGE_DAY + 10)
    assert run(tmp_path, "sitelog", "--withdraw", "2").exit_code == ExitCode.WELL
    assert "withdrawn" in run(tmp_path, "sitelog").output
    refused = run(tmp_path, "sitelog", "--withdraw", "1")
    assert refused.exit_code == ExitCode.FAILED
    assert "comes from the site log file" in refused.output
    wrong = run(tmp_path, "sitelog", "--add", "C", "--from", "soon", "--what", "")
    assert wrong.exit_code == ExitCode.FAILED
    assert "subject: 'C' is no series" in wrong.output
    assert "from: 'soon' is no time" in wrong.output
    assert len(json.loads(run(tmp_path, "sitelog", "--json").output)) == 2

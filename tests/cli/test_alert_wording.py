"""How alerts read in 80 columns, whatever their names and states."""

from __future__ import annotations

import dataclasses
import datetime as dt

import pytest

from rhovane.alerts import Standing
from rhovane.cli.alert_wording import alert_lines, alert_table, reproduction_lines
from rhovane.model import (
    Alert,
    AlertEvent,
    AlertSheet,
    AlertState,
    Bounded,
    CorrelationEstimate,
    EpisodeDays,
    EventKind,
    Hint,
    Outcome,
    SeriesLevel,
    Witness,
)
from rhovane.pipeline import Reproduction
from rhovane.review import AlertEntry

DAY = dt.date(2025, 4, 2)
LONG = "NORTHAMPTON_ROADSIDE.temperature~NORTHAMPTON_BACKGROUND.temperature[adjusted]"
KNOWN = CorrelationEstimate(DAY, DAY, -0.89, 672, 7.1, -0.95, -0.4, "not assessable: 7.1 effective pairs")
NONE = CorrelationEstimate(DAY, DAY, None, 0, None, None, None, "no readings a year earlier")
NO_INTERVAL = Bounded(12345.678, None, None, "too few independent hours")
SHEET = AlertSheet(
    DAY, 7, Bounded(-0.5, -0.9, -0.1),
    tuple(SeriesLevel(k, "ug/m3", NO_INTERVAL, NO_INTERVAL, NO_INTERVAL, 0.2) for k in LONG.split("~")),
    Bounded(1.0, 0.9, 1.1), NO_INTERVAL, NONE, False, EpisodeDays((DAY, DAY), 0.8),
    tuple(Witness(LONG, "partner", 0.9, -0.1, -12.3, 9, moved) for moved in (True, False, None)),
)  # fmt: skip
ALERT = Alert(
    1, LONG, "r" * 16, "timing", "weaker", DAY, DAY, DAY, 1, 7, "s" * 16, 9.0, 8.0, KNOWN, NONE, (LONG, LONG),
    "station NORTHAMPTON_ROADSIDE", (Hint("consistent with x " * 9, (LONG,) * 2, (LONG,), "look " * 30),),
    DAY - dt.timedelta(4), DAY + dt.timedelta(4), 1, SHEET,
)  # fmt: skip


def entry(state: AlertState, outcome: Outcome | None = None, *, superseded: bool = False) -> AlertEntry:
    event = AlertEvent(1, EventKind.RAISED, dt.datetime(2025, 4, 3, tzinfo=dt.UTC), "rhovane", LONG)
    values = {f.name: None for f in dataclasses.fields(Standing)}
    standing = Standing(
        **{**values, "state": state, "outcome": outcome, "superseded": superseded, "changed": True}
    )
    return AlertEntry(ALERT, (event,), standing)


@pytest.mark.parametrize("outcome", [None, *Outcome])
@pytest.mark.parametrize("state", list(AlertState))
@pytest.mark.parametrize("superseded", [False, True])
def test_the_list_fits_80_columns_in_every_state(state, outcome, superseded):
    lines = alert_table([entry(state, outcome, superseded=superseded)])
    assert len(lines) == 3
    assert max(map(len, lines)) <= 80
    if outcome is None and not superseded:
        word = state.value.split(",")[0].removesuffix(" to normal")
        assert word in lines[-1]


def test_an_alert_in_full_fits_80_columns_and_says_in_words_what_is_not_assessable():
    lines = alert_lines(entry(AlertState.UNACKNOWLEDGED))
    text = " ".join(" ".join(lines).split())
    assert max(len(line) for line in lines) <= 80
    for words in (
        "about 2025-04-02 (2025-03-29 to 2025-04-06, 90 % probability)",
        "-0.50 (-0.90 to -0.10): the interval excludes no change",
        "interval not assessable: too few independent hours",
        "a year ago no readings a year earlier",
        "other pairs of its partners: 1 of 3 moved",
        "episode of 2 days",
        "a pair moved from 2.5 on",
    ):
        assert words in text


def test_the_earliest_onset_looked_for_is_told_as_such():
    early = dataclasses.replace(ALERT, onset_first=DAY - dt.timedelta(41))
    shown = dataclasses.replace(entry(AlertState.ACKNOWLEDGED), alert=early)
    assert "2025-02-20 or earlier to 2025-04-06" in " ".join(" ".join(alert_lines(shown)).split())


def test_an_alert_without_a_sheet_is_shown_with_what_it_has():
    old = dataclasses.replace(ALERT, sheet=None, onset_first=None, onset_last=None)
    text = "\n".join(alert_lines(dataclasses.replace(entry(AlertState.ACKNOWLEDGED), alert=old)))
    assert "2025-04-02 is the likeliest first day" in text
    assert "Level" not in text


@pytest.mark.parametrize(
    ("computed", "differing", "words"),
    [
        (ALERT, (), "the same in every bit"),
        (ALERT, ("after.low",), "DIFFERS in after.low"),
        (None, (), "NOT FOUND"),
    ],
)
def test_a_reproduction_says_whether_it_matches_and_names_another_version(computed, differing, words):
    found = Reproduction(ALERT, computed, differing, "0.1.0", "0.2.0")
    text = " ".join(reproduction_lines(found))
    assert words in text
    assert "raised by version 0.1.0; this is 0.2.0" in text
    assert found.matches is (words == "the same in every bit")

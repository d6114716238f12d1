"""Alerts as plain values and back: what the log keeps is what was raised."""

from __future__ import annotations

import datetime as dt
import json

import pytest

from rhovane.model import (
    Alert,
    AlertSheet,
    Bounded,
    CorrelationEstimate,
    EpisodeDays,
    Hint,
    SeriesLevel,
    Witness,
    plain_of,
)
from rhovane.model.plain import fact_of

DAY = dt.date(2025, 3, 1)
NONE = CorrelationEstimate(DAY, DAY, None, 0, None, None, None, "no readings")
SHEET = AlertSheet(
    DAY, 7, Bounded(-0.1, None, None, "too few"),
    (SeriesLevel("A.NO2", "ug/m3", Bounded(1.0), Bounded(2.0), Bounded(2.0, 1.5, 2.5), None),),
    Bounded(None), Bounded(0.1 + 0.2), NONE, False, EpisodeDays((DAY, DAY), 0.5),
    (Witness("A~B", "own", None, 0.5, None, 1, None),),
)  # fmt: skip
ALERT = Alert(
    1, "A~B", "r", "timing", "weaker", DAY, DAY, DAY, 1, 7, "s", 9.0, 8.0, NONE, NONE, ("A~B", "A~C"), "series A",
    (Hint("consistent with x", ("one",), (), "look"),), DAY, DAY, -1, SHEET,
)  # fmt: skip


def test_an_alert_comes_back_from_json_text_as_it_was():
    assert Alert.from_json(json.loads(json.dumps(ALERT.as_json()))) == ALERT


def test_alerts_of_earlier_programs_are_read_hints_as_sentences_and_without_a_sheet():
    plain = ALERT.as_json()
    for name in ("sheet", "lag_steps", "onset_first", "onset_last"):
        del plain[name]
    del plain["before"]["interval_reason"]
    plain["hints"] = ["consistent with y"]
    old = Alert.from_json(plain)
    assert old.hints == (Hint("consistent with y"),)
    assert (old.sheet, old.lag_steps, old.onset_first) == (None, 0, None)


def test_an_unknown_or_missing_field_is_refused():
    with pytest.raises(TypeError, match="surplus"):
        fact_of(Bounded, {"value": 1.0, "surplus": 2})
    with pytest.raises(TypeError, match="value"):
        fact_of(Bounded, {"low": 1.0})


def test_dates_become_iso_text_and_tuples_lists():
    assert plain_of(EpisodeDays((DAY,), None)) == {"days": ["2025-03-01"], "without": None, "reason": None}

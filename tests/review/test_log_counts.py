"""Counts over the alert log: by week, by suspect, by outcome; what is stale, and what chatters."""

from __future__ import annotations

import datetime as dt

import pytest

from rhovane.alerts import standing_of
from rhovane.model import Alert, AlertEvent, CorrelationEstimate, EventKind, Outcome
from rhovane.review import AlertEntry, log_counts

NOW = dt.datetime(2025, 7, 1, 9, tzinfo=dt.UTC)
DAY = dt.timedelta(days=1)
NOTHING = CorrelationEstimate(dt.date(2025, 1, 1), dt.date(2025, 1, 28), None, 0, None, None, None, "no data")


def entry(
    number: int, alarm: dt.date, suspect: str = "series A.NO2", outcome: Outcome | None = None
) -> AlertEntry:
    alert = Alert(
        id=number,
        pair_key="A.NO2~B.NO2",
        recipe_hash="r",
        kind="strength",
        direction="weaker",
        alarm_day=alarm,
        onset_day=alarm - DAY,
        night_as_of=alarm,
        night_id=1,
        data_version=1,
        settings_hash="s",
        evidence=9.0,
        threshold=8.0,
        before=NOTHING,
        after=NOTHING,
        suspect=suspect,
    )
    raised = dt.datetime.combine(alarm + DAY, dt.time(4), dt.UTC)
    events = [AlertEvent(number, EventKind.RAISED, raised, "rhovane")]
    if outcome is not None:
        events.append(
            AlertEvent(number, EventKind.OUTCOME, raised + DAY, "Ada", "", {"outcome": outcome.value})
        )
    return AlertEntry(alert, tuple(events), standing_of(events, NOW))


def test_new_alerts_are_counted_by_iso_week_and_by_suspect():
    entries = [
        entry(1, dt.date(2024, 12, 30)),  # the first week of 2025 begins in 2024
        entry(2, dt.date(2025, 1, 5)),
        entry(3, dt.date(2025, 1, 6), "station B"),
        entry(4, dt.date(2025, 6, 1), ""),
    ]
    counts = log_counts(entries, NOW)
    assert counts.by_week == {"2025-W01": 2, "2025-W02": 1, "2025-W22": 1}
    assert counts.by_suspect == {"series A.NO2": 2, "pair A.NO2~B.NO2": 1, "station B": 1}
    assert next(iter(counts.by_suspect)) == "series A.NO2"


def test_an_alert_is_stale_after_fourteen_days_without_review():
    entries = [
        entry(1, dt.date(2025, 6, 15)),  # raised on June 16 at 4: fifteen days and five hours
        entry(2, dt.date(2025, 6, 17)),  # thirteen
        entry(3, dt.date(2025, 2, 1), outcome=Outcome.FALSE),
    ]
    assert log_counts(entries, NOW).stale == (1,)
    assert log_counts(entries, NOW + DAY).stale == (1, 2)
    assert log_counts([], NOW).stale == ()


@pytest.mark.parametrize(("gap", "chatters"), [(14, True), (15, False)])
def test_three_alerts_on_one_suspect_within_thirty_days_are_chattering(gap: int, chatters: bool):
    first = dt.date(2025, 3, 1)
    entries = [entry(i, first + i * gap * DAY) for i in range(3)]
    entries += [entry(9, first, "station B"), entry(10, first + DAY, "station B")]
    found = log_counts(entries, NOW).chattering
    assert [(c.suspect, c.alerts, c.first, c.last) for c in found] == (
        [("series A.NO2", 3, first, first + 28 * DAY)] if chatters else []
    )


def test_the_confirmed_share_leaves_out_what_is_not_decided():
    day = dt.date(2025, 3, 1)
    outcomes = [Outcome.INSTRUMENT, Outcome.REAL_CHANGE, Outcome.FALSE, Outcome.UNDETERMINED, None]
    counts = log_counts([entry(i, day, outcome=o) for i, o in enumerate(outcomes)], NOW)
    assert counts.confirmed_share == pytest.approx(2 / 3)
    assert counts.by_outcome == {"false": 1, "instrument": 1, "real change": 1, "undetermined": 1}
    assert counts.as_json()["confirmed_share"] == counts.confirmed_share
    assert log_counts([entry(1, day)], NOW).confirmed_share is None

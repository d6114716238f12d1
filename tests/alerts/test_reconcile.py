"""The log is brought in step with the evidence: one change, one alert, and nothing is deleted."""

import dataclasses
import datetime as dt

from rhovane.alerts import Found, reconcile
from rhovane.model import Alert, AlertEvent, CorrelationEstimate, EventKind

AT = dt.datetime(2025, 4, 1, 4, tzinfo=dt.UTC)
NIGHT = dt.date(2025, 3, 31)
DAY = dt.timedelta(days=1)
ONSET = dt.date(2025, 3, 1)


def estimate() -> CorrelationEstimate:
    return CorrelationEstimate(ONSET - 28 * DAY, ONSET, 0.8, 600, 60.0, 0.7, 0.9)


def found(pair: str = "A.x~B.x", alarm: dt.date = ONSET + 4 * DAY, **changes) -> Found:
    base = Found(pair, "r1", alarm, ONSET, "weaker", "strength", None, None)
    return dataclasses.replace(base, **changes)


def logged(
    alert_id: int, pair: str = "A.x~B.x", alarm: dt.date = ONSET + 4 * DAY, recipe: str = "r1"
) -> Alert:
    return Alert(
        alert_id,
        pair,
        recipe,
        "strength",
        "weaker",
        alarm,
        ONSET,
        alarm,
        1,
        1,
        "s",
        9.0,
        8.0,
        estimate(),
        estimate(),
    )


def raised(alert: Alert) -> AlertEvent:
    return AlertEvent(alert.id, EventKind.RAISED, AT - 20 * DAY, "rhovane")


def bring(episodes, alerts, events=None, judged=None, night=NIGHT):
    events = events or {a.id: [raised(a)] for a in alerts}
    return reconcile(
        episodes,
        alerts,
        events,
        at=AT,
        night_as_of=night,
        judged=judged or {"A.x~B.x": "r1", "C.x~D.x": "r1"},
    )


def test_an_episode_the_log_does_not_know_is_a_new_alert():
    change = bring([found()], [])
    assert change.new == (found(),)
    assert change.events == ()


def test_an_episode_the_log_knows_raises_nothing_however_long_it_lasts():
    change = bring([found()], [logged(1)])
    assert change.new == ()
    assert change.events == ()
    assert change.matched == {1: found()}


def test_an_alarm_day_moved_by_revisions_is_still_the_same_alert():
    change = bring([found(alarm=ONSET + 9 * DAY)], [logged(1)])
    assert change.new == ()


def test_the_same_change_on_another_pair_is_another_alert():
    change = bring([found(), found("C.x~D.x")], [logged(1)])
    assert [f.pair_key for f in change.new] == ["C.x~D.x"]


def test_an_ended_episode_is_written_once():
    over = found(end_day=ONSET + 20 * DAY, ending="returned")
    first = bring([over], [logged(1)])
    assert [e.kind for e in first.events] == [EventKind.RETURNED]
    assert first.events[0].payload["day"] == str(ONSET + 20 * DAY)
    again = bring([over], [logged(1)], {1: [raised(logged(1)), *first.events]})
    assert again.events == ()


def test_a_lasting_change_gets_a_new_baseline_visibly():
    over = found(end_day=ONSET + 110 * DAY, ending="new baseline")
    assert [e.kind for e in bring([over], [logged(1)]).events] == [EventKind.NEW_BASELINE]


def test_an_alert_that_revised_readings_no_longer_show_is_superseded_once_and_confirmed_when_it_is_back():
    alert = logged(1)
    gone = bring([], [alert])
    assert [e.kind for e in gone.events] == [EventKind.SUPERSEDED]
    log = [raised(alert), *gone.events]
    assert bring([], [alert], {1: log}).events == ()
    back = bring([found()], [alert], {1: log})
    assert [e.kind for e in back.events] == [EventKind.CONFIRMED]
    assert back.new == ()


def test_an_alert_of_a_pair_that_could_not_be_judged_is_left_alone():
    assert bring([], [logged(1)], judged={"C.x~D.x": "r1"}).events == ()


def test_an_alert_of_an_earlier_recipe_is_left_alone():
    assert bring([], [logged(1)], judged={"A.x~B.x": "r2"}).events == ()


def test_two_changes_of_one_pair_stay_two_alerts():
    later = ONSET + 200 * DAY
    second = found(alarm=later + 4 * DAY, onset_day=later)
    first = found(end_day=ONSET + 40 * DAY, ending="returned")
    change = bring([first, second], [logged(1)])
    assert change.new == (second,)

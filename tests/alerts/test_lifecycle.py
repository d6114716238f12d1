"""An alert's state follows from its events and the moment, in ISA-18.2 words."""

import datetime as dt

import pytest

from rhovane.alerts import refusal, standing_of
from rhovane.model import AlertEvent, AlertState, EventKind, Outcome

T0 = dt.datetime(2025, 3, 1, 4, tzinfo=dt.UTC)


def event(kind: EventKind, hours: int = 0, who: str = "ana", **payload: str) -> AlertEvent:
    return AlertEvent(1, kind, T0 + dt.timedelta(hours=hours), who, "", payload)


RAISED = event(EventKind.RAISED, who="rhovane")
ACK = event(EventKind.ACKNOWLEDGED, 1)
RETURNED = event(EventKind.RETURNED, 48, who="rhovane", day="2025-03-03")


@pytest.mark.parametrize(
    ("events", "state"),
    [
        ([RAISED], AlertState.UNACKNOWLEDGED),
        ([RAISED, ACK], AlertState.ACKNOWLEDGED),
        ([RAISED, RETURNED], AlertState.RETURNED_UNACKNOWLEDGED),
        ([RAISED, ACK, RETURNED], AlertState.RETURNED),
        ([RAISED, RETURNED, ACK], AlertState.RETURNED),
        ([RAISED, event(EventKind.OUTCOME, 2, outcome="instrument")], AlertState.ACKNOWLEDGED),
        ([RAISED, event(EventKind.NEW_BASELINE, 900)], AlertState.RETURNED_UNACKNOWLEDGED),
        ([RAISED, ACK, event(EventKind.OUT_OF_SERVICE, 3)], AlertState.OUT_OF_SERVICE),
        ([RAISED, event(EventKind.NOTE, 1)], AlertState.UNACKNOWLEDGED),
    ],
)
def test_the_state_follows_from_the_events(events: list[AlertEvent], state: AlertState):
    assert standing_of(events, T0 + dt.timedelta(days=60)).state is state


def test_a_shelved_alert_comes_back_by_itself_on_its_date():
    events = [RAISED, event(EventKind.SHELVED, 1, until="2025-03-10")]
    assert standing_of(events, T0 + dt.timedelta(days=8)).state is AlertState.SHELVED
    assert standing_of(events, T0 + dt.timedelta(days=9)).state is AlertState.ACKNOWLEDGED


def test_the_newest_outcome_stands():
    events = [
        RAISED,
        event(EventKind.OUTCOME, 1, outcome="undetermined"),
        event(EventKind.OUTCOME, 2, outcome="real change"),
    ]
    assert standing_of(events, T0).outcome is Outcome.REAL_CHANGE


def test_a_superseded_alert_that_is_confirmed_anew_counts_as_changed_again():
    events = [RAISED, event(EventKind.SUPERSEDED, 24)]
    assert standing_of(events, T0).superseded
    assert not standing_of(events, T0).changed
    again = standing_of([*events, event(EventKind.CONFIRMED, 48)], T0)
    assert not again.superseded
    assert again.changed


def test_a_log_that_does_not_begin_with_the_raising_is_an_error():
    with pytest.raises(ValueError, match="not complete"):
        standing_of([ACK], T0)
    with pytest.raises(ValueError, match="not complete"):
        standing_of([], T0)


@pytest.mark.parametrize(
    ("new", "so_far", "reason"),
    [
        (event(EventKind.ACKNOWLEDGED, 5), [RAISED, ACK], "already acknowledged by ana"),
        (event(EventKind.SHELVED, 5, until="2025-03-01"), [RAISED], "not in the future"),
        (event(EventKind.ACKNOWLEDGED, 5, who=" "), [RAISED], "needs a name"),
        (event(EventKind.RAISED, 5), [RAISED], "only the night"),
    ],
)
def test_decisions_that_do_not_fit_are_refused_with_the_reason(new, so_far, reason):
    assert reason in refusal(new, so_far, T0)


@pytest.mark.parametrize(
    "new",
    [
        event(EventKind.ACKNOWLEDGED, 5),
        event(EventKind.SHELVED, 5, until="2025-03-02"),
        event(EventKind.OUTCOME, 5, outcome="false"),
        event(EventKind.NOTE, 5),
    ],
)
def test_decisions_that_fit_are_accepted(new):
    assert refusal(new, [RAISED], T0) is None


def test_an_alert_that_returned_unseen_can_still_be_acknowledged():
    assert refusal(event(EventKind.ACKNOWLEDGED, 99), [RAISED, RETURNED], T0) is None

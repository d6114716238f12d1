"""The alert log: what was written stays, and a change to it shows."""

import datetime as dt
from itertools import pairwise

import numpy as np
import pytest

from rhovane.model import NotFound, RhovaneError, StoreDamaged
from rhovane.store import NewAlert, NewAlertEvent, open_store
from store.building import NOW

DAY = dt.date(2024, 5, 1)


@pytest.fixture
def log(store):
    """A store with two alerts and five events."""
    assert store.append_alerts(
        [NewAlert("a~b", DAY, 1, {"score": np.float64(0.1), "rho": [0.5, -0.25]}), NewAlert("b~c", DAY, 1)]
    ) == [1, 2]
    store.append_alert_events(
        [
            NewAlertEvent(1, NOW, "raised", payload={"limit": 4.7, "Größe": "µg/m³"}),
            NewAlertEvent(2, NOW, "raised"),
        ]
    )
    store.append_alert_events(
        [
            {
                "alert_id": np.int64(1),
                "at": NOW.replace(microsecond=7),
                "kind": "acknowledged",
                "who": "k",
                "note": "ok",
            },
            NewAlertEvent(2, NOW, "shelved", "k", "site work", {"until": DAY}),
            NewAlertEvent(1, NOW, "returned to normal"),
        ]
    )
    return store


def test_alerts_and_events_come_back_as_written(log):
    assert [a.pair_key for a in log.alerts()] == ["a~b", "b~c"]
    alert = log.alert(1)
    assert (alert.alert_id, alert.day, alert.night_id) == (1, DAY, 1)
    assert alert.payload == {"score": 0.1, "rho": [0.5, -0.25]}
    events = log.alert_events()
    assert [(e.seq, e.alert_id, e.kind) for e in events] == [
        (1, 1, "raised"),
        (2, 2, "raised"),
        (3, 1, "acknowledged"),
        (4, 2, "shelved"),
        (5, 1, "returned to normal"),
    ]
    assert events[0].payload == {"limit": 4.7, "Größe": "µg/m³"}
    assert (events[2].who, events[2].note, events[2].at) == ("k", "ok", NOW.replace(microsecond=7))
    assert [e.seq for e in log.alert_events(2)] == [2, 4]
    assert all(later.previous_hash == earlier.hash for earlier, later in pairwise(events))
    with pytest.raises(NotFound, match="no alert 9"):
        log.alert(9)


def test_untouched_chain_is_whole_also_when_opened_again(log, path):
    assert log.verify_alert_chain() is None
    log.close()
    with open_store(path, read_only=True) as again:
        assert again.verify_alert_chain() is None
        assert len(again.alert_events()) == 5


CHANGES = [
    ("update alert_event set note = 'never mind' where seq = 3", 3),
    ("update alert_event set happened_at = happened_at + interval 1 second where seq = 2", 2),
    ("update alert_event set payload = '{\"limit\":4.8}' where seq = 1", 1),
    ("update alert_event set alert_id = 2 where seq = 5", 5),
    ("update alert_event set previous_hash = '' where seq = 3", 3),
    ("update alert_event set seq = 9 where seq = 5", 5),
    ("delete from alert_event where seq = 4", 4),
    ("delete from alert_event where seq = 1", 1),
    ("insert into alert_event select * from alert_event where seq = 2", 3),
    ("update alert set payload = '{}' where id = 1", 1),
    ("update alert set pair_key = 'x~y' where id = 2", 2),
    ("delete from alert where id = 2", 2),
]


def test_first_changed_event_is_found(log):
    def changed(change):
        with log.transaction():
            log.execute(change)
            places.append(log.verify_alert_chain())
            raise InterruptedError

    places = []
    for change, _ in CHANGES:
        with pytest.raises(InterruptedError):
            changed(change)
    assert places == [place for _, place in CHANGES]
    assert log.verify_alert_chain() is None


def test_events_removed_from_the_end_are_missed_at_the_next_opening(log, path):
    log.execute("delete from alert_event where seq = 5")
    assert log.verify_alert_chain() is None
    log.close()
    with pytest.raises(StoreDamaged, match="1 lost: 4 events in the alert log, the manifest says 5"):
        open_store(path)


def test_events_that_cannot_be_recorded_leave_nothing(log):
    good = NewAlertEvent(1, NOW, "note")
    for bad, error, words in (
        (NewAlertEvent(8, NOW, "note"), NotFound, "no alert 8"),
        (
            NewAlertEvent(1, NOW, "note", payload={"x": float("nan")}),
            RhovaneError,
            "cannot be written as JSON",
        ),
        (NewAlertEvent(1, NOW, "note", payload={"x": {1, 2}}), RhovaneError, "set has no JSON form"),
        ({"alert_id": 1, "when": NOW, "kind": "note"}, RhovaneError, "fields are alert_id"),
    ):
        with pytest.raises(error, match=words):
            log.append_alert_events([good, bad])
    assert len(log.alert_events()) == 5
    assert log.append_alert_events([good]) == [6]
    assert log.append_alert_events([]) == []
    assert log.append_alerts([]) == []
    assert log.verify_alert_chain() is None


def test_whether_an_event_of_a_kind_is_there_follows_what_is_added(log):
    assert log.has_events_of("shelved")
    assert not log.has_events_of("outcome")

    def undone() -> None:
        with log.transaction():
            log.append_alert_events([NewAlertEvent(1, NOW, "outcome")])
            assert log.has_events_of("outcome")
            raise InterruptedError

    with pytest.raises(InterruptedError):
        undone()
    assert not log.has_events_of("outcome")
    log.append_alert_events([NewAlertEvent(1, NOW, "outcome")])
    assert log.has_events_of("outcome")

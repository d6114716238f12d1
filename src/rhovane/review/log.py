"""The alert log as words of the domain, and the domain's words as entries of the log."""

from __future__ import annotations

from collections.abc import Sequence

from rhovane.model import Alert, AlertEvent, EventKind
from rhovane.store import NewAlert, NewAlertEvent, Store


def logged_alerts(store: Store) -> list[Alert]:
    """All alerts, in order of their number."""
    return [Alert.from_json({**a.payload, "id": a.alert_id}) for a in store.alerts()]


def logged_events(store: Store) -> dict[int, list[AlertEvent]]:
    """The events of every alert, in the order of the log."""
    events: dict[int, list[AlertEvent]] = {}
    for e in store.alert_events():
        event = AlertEvent(e.alert_id, EventKind(e.kind), e.at, e.who, e.note, e.payload)
        events.setdefault(e.alert_id, []).append(event)
    return events


def log_alerts(store: Store, alerts: Sequence[Alert]) -> None:
    """Record the facts of new alerts; they must carry the next numbers of the log."""
    new = [
        NewAlert(a.pair_key, a.alarm_day, a.night_id, {k: v for k, v in a.as_json().items() if k != "id"})
        for a in alerts
    ]
    numbers = store.append_alerts(new)
    assert numbers == [a.id for a in alerts], "alerts are numbered inside the night's transaction"


def log_events(store: Store, events: Sequence[AlertEvent]) -> None:
    """Add events to the log."""
    store.append_alert_events(
        [NewAlertEvent(e.alert_id, e.at, e.kind.value, e.who, e.note, e.payload) for e in events]
    )

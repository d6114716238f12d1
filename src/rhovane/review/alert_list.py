"""Alerts as the analyst reads them: the facts of the raising, where it stands now, what was decided."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from rhovane.alerts import Standing, refusal, standing_of
from rhovane.model import Alert, AlertEvent, AlertState, EventKind, NotFound, RhovaneError
from rhovane.review.log import log_events, logged_alerts, logged_events
from rhovane.store import NightRecord, Store


@dataclass(frozen=True)
class AlertEntry:
    """One alert with its events and where it stands."""

    alert: Alert
    events: tuple[AlertEvent, ...]
    standing: Standing

    @property
    def needs_review(self) -> bool:
        """Whether nobody has acknowledged it yet."""
        return self.standing.state in (AlertState.UNACKNOWLEDGED, AlertState.RETURNED_UNACKNOWLEDGED)

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        standing = self.standing
        return {
            **self.alert.as_json(),
            "state": standing.state.value,
            "changed": standing.changed,
            "outcome": None if standing.outcome is None else standing.outcome.value,
            "superseded": standing.superseded,
            "ended": None
            if standing.ended is None
            else {"how": standing.ended.kind.value, "day": standing.ended.payload.get("day")},
            "events": [
                {
                    "kind": e.kind.value,
                    "at": e.at.isoformat(),
                    "who": e.who,
                    "note": e.note,
                    **({"payload": dict(e.payload)} if e.payload else {}),
                }
                for e in self.events
            ],
        }


def alert_entries(store: Store, now: dt.datetime) -> list[AlertEntry]:
    """All alerts, newest alarm day first."""
    events = logged_events(store)
    entries = [
        AlertEntry(alert, tuple(events[alert.id]), standing_of(events[alert.id], now))
        for alert in logged_alerts(store)
    ]
    return sorted(entries, key=lambda e: (e.alert.alarm_day, e.alert.id), reverse=True)


def alert_entries_of(store: Store, night: NightRecord) -> list[AlertEntry]:
    """The alerts as they stood when a night had finished: raised up to it, with the events up to then."""
    end = night.finished or night.started
    entries = []
    for entry in alert_entries(store, end):
        if entry.alert.night_id <= night.night_id:
            events = tuple(e for e in entry.events if e.at <= end)
            entries.append(AlertEntry(entry.alert, events, standing_of(events, end)))
    return entries


def alert_entry(store: Store, alert_id: int, now: dt.datetime) -> AlertEntry:
    """One alert.

    Raises
    ------
    NotFound
        There is no alert with this number.
    """
    entries = alert_entries(store, now)
    for entry in entries:
        if entry.alert.id == alert_id:
            return entry
    known = f"known: 1 to {max(e.alert.id for e in entries)}" if entries else "the log is empty"
    raise NotFound(f"alert {alert_id}: no such alert ({known}). List them with `rhovane alerts`.")


def unreviewed(store: Store, now: dt.datetime) -> int:
    """How many alerts nobody has acknowledged yet."""
    return sum(entry.needs_review for entry in alert_entries(store, now))


def record_decision(
    store: Store,
    alert_id: int,
    kind: EventKind,
    *,
    now: dt.datetime,
    who: str,
    note: str = "",
    payload: dict[str, Any] | None = None,
) -> AlertEntry:
    """Append what a person decided to the alert log, and return the alert as it stands then.

    An outcome acts on the watch from the first day that no night has judged yet; that day is recorded with it
    as ``acts_from``.

    Raises
    ------
    NotFound
        There is no alert with this number.
    RhovaneError
        The decision does not fit the alert's state; says why.
    """
    entry = alert_entry(store, alert_id, now)
    facts = dict(payload or {})
    if kind is EventKind.OUTCOME:
        acts_from = store.next_judged_day() or entry.alert.night_as_of + dt.timedelta(days=1)
        facts["acts_from"] = acts_from.isoformat()
    event = AlertEvent(alert_id, kind, now, who, note, facts)
    reason = refusal(event, entry.events, now)
    until = facts.get("until") if kind is EventKind.OUTCOME else None
    if reason is None and until and dt.date.fromisoformat(until) < entry.alert.onset_day:
        reason = f"it began on {entry.alert.onset_day}, after {until}; name a later end"
    if reason is not None:
        raise RhovaneError(f"alert {alert_id}: {reason}. Nothing was written.")
    log_events(store, [event])
    return alert_entry(store, alert_id, now)


def counts_by_state(entries: Sequence[AlertEntry]) -> dict[str, int]:
    """How many alerts are in each state."""
    counts: dict[str, int] = {}
    for entry in entries:
        counts[entry.standing.state.value] = counts.get(entry.standing.state.value, 0) + 1
    return counts

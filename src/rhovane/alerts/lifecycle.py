"""The state of an alert as a pure function of its events and the moment asked for."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

from rhovane.model import AlertEvent, AlertState, EventKind, Outcome

ENDS_CHANGE = frozenset({EventKind.RETURNED, EventKind.NEW_BASELINE, EventKind.SUPERSEDED})


@dataclass(frozen=True)
class Standing:
    """Where an alert stands: its state, and what has been said and decided about it so far.

    ``changed`` tells whether the relationship still counts as changed (no return to normal and no new
    baseline yet); ``ended`` is the event that ended it. ``superseded`` is true while the newest word of
    the log on revised readings is that they no longer show the change.
    """

    state: AlertState
    changed: bool
    ended: AlertEvent | None
    outcome: Outcome | None
    shelved_until: dt.date | None
    superseded: bool
    last_note: str


def standing_of(events: Sequence[AlertEvent], now: dt.datetime) -> Standing:
    """Where an alert stands at ``now``, from its events in the order of the log.

    Raises
    ------
    ValueError
        There are no events, or the first is not the raising.
    """
    if not events or events[0].kind is not EventKind.RAISED:
        raise ValueError(
            f"an alert's events begin with {EventKind.RAISED.value!r}; found "
            f"{events[0].kind.value if events else 'none'!r}: the log is not complete"
        )
    acknowledged = out_of_service = superseded = False
    ended: AlertEvent | None = None
    outcome: Outcome | None = None
    shelved_until: dt.date | None = None
    note = ""
    for event in events:
        match event.kind:
            case EventKind.ACKNOWLEDGED:
                acknowledged = True
            case EventKind.SHELVED:
                acknowledged = True
                shelved_until = dt.date.fromisoformat(str(event.payload["until"]))
            case EventKind.OUTCOME:
                acknowledged = True
                outcome = Outcome(str(event.payload["outcome"]))
            case EventKind.OUT_OF_SERVICE:
                out_of_service = True
            case EventKind.CONFIRMED:
                superseded, ended = False, None
            case _ if event.kind in ENDS_CHANGE:
                ended = event
                superseded = event.kind is EventKind.SUPERSEDED
        note = event.note or note
    state = AlertState.ACKNOWLEDGED if acknowledged else AlertState.UNACKNOWLEDGED
    if ended is not None:
        state = AlertState.RETURNED if acknowledged else AlertState.RETURNED_UNACKNOWLEDGED
    if shelved_until is not None and now.date() < shelved_until:
        state = AlertState.SHELVED
    if out_of_service:
        state = AlertState.OUT_OF_SERVICE
    return Standing(state, ended is None, ended, outcome, shelved_until, superseded, note)


def refusal(event: AlertEvent, so_far: Sequence[AlertEvent], now: dt.datetime) -> str | None:
    """Why an event by a person cannot be added to the log; None when it can.

    A person acknowledges once, shelves with an end in the future, and gives an outcome as often as the
    finding changes (the newest stands; the earlier ones stay in the log). An end of the days that are set aside
    belongs to a fault, a new baseline to a real change that still lasts.
    """
    standing = standing_of(so_far, now)
    if not event.who.strip():
        return "a decision needs a name: set --who NAME"
    match event.kind:
        case EventKind.ACKNOWLEDGED if any(e.kind is EventKind.ACKNOWLEDGED for e in so_far):
            first = next(e for e in so_far if e.kind is EventKind.ACKNOWLEDGED)
            return f"already acknowledged by {first.who} at {first.at:%Y-%m-%d %H:%M} UTC; add an outcome or a note"
        case EventKind.SHELVED:
            until = dt.date.fromisoformat(str(event.payload.get("until", "")))
            if until <= now.date():
                return f"shelved until {until} is not in the future; name a later date"
        case EventKind.RAISED:
            return "only the night raises alerts"
        case EventKind.OUTCOME if standing.state is AlertState.OUT_OF_SERVICE:
            return "the pair is out of service"
        case EventKind.OUTCOME if event.payload.get("until") and not _is_fault(event):
            return "--until says how long readings were at fault; it is for instrument and data-handling"
        case EventKind.OUTCOME if event.payload.get("new_baseline"):
            if event.payload["outcome"] != Outcome.REAL_CHANGE:
                return "--new-baseline takes a new level as normal; it is for real-change"
            if not standing.changed:
                return "the change has ended; there is no new level to take as normal"
        case _:
            pass
    return None


def _is_fault(event: AlertEvent) -> bool:
    return event.payload["outcome"] in (Outcome.INSTRUMENT, Outcome.DATA_HANDLING)

"""Data notes as the analyst reads them: which hold now, and what they say in words."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from typing import Any

from rhovane.model import MOMENT_KINDS, DataNote, NoteKind, NoteState
from rhovane.prepare import days_of
from rhovane.settings import Settings
from rhovane.store import Store

RECENT_DAYS = 7  # days after its begin for which a note that is over is still shown


def current_notes(settings: Settings, store: Store) -> list[DataNote]:
    """Notes that last, and those that began in the 7 days up to the newest night; newest begin first."""
    last = store.last_finished_night()
    if last is None:
        return []
    days = days_of(settings.network.standard_offset)
    recent = days.moment(days.start_of(last.as_of - dt.timedelta(days=RECENT_DAYS - 1)))
    notes = [n for n in all_notes(store) if n.state is NoteState.HOLDS]
    return [n for n in notes if n.is_open or n.begin >= recent]


def all_notes(store: Store) -> list[DataNote]:
    """The newest version of every data note, those withdrawn included; newest begin first."""
    return sorted(store.data_notes(), key=lambda n: (-n.begin.timestamp(), n.subject, n.id))


def note_words(note: DataNote) -> str:
    """What a note says, with its numbers."""
    facts = note.facts
    match note.kind:
        case NoteKind.GAP:
            hours = "" if note.end is None else f" for {_hours(note)} h"
            return f"no observation{hours}"
        case NoteKind.LOW_COVERAGE:
            return f"{facts['share']:.0%} of {facts['window_days']} days observed when it began"
        case NoteKind.STUCK:
            return f"repeats {facts['value']:g}" + ("" if note.end is None else f" for {_hours(note)} h")
        case NoteKind.DRY:
            return (
                f"reads zero while {facts['neighbours']} is wet "
                f"({facts['amount']:g} there in the first {facts['wet_hours']} wet hours)"
            )
        case NoteKind.TIES:
            return (
                f"equal values {facts['after'] / max(facts['before'], 1e-9):.0f} times as frequent: "
                "rounded, or cut off at a limit?"
            )
        case NoteKind.LEFT_OUT:
            return f"own checks leave hours out ({facts['hours']} on the first day: {facts['checks']})"
        case NoteKind.NOT_COMPUTABLE:
            return str(facts["reason"])
        case _:
            return _step_words(note)


def _step_words(note: DataNote) -> str:
    facts = note.facts
    if "factor" not in facts:
        text = f"level moved by {facts['offset']:+g} against its neighbours"
        return text + (": °C and K?" if note.kind is NoteKind.UNIT_SWITCH else "")
    text = f"level × {facts['factor']:.3g} ({facts['low']:.3g} to {facts['high']:.3g}) against its neighbours"
    if note.kind is NoteKind.UNIT_SWITCH:
        inverse = "1/" if facts["factor"] < 1 else ""
        text += f"; a change of unit makes {inverse}{facts['unit']:.3g}"
    if note.kind is NoteKind.SHIFTED_ZERO:
        text += f"; low and high values alike moved by {facts['offset']:+.2g}"
    return text


def note_state(note: DataNote) -> str:
    """Where a note stands, in a word or two."""
    if note.state is NoteState.WITHDRAWN:
        return "filled later" if note.kind is NoteKind.GAP else "withdrawn after later readings"
    if note.kind in MOMENT_KINDS:
        return ""
    return "lasts" if note.end is None else "over"


def notes_as_json(notes: Sequence[DataNote]) -> list[dict[str, Any]]:
    """Plain values for ``--json``."""
    return [
        {
            "id": n.id,
            "version": n.version,
            "subject": n.subject,
            "kind": n.kind.value,
            "begin": n.begin.isoformat(),
            "end": None if n.end is None else n.end.isoformat(),
            "state": n.state.value,
            "says": note_words(n),
            "facts": dict(n.facts),
            "night_id": n.night_id,
        }
        for n in notes
    ]


def _hours(note: DataNote) -> int:
    assert note.end is not None
    return int((note.end - note.begin).total_seconds()) // 3600 + 1

"""What a look changes in the notes that are known."""

from __future__ import annotations

import datetime as dt

from rhovane.model import DataNote, NoteKind, NoteState
from rhovane.pipeline.findings import DAY_S, HOUR_S, Finding, Look
from rhovane.pipeline.note_changes import KnownNotes, changed_notes, moment

DAY_0 = int(dt.datetime(2025, 3, 1, tzinfo=dt.UTC).timestamp())


def gap(begin: float, end: float | None, subject: str = "A.NO2") -> Finding:
    last = None if end is None else DAY_0 + int(end * DAY_S)
    return Finding(subject, NoteKind.GAP, DAY_0 + int(begin * DAY_S), last)


def note(number: int, begin: float, end: float | None, subject: str = "A.NO2") -> DataNote:
    last = None if end is None else moment(DAY_0 + int(end * DAY_S))
    return DataNote(number, 1, subject, NoteKind.GAP, moment(DAY_0 + int(begin * DAY_S)), last)


def changes(
    known: list[DataNote], *findings: Finding, since: float = 0, exact: float = -99
) -> list[DataNote]:
    look = Look("gap", DAY_0 + int(since * DAY_S), DAY_0 + int(exact * DAY_S), findings)
    return changed_notes(KnownNotes(known), look, night_id=9)


def test_what_is_said_already_is_not_said_again():
    assert changes([note(1, 2, None)], gap(2, None)) == []


def test_a_new_finding_gets_the_next_number():
    (new,) = changes([note(4, 1, 2, "B.NO2")], gap(1, 2, "B.NO2"), gap(5, None))
    assert (new.id, new.version, new.subject, new.night_id) == (5, 1, "A.NO2", 9)


def test_a_finding_that_goes_on_from_before_the_look_keeps_its_begin():
    (new,) = changes([note(1, -50, None)], gap(-9, 3), since=-9, exact=-8)
    assert (new.id, new.version, new.begin) == (1, 2, moment(DAY_0 - 50 * DAY_S))
    assert new.end == moment(DAY_0 + 3 * DAY_S)


def test_what_the_readings_no_longer_show_is_withdrawn_and_what_lies_before_the_look_is_not():
    (new,) = changes([note(1, 2, 3), note(2, -5, -4)])
    assert (new.id, new.version, new.state) == (1, 2, NoteState.WITHDRAWN)


def test_a_gap_filled_in_the_middle_becomes_two():
    first, second = sorted(changes([note(1, 2, 9)], gap(2, 4), gap(6, 9)), key=lambda n: n.id)
    assert (first.id, first.version, second.id, second.version) == (1, 2, 2, 1)


def test_a_withdrawn_note_stays_so_and_its_number_is_not_used_again():
    withdrawn = DataNote(3, 2, "A.NO2", NoteKind.GAP, moment(DAY_0), None, state=NoteState.WITHDRAWN)
    (new,) = changes([withdrawn], gap(0, None))
    assert new.id == 4


def test_a_step_dated_anew_or_called_otherwise_is_the_same_note():
    old = DataNote(1, 1, "A.NO2", NoteKind.LEVEL_STEP, moment(DAY_0), moment(DAY_0), {"factor": 1.8})
    at = DAY_0 + 3 * DAY_S
    finding = Finding("A.NO2", NoteKind.UNIT_SWITCH, at, at, {"factor": 1.9})
    look = Look("step", DAY_0 - HOUR_S, 0, (finding,))
    (new,) = changed_notes(KnownNotes([old]), look, night_id=9)
    assert (new.id, new.version, new.kind, new.begin) == (1, 2, NoteKind.UNIT_SWITCH, moment(at))


def test_a_look_at_some_subjects_leaves_the_others_alone():
    look = Look("gap", DAY_0, DAY_0, (), frozenset({"B.NO2"}))
    assert changed_notes(KnownNotes([note(1, 2, None)]), look, night_id=9) == []

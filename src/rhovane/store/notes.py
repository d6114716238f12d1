"""Data notes: versions are only ever added; the newest of each note is what holds."""

from __future__ import annotations

import json
from collections.abc import Sequence

import numpy as np

from rhovane.model import DataNote, NoteKind, NoteState
from rhovane.store.clock import aware_utc, naive_utc
from rhovane.store.jsontext import json_text
from rhovane.store.session import Session

_COLUMNS = "id, version, subject, kind, begins, ends, state, facts, night_id"


class NoteBook(Session):
    """Writing and reading of data notes."""

    def append_notes(self, notes: Sequence[DataNote]) -> None:
        """Add versions of data notes; the caller numbers them."""
        if not notes:
            return
        never = np.datetime64("NaT", "us")
        staged = {
            "id": np.array([n.id for n in notes], np.int64),
            "version": np.array([n.version for n in notes], np.int64),
            "subject": np.array([n.subject for n in notes], dtype=object),
            "kind": np.array([n.kind.value for n in notes], dtype=object),
            "begins": np.array([np.datetime64(naive_utc(n.begin), "us") for n in notes]),
            "ends": np.array(
                [never if n.end is None else np.datetime64(naive_utc(n.end), "us") for n in notes]
            ),
            "state": np.array([n.state.value for n in notes], dtype=object),
            "facts": np.array([json_text(n.facts) for n in notes], dtype=object),
            "night_id": np.array([n.night_id for n in notes], np.int64),
        }
        with self.transaction():
            self.execute(f"insert into data_note select {_COLUMNS} from staged", staged=staged)

    def data_notes(self, *, every_version: bool = False) -> list[DataNote]:
        """The newest version of every data note, or all versions; in order of number and version."""
        newest = (
            "" if every_version else "qualify row_number() over (partition by id order by version desc) = 1"
        )
        found = self.rows(f"select {_COLUMNS} from data_note {newest} order by id, version")
        return [
            DataNote(
                number,
                version,
                subject,
                NoteKind(kind),
                aware_utc(begins),
                None if ends is None else aware_utc(ends),
                json.loads(facts),
                NoteState(state),
                night,
            )
            for number, version, subject, kind, begins, ends, state, facts, night in found
        ]

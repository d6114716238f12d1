"""Data notes in the store: versions are added, the newest holds, none is lost."""

from __future__ import annotations

import dataclasses
import datetime as dt

import pytest

from rhovane.model import DataNote, NoteKind, NoteState, RhovaneError
from rhovane.store import open_store

BEGIN = dt.datetime(2025, 2, 24, tzinfo=dt.UTC)
OPEN = DataNote(1, 1, "A.NO2", NoteKind.GAP, BEGIN, None, {}, NoteState.HOLDS, 7)
OTHER = DataNote(
    2, 1, "A.NO2~B.NO2", NoteKind.NOT_COMPUTABLE, BEGIN, BEGIN, {"reason": "too few"}, night_id=8
)


def test_the_newest_version_is_read_and_all_versions_are_kept(tmp_path):
    over = dataclasses.replace(OPEN, version=2, end=BEGIN + dt.timedelta(hours=40), night_id=8)
    filled = dataclasses.replace(over, version=3, state=NoteState.WITHDRAWN, night_id=9)
    with open_store(tmp_path / "s.duckdb") as store:
        store.append_notes([OPEN])
        store.append_notes([over, OTHER])
        store.append_notes([filled])
        store.append_notes([])
    with open_store(tmp_path / "s.duckdb", read_only=True) as store:
        assert store.data_notes() == [filled, OTHER]
        assert store.data_notes(every_version=True) == [OPEN, over, filled, OTHER]


def test_notes_of_a_night_that_is_rolled_back_are_gone(tmp_path):
    def note_and_fail(store):
        with store.transaction():
            store.append_notes([OPEN])
            raise RhovaneError("stopped")

    with open_store(tmp_path / "s.duckdb") as store:
        with pytest.raises(RhovaneError, match="stopped"):
            note_and_fail(store)
        assert store.data_notes() == []

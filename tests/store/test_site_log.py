"""The site log in the store: added to and withdrawn from, never changed or deleted."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import pytest

from rhovane.model import NotFound, ReadingsUse, RhovaneError, SiteLogEntry
from rhovane.store import open_store

NOW = dt.datetime(2025, 3, 1, 4, tzinfo=dt.UTC)
DAY = dt.timedelta(days=1)
VISIT = SiteLogEntry("A", NOW - 3 * DAY, NOW - DAY, "lamp changed, flow checked", ReadingsUse.NOT_USED)
WORKS = SiteLogEntry("*", NOW, None, "works", ReadingsUse.AS_USUAL)


def test_entries_come_back_as_they_were_written_and_stay_when_withdrawn(tmp_path: Path):
    with open_store(tmp_path / "s.duckdb") as store:
        acts = dt.date(2025, 2, 28)
        assert store.add_to_site_log([VISIT, WORKS], who="Ada", now=NOW, acts_from=acts) == [1, 2]
        assert store.add_to_site_log([VISIT], who="Ben", now=NOW + DAY, acts_from=None) == [3]
        before = store.site_log()
        store.withdraw_from_site_log(1, now=NOW + 2 * DAY, from_day=acts + 2 * DAY)
        assert [s.stands for s in before] == [True, True, True]
        assert [s.stands for s in store.site_log()] == [False, True, True]
    with open_store(tmp_path / "s.duckdb", read_only=True) as store:
        found = store.site_log()
    assert [(s.number, s.entry, s.who, s.written_at, s.acts_from) for s in found] == [
        (1, VISIT, "Ada", NOW, acts),
        (2, WORKS, "Ada", NOW, acts),
        (3, VISIT, "Ben", NOW + DAY, None),
    ]
    assert [s.stands for s in found] == [False, True, True]
    assert (found[0].withdrawn_at, found[0].withdrawn_from) == (NOW + 2 * DAY, acts + 2 * DAY)


def test_entries_of_a_transaction_that_failed_are_not_remembered(tmp_path: Path):
    with open_store(tmp_path / "s.duckdb") as store:

        def undone() -> None:
            with store.transaction():
                store.add_to_site_log([VISIT], who="Ada", now=NOW, acts_from=None)
                assert len(store.site_log()) == 1
                raise InterruptedError

        with pytest.raises(InterruptedError):
            undone()
        assert store.site_log() == []


def test_an_entry_is_withdrawn_once_and_must_exist(tmp_path: Path):
    with open_store(tmp_path / "s.duckdb") as store:
        store.add_to_site_log([VISIT], who="Ada", now=NOW, acts_from=None)
        store.withdraw_from_site_log(1, now=NOW, from_day=None)
        with pytest.raises(RhovaneError, match="withdrawn already"):
            store.withdraw_from_site_log(1, now=NOW, from_day=None)
        with pytest.raises(NotFound, match="no entry 9"):
            store.withdraw_from_site_log(9, now=NOW, from_day=None)


def test_the_next_judged_day_follows_the_newest_day_of_a_finished_night(tmp_path: Path):
    with open_store(tmp_path / "s.duckdb") as store:
        assert store.next_judged_day() is None
        for as_of, outcome in ((10, "complete"), (12, "incomplete"), (13, "failed"), (11, "complete")):
            day = dt.date(2025, 3, as_of)
            number = store.begin_night(
                kind="nightly", as_of=day, now=NOW, settings_hash="", program_version=""
            )
            store.finish_night(number, now=NOW, outcome=outcome, steps=[], counts={})
        store.begin_night(
            kind="nightly", as_of=dt.date(2025, 3, 20), now=NOW, settings_hash="", program_version=""
        )
        assert store.next_judged_day() == dt.date(2025, 3, 13)

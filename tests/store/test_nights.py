"""The night ledger."""

import datetime as dt

import numpy as np
import pytest

from rhovane.model import NotFound, RhovaneError
from rhovane.store import open_store
from store.building import KEYS, NOW, parsed_file


def begin(store, kind="nightly", day=1):
    return store.begin_night(
        kind=kind, as_of=dt.date(2024, 5, day), now=NOW, settings_hash="abc", program_version="0.1.0"
    )


def test_night_is_running_until_it_is_finished_and_keeps_what_it_saw(store):
    night = begin(store)
    (running,) = store.nights()
    assert (running.outcome, running.finished, running.data_version) == ("running", None, 0)
    assert (running.kind, running.as_of, running.started) == ("nightly", dt.date(2024, 5, 1), NOW)
    store.append_files([parsed_file([{"series": KEYS[0], "hour": 0, "value": 1.0}])], now=NOW)
    steps = [{"name": "ingest", "outcome": "well", "seconds": np.float64(1.5)}]
    ended = NOW + dt.timedelta(minutes=2)
    store.finish_night(night, now=ended, outcome="complete", steps=steps, counts={"pairs": np.int64(12)})
    (done,) = store.nights()
    assert (done.outcome, done.finished, done.data_version) == ("complete", ended, 1)
    assert done.steps == [{"name": "ingest", "outcome": "well", "seconds": 1.5}]
    assert done.counts == {"pairs": 12}
    assert (done.settings_hash, done.program_version) == ("abc", "0.1.0")


def test_last_complete_night_passes_over_others_and_the_list_is_newest_first(store):
    assert store.last_complete_night() is None
    for day, (kind, outcome) in enumerate(
        [("nightly", "complete"), ("backfill", "complete"), ("nightly", "incomplete"), ("nightly", "failed")],
        start=1,
    ):
        night = begin(store, kind, day)
        store.finish_night(night, now=NOW, outcome=outcome, steps=[], counts={}, data_version=day)
    assert [n.night_id for n in store.nights(3)] == [4, 3, 2]
    assert store.last_complete_night().night_id == 2
    assert store.last_complete_night("nightly").night_id == 1
    assert store.last_complete_night("rehearsal") is None
    assert [n.data_version for n in store.nights()] == [4, 3, 2, 1]


def test_last_finished_night_is_the_same_remembered_and_read_from_the_file(store, path):
    assert store.last_finished_night() is None
    for day, outcome in enumerate(["complete", "incomplete", "failed"], start=1):
        night = begin(store, day=day)
        store.finish_night(night, now=NOW, outcome=outcome, steps=[{"step": "ingest"}], counts={"pairs": day})
        remembered = store.last_finished_night()
        assert remembered.night_id == min(night, 2)
    night = begin(store, day=4)

    def undone():
        with store.transaction():
            store.finish_night(night, now=NOW, outcome="complete", steps=[], counts={})
            assert store.last_finished_night().night_id == night
            raise RhovaneError("what stopped it")

    with pytest.raises(RhovaneError, match="what stopped it"):
        undone()
    assert store.last_finished_night() == remembered
    store.close()
    with open_store(path) as reopened:
        assert reopened.last_finished_night() == remembered


def test_night_cannot_be_finished_twice_or_without_having_begun(store):
    night = begin(store)
    with pytest.raises(RhovaneError, match="outcome='good' is not known; allowed are complete"):
        store.finish_night(night, now=NOW, outcome="good", steps=[], counts={})
    with pytest.raises(RhovaneError, match="cannot be written as JSON"):
        store.finish_night(night, now=NOW, outcome="failed", steps=[], counts={"share": float("nan")})
    store.finish_night(night, now=NOW, outcome="failed", steps=[], counts={})
    with pytest.raises(RhovaneError, match=r"finished already \(failed\)"):
        store.finish_night(night, now=NOW, outcome="complete", steps=[], counts={})
    with pytest.raises(NotFound, match="no night 77"):
        store.finish_night(77, now=NOW, outcome="complete", steps=[], counts={})

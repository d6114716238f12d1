"""A transaction is all or nothing, and a lost one is never silent."""

import datetime as dt

import duckdb
import pytest

from rhovane.model import RhovaneError, StoreDamaged
from rhovane.store import EVIDENCE_COLUMNS, NewAlert, open_store
from rhovane.store.manifest import manifest_path, read_manifest
from rhovane.store.session import failure
from store.building import KEYS, NOW, current, parsed_file


def one_file(i):
    return parsed_file([{"series": KEYS[0], "hour": i, "value": float(i)}], name=f"feed/{i}.csv")


def in_one_transaction(store, *steps):
    """Take in a file and then run further steps, all in one transaction."""
    with store.transaction():
        store.append_files([one_file(1)], now=NOW)
        for step in steps:
            step()


def test_error_inside_undoes_everything_and_is_passed_on(store):
    with pytest.raises(ZeroDivisionError):
        in_one_transaction(store, lambda: 1 / 0)
    assert store.last_ingest_id() == 0
    assert current(store) == {}
    in_one_transaction(store)
    assert store.last_ingest_id() == 1


def test_failed_step_that_was_passed_over_undoes_everything_and_says_so(store):
    def passed_over():
        with pytest.raises(RhovaneError, match="not known to the store"):
            store.append_files([parsed_file([{"series": "X.y", "hour": 0, "value": 1.0}])], now=NOW)

    with pytest.raises(RhovaneError, match="all of it was undone"):
        in_one_transaction(store, passed_over)
    assert store.last_ingest_id() == 0


def test_failed_statement_dooms_the_transaction(store):
    def passed_over():
        with pytest.raises(RhovaneError, match="the database reports"):
            store.rows("select error('no')")

    with pytest.raises(RhovaneError, match="all of it was undone"):
        in_one_transaction(store, passed_over)
    assert store.last_ingest_id() == 0


def test_commit_that_reports_success_but_kept_nothing_is_found_out(store):
    def fail_unnoticed():
        with pytest.raises(duckdb.Error):
            store._connection.execute("select error('no')").fetchall()

    store._connection.execute("begin")
    fail_unnoticed()
    store._connection.execute("commit")  # the trap: DuckDB reports no error here

    with pytest.raises(StoreDamaged, match=r"reported success.*last_ingest_id is 0 where 1"):
        in_one_transaction(store, fail_unnoticed)
    assert store.last_ingest_id() == 0
    in_one_transaction(store)
    assert store.last_ingest_id() == 1


def test_night_commits_windows_evidence_and_alerts_together_or_not_at_all(store):
    night = store.begin_night(
        kind="nightly", as_of=dt.date(2024, 5, 1), now=NOW, settings_hash="s", program_version="1"
    )
    windows = {
        "pair_key": ["p"], "window_end": [0], "lag": 0, "statistic": 0.5, "n_pairs": 9, "coverage": 1.0,
        "n_effective": 5.0, "p_value": 0.1, "low": 0.1, "high": 0.9, "reason": "",
    }  # fmt: skip
    evidence = dict.fromkeys(EVIDENCE_COLUMNS, 1.0) | {
        "pair_key": ["p"], "recipe_hash": "r", "day": dt.date(2024, 5, 1)
    }  # fmt: skip

    def write(*steps):
        with store.transaction():
            store.write_windows(night, windows)
            store.write_evidence(night, evidence)
            (number,) = store.append_alerts([NewAlert("p", dt.date(2024, 5, 1), night)])
            store.append_alert_events([{"alert_id": number, "at": NOW, "kind": "raised"}])
            for step in steps:
                step()

    def interrupt():
        raise KeyboardInterrupt

    def counts():
        return [
            store.value(f"select count(*) from {table}")
            for table in ("window_result", "evidence", "alert", "alert_event", "label")
        ]

    with pytest.raises(KeyboardInterrupt):
        write(interrupt)
    assert counts() == [0, 0, 0, 0, 0]
    write()
    assert counts() == [1, 1, 1, 1, 3]
    manifest = read_manifest(store.path)
    assert (manifest.nights, manifest.alerts, manifest.alert_events) == (1, 1, 1)


def test_reading_by_another_connection_of_this_process_does_not_stop_an_ingest(store):
    with open_store(store.path) as reader:
        reader.execute("begin transaction")
        assert reader.last_ingest_id() == 0
        in_one_transaction(store)
        assert reader.last_ingest_id() == 0, "a reader keeps the state it began with"
        reader.execute("commit")
        assert reader.last_ingest_id() == 1


class FullDisk:
    """A connection whose checkpoints fail, as on a full disk."""

    def __init__(self, connection):
        self._connection = connection

    def __getattr__(self, name):
        return getattr(self._connection, name)

    def execute(self, sql, parameters=()):
        if sql == "checkpoint":
            raise duckdb.IOException("IO Error: no space left on device")
        return self._connection.execute(sql, parameters)


def test_failed_checkpoint_says_that_all_was_kept(store):
    store._connection = FullDisk(store._connection)
    with pytest.raises(RhovaneError, match=r"all was kept.*no space left"):
        store.finish_night(
            store.begin_night(
                kind="nightly", as_of=dt.date(2024, 5, 1), now=NOW, settings_hash="s", program_version="1"
            ),
            now=NOW,
            outcome="complete",
            steps=[],
            counts={},
        )
    assert store.last_complete_night().night_id == 1
    assert read_manifest(store.path).nights == 1


def test_manifest_that_cannot_be_written_says_that_all_was_kept(store):
    manifest_path(store.path).with_name(manifest_path(store.path).name + ".part").mkdir()
    with pytest.raises(RhovaneError, match=r"cannot be written.*is kept"):
        in_one_transaction(store)
    assert store.last_ingest_id() == 1


def test_closing_twice_is_harmless(store):
    store.close()
    store.close()


@pytest.mark.parametrize(
    ("error", "kind", "words"),
    [
        (
            duckdb.IOException("Corrupt database file: computed checksum 1"),
            StoreDamaged,
            "restore the latest backup",
        ),
        (duckdb.FatalException("database has been invalidated"), StoreDamaged, "ingest the feed again"),
        (duckdb.OutOfMemoryException("failed to allocate"), RhovaneError, "memory_limit_mb"),
        (duckdb.IOException("could not write: No space left on device"), RhovaneError, "disk is full"),
        (duckdb.FatalException("invalidated: File too large"), RhovaneError, "what was committed before is"),
        (duckdb.BinderException("no such column"), RhovaneError, "Nothing of this step was kept"),
    ],
)
def test_errors_of_the_database_are_told_with_a_remedy(path, error, kind, words):
    told = failure(error, path)
    assert type(told) is kind
    assert words in str(told)
    assert str(path) in str(told)

"""Opening the store: who holds it, what is wrong with it, and what to do."""

import os
import time

import duckdb
import pytest

from rhovane.model import NotFound, RhovaneError, StoreDamaged, StoreLocked
from rhovane.store import open_store
from rhovane.store.manifest import manifest_path, read_manifest
from rhovane.store.migrations import MIGRATIONS, Migration, applied_migrations, migrate
from store.building import KEYS, NOW, hold, ingest_and_vanish, parsed_file, processes

NUMBERS = [step.number for step in MIGRATIONS]
LAST = NUMBERS[-1]


def one_file(i):
    return parsed_file([{"series": KEYS[0], "hour": i, "value": float(i)}], name=f"feed/{i}.csv")


@pytest.fixture
def filled(store):
    """A closed store with five ingests."""
    store.append_files([one_file(i) for i in range(5)], now=NOW)
    store.close()
    return store.path


@pytest.fixture
def holder(filled):
    """Another process that holds the store, and the event that makes it let go."""
    ready, release = processes.Event(), processes.Event()
    process = processes.Process(target=hold, args=(filled, ready, release))
    process.start()
    assert ready.wait(30)
    yield process, release
    release.set()
    process.join(30)


@pytest.mark.parametrize("read_only", [True, False])
def test_store_held_by_another_process_is_reported_with_its_number(filled, holder, read_only):
    process, _ = holder
    begun = time.monotonic()
    with pytest.raises(StoreLocked, match=rf"process {process.pid} .*lock_wait_s"):
        open_store(filled, lock_wait_s=0.2, read_only=read_only)
    assert time.monotonic() - begun >= 0.2


def test_opening_waits_for_another_process_to_end(filled, holder):
    _, release = holder
    release.set()
    with open_store(filled, lock_wait_s=30) as store:
        assert store.last_ingest_id() == 5


def test_store_open_in_this_process_in_another_way_is_locked_not_damaged(filled):
    with open_store(filled), pytest.raises(StoreLocked, match=f"this process \\({os.getpid()}\\)"):
        open_store(filled, lock_wait_s=0.0, read_only=True)


def test_limits_are_set_and_spilled_data_stay_beside_the_store(path):
    with open_store(path, memory_limit_mb=256, threads=1) as store:
        limits = dict(store.rows("select name, value from duckdb_settings()"))
    assert limits["threads"] == "1"
    assert limits["memory_limit"] == "244.1 MiB"
    assert limits["temp_directory"] == f"{path}.tmp"
    assert limits["checkpoint_threshold"] == "15.2 MiB"


def test_reading_a_store_that_does_not_exist_says_how_to_make_one(path):
    with pytest.raises(NotFound, match="rhovane ingest"):
        open_store(path, read_only=True)
    assert not path.exists()


def test_store_opened_for_reading_gives_data_and_refuses_changes(filled):
    before = filled.read_bytes(), manifest_path(filled).read_bytes()
    with open_store(filled, read_only=True) as store:
        assert store.last_ingest_id() == 5
        with pytest.raises(RhovaneError, match="reading only"):
            store.append_files([one_file(9)], now=NOW)
    assert (filled.read_bytes(), manifest_path(filled).read_bytes()) == before


def test_folders_are_made_for_a_new_store_and_a_file_in_the_way_is_named(tmp_path):
    with open_store(tmp_path / "a" / "b" / "new.duckdb") as store:
        assert store.last_ingest_id() == 0
    (tmp_path / "file").write_text("")
    with pytest.raises(RhovaneError, match="cannot be created"):
        open_store(tmp_path / "file" / "c" / "new.duckdb")


@pytest.mark.parametrize("content", [b"x" * 50_000, b"short", b"\0" * 20_000])
def test_file_that_is_no_store_is_damaged_and_left_alone(path, content):
    path.write_bytes(content)
    with pytest.raises(StoreDamaged, match="restore the latest backup"):
        open_store(path)
    assert path.read_bytes() == content


def test_cut_store_is_damaged(filled):
    whole = filled.read_bytes()
    filled.write_bytes(whole[: len(whole) // 3])
    with pytest.raises(StoreDamaged, match="damaged"), open_store(filled) as store:
        store.rows("select sum(value) from reading")


def test_store_of_a_newer_program_is_refused_unchanged(filled):
    with duckdb.connect(str(filled)) as connection:
        connection.execute("insert into migration values (999, 'from the future', now()::timestamp)")
    for read_only in (False, True):
        with pytest.raises(StoreDamaged, match=r"newer version.*step 999.*Install the newer version"):
            open_store(filled, read_only=read_only)


def test_missing_store_with_a_manifest_is_not_replaced_by_an_empty_one(filled):
    filled.unlink()
    with pytest.raises(StoreDamaged, match=r"held 5 ingests.*Restore"):
        open_store(filled)
    assert not filled.exists()


def test_older_copy_of_the_store_is_recognised_by_what_it_lacks(filled):
    older = filled.read_bytes()
    with open_store(filled) as store:
        store.append_files([one_file(5), one_file(6)], now=NOW)
    filled.write_bytes(older)
    for read_only in (True, False):
        with pytest.raises(StoreDamaged, match=r"2 lost: 5 ingests in the ledger, the manifest says 7"):
            open_store(filled, read_only=read_only)


def test_damaged_manifest_is_reported_and_a_lagging_or_missing_one_is_renewed(filled):
    manifest = manifest_path(filled)
    whole = manifest.read_text()
    manifest.write_text(whole[:20])
    with pytest.raises(StoreDamaged, match="delete the manifest"):
        open_store(filled)
    manifest.write_text(whole.replace('"readings": 5', '"readings": 3'))
    with open_store(filled, read_only=True):
        assert read_manifest(filled).readings == 3
    with open_store(filled):
        assert manifest.read_text() == whole
    manifest.unlink()
    with open_store(filled):
        assert manifest.read_text() == whole


def test_flipped_byte_in_the_write_ahead_log_does_not_pass_for_a_quiet_store(tmp_path):
    damaged = 0
    for share in (0.3, 0.5, 0.7):
        path = tmp_path / f"{share}.duckdb"
        process = processes.Process(target=ingest_and_vanish, args=(path, [one_file(i) for i in range(8)]))
        process.start()
        process.join(60)
        log = path.with_name(path.name + ".wal")
        content = bytearray(log.read_bytes())
        content[int(len(content) * share)] ^= 0xFF
        log.write_bytes(content)
        with pytest.raises(StoreDamaged, match=r"lost|damaged"):
            open_store(path)
        damaged += 1
    assert damaged == 3


def test_undamaged_write_ahead_log_is_taken_in(path):
    process = processes.Process(target=ingest_and_vanish, args=(path, [one_file(i) for i in range(8)]))
    process.start()
    process.join(60)
    assert path.with_name(path.name + ".wal").exists()
    with open_store(path, read_only=True) as store:
        assert store.last_ingest_id() == 8
    with open_store(path) as store:
        assert store.last_ingest_id() == 8


# -- migrations ----------------------------------------------------------------------------------------


def test_migrations_are_numbered_without_gaps_and_applied_once(path):
    assert [step.number for step in MIGRATIONS] == list(range(1, len(MIGRATIONS) + 1))
    for _ in range(2):
        with open_store(path) as store:
            assert [n for (n,) in store.rows("select number from migration")] == NUMBERS


def test_tables_have_neither_keys_nor_indexes(store):
    assert store.rows("select * from duckdb_constraints()") == []
    assert store.rows("select * from duckdb_indexes()") == []


def test_later_step_is_added_to_an_older_store_with_its_data(filled):
    added = (*MIGRATIONS, Migration(len(MIGRATIONS) + 1, "one more", "create table extra (a integer)"))
    with duckdb.connect(str(filled)) as connection:
        migrate(connection, "store", read_only=False, steps=added)
        assert applied_migrations(connection) == [*NUMBERS, LAST + 1]
        assert connection.execute("select count(*) from reading").fetchone() == (5,)
        assert connection.execute("select count(*) from extra").fetchone() == (0,)


def test_failing_step_leaves_neither_its_tables_nor_its_record(filled):
    broken = (
        *MIGRATIONS,
        Migration(LAST + 1, "broken", "create table extra (a integer); create table extra (b integer)"),
    )
    with duckdb.connect(str(filled)) as connection:
        with pytest.raises(duckdb.Error):
            migrate(connection, "store", read_only=False, steps=broken)
        assert applied_migrations(connection) == NUMBERS
        assert connection.execute("select 1 from duckdb_tables() where table_name = 'extra'").fetchall() == []


def test_older_store_opened_for_reading_says_how_to_bring_it_up_to_date(filled):
    with duckdb.connect(str(filled)) as connection:
        connection.execute("delete from migration where number = ?", [LAST])
    with pytest.raises(RhovaneError, match=rf"step {LAST - 1}.*needs step {LAST}.*rhovane ingest"):
        open_store(filled, read_only=True)

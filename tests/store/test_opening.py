"""Opening the store: who holds it, what is wrong with it, and what to do."""

import os
import time

import pytest

from rhovane.model import NotFound, RhovaneError, StoreDamaged, StoreLocked
from rhovane.store import open_store
from rhovane.store.holder import describe
from rhovane.store.manifest import manifest_path, read_manifest
from store.building import KEYS, NOW, hold, ingest_and_vanish, parsed_file, processes


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
    told = (
        rf"process {process.pid} \(.*python.*running since 20\d\d-.* UTC\); waited 0\.2 s.*lock_wait_s.*kill"
    )
    with pytest.raises(StoreLocked, match=told):
        open_store(filled, lock_wait_s=0.2, read_only=read_only)
    assert time.monotonic() - begun >= 0.2


def test_holder_is_described_by_what_the_system_shows(tmp_path):
    assert describe(7, "/usr/bin/python3", processes=tmp_path) == "process 7 (/usr/bin/python3)"
    (tmp_path / "7").mkdir()
    (tmp_path / "stat").write_text("cpu 1 2\nbtime 1700000000\n")
    (tmp_path / "7" / "cmdline").write_bytes(b"python\0-m\0rhovane\0nightly\0")
    (tmp_path / "7" / "stat").write_text(
        f"7 (a ) b) S {' '.join('0' * 18)} {90 * os.sysconf('SC_CLK_TCK')} 0"
    )
    told = describe(7, "/usr/bin/python3", processes=tmp_path)
    assert told == "process 7 (python -m rhovane nightly, running since 2023-11-14 22:14:50 UTC)"


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


def test_missing_store_with_a_manifest_is_not_replaced_by_an_empty_one(filled):
    filled.unlink()
    with pytest.raises(StoreDamaged, match=r"held 5 ingests.*rhovane restore"):
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

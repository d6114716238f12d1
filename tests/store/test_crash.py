"""Killed at any moment, the store is whole, and running again reaches the same readings."""

import os
import signal
import time

import numpy as np

from reference.naive_store import NaiveStore
from rhovane.store import open_store
from rhovane.store.manifest import losses, read_manifest
from store.building import NOW, SERIES, current, ingest_one_by_one, naive_file, processes, random_files

KILLS = 25
LONGEST_S = 0.35  # seconds after opening within which a process is killed; some ingests take place


def expect_whole(store, files) -> int:
    """The store holds exactly the files of its ledger; their number."""
    by_content = {(f.source, f.sha256): f for f in files}
    ledger = store.rows(
        """
        select source, sha256, rows_new, rows_revised, rows_unchanged, rows_rejected, rows_read from ingest order by id
        """
    )
    twin = NaiveStore()
    for source, sha256, *counts, rejected, rows_read in ledger:
        assert twin.append(naive_file(by_content[source, sha256])) == tuple(counts)
        assert rows_read == sum(counts) + rejected
    assert current(store) == twin.content()
    assert store.value("select count(*) from reading_history") == len(twin.losers)
    assert store.value("select count(*) from rejected") == sum(row[5] for row in ledger)
    assert store.value("select count(*) from feed_file") == len(ledger)
    return len(ledger)


def test_kill_at_any_moment_loses_nothing_and_halves_nothing(tmp_path):
    rng = np.random.default_rng(20240501)
    files = random_files(rng, 60)
    kills = between = 0
    while kills < KILLS:
        path = tmp_path / f"{kills}.duckdb"
        complete = False
        while not complete and kills < KILLS:
            ready = processes.Event()
            order = [files[i] for i in rng.permutation(len(files))]
            process = processes.Process(target=ingest_one_by_one, args=(path, order, ready))
            process.start()
            assert ready.wait(30)
            time.sleep(rng.uniform(0, LONGEST_S))
            os.kill(process.pid, signal.SIGKILL)
            process.join(30)
            kills += process.exitcode == -signal.SIGKILL
            expected = read_manifest(path)
            with open_store(path) as store:
                held = expect_whole(store, files)
                assert losses(store.holds(), expected) == []
                assert read_manifest(path) == store.holds()
            between += 0 < held < len(files)
            complete = held == len(files)
        with open_store(path) as store:
            store.append_files(files, now=NOW)
            assert expect_whole(store, files) == len(files)
            resumed = current(store)
        with open_store(tmp_path / f"undisturbed {kills}.duckdb") as store:
            store.ensure_series(SERIES)
            store.append_files(files, now=NOW)
            assert current(store) == resumed
    assert between >= KILLS // 3, "most kills must fall between the first and the last file"

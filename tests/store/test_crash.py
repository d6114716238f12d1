"""Killed at any moment, out of disk, or damaged: the store is whole or says so, and running again goes on.

The same with more than a hundred kills is ``tests/studies/crashes/study.py``, with its result beside it.
"""

import duckdb
import numpy as np
import pytest

from rhovane.model import StoreDamaged
from rhovane.store import open_store
from rhovane.store.migrations import MIGRATIONS, migrate
from store.building import NOW, SERIES, current, ingest_and_vanish, processes, random_files
from store.killing import (
    FIRST_STEP,
    REWRITE,
    bring_up_to_date,
    checkpoint,
    expect_one_step,
    expect_whole,
    ingest,
    ingest_with_little_room,
    kill_at_random,
    large_file,
    old_store,
)

LONGEST_S = 0.35  # seconds after opening within which a process is killed; some ingests take place


def test_killed_ingest_loses_nothing_acknowledged_and_the_next_one_repairs(tmp_path):
    rng = np.random.default_rng(20240501)
    files = random_files(rng, 60)
    path, told = tmp_path / "watch.duckdb", tmp_path / "told"
    kills = between = 0
    for _ in range(6):
        order = [files[i] for i in rng.permutation(len(files))]
        kills += kill_at_random(ingest, (path, order, told), rng, LONGEST_S)
        between += 0 < expect_whole(path, files, told) < len(files)
    with open_store(path) as store:
        store.append_files(files, now=NOW)
        resumed = current(store)
    assert expect_whole(path, files, told) == len(files)
    with open_store(tmp_path / "undisturbed.duckdb") as store:
        store.ensure_series(SERIES)
        store.append_files(files, now=NOW)
        assert current(store) == resumed
    assert kills >= 1
    assert between >= 1, "a kill must fall between the first and the last file"


def test_killed_checkpoint_loses_nothing_acknowledged(tmp_path):
    rng = np.random.default_rng(7)
    files = [large_file(rng, 0, 3000)]
    kills = 0
    for i in range(3):
        path, told = tmp_path / f"{i}.duckdb", tmp_path / f"told {i}"
        kills += kill_at_random(checkpoint, (path, files, told), rng, 0.04)
        assert expect_whole(path, files, told) == len(files)
    assert kills >= 1


def test_killed_migration_leaves_the_tables_of_one_step_and_is_finished_by_the_next_opening(tmp_path):
    rng = np.random.default_rng(8)
    reached = set()
    for i in range(3):
        path = tmp_path / f"{i}.duckdb"
        old_store(path)
        kill_at_random(bring_up_to_date, (path,), rng, 0.3)
        reached.add(expect_one_step(path))
        with duckdb.connect(str(path)) as connection:
            migrate(connection, str(path), read_only=False, steps=(*MIGRATIONS, REWRITE))
        assert expect_one_step(path) == REWRITE.number
    assert reached <= set(range(FIRST_STEP, REWRITE.number + 1))


@pytest.mark.parametrize(("fold", "words"), [(False, "the disk is full"), (True, "all was kept")])
def test_full_disk_undoes_the_step_says_so_and_the_next_ingest_goes_on(tmp_path, fold, words):
    rng = np.random.default_rng(9)
    files = [large_file(rng, i, 3000) for i in range(5)]
    path, told = tmp_path / "watch.duckdb", tmp_path / "told"
    with open_store(path) as store:
        store.ensure_series(SERIES)
        store.append_files(files[:1], now=NOW)
    told.write_text("1\n")
    answer = processes.Queue()
    room = path.stat().st_size + 100_000 if fold else 150_000
    process = processes.Process(target=ingest_with_little_room, args=(path, files, told, room, fold, answer))
    process.start()
    message = answer.get(timeout=60)
    process.join(60)
    assert message.startswith("RhovaneError: "), message
    assert words in message
    assert "Free space" in message
    held = expect_whole(path, files, told)
    assert 1 <= held < len(files)
    with open_store(path) as store:
        store.append_files(files, now=NOW)
    assert expect_whole(path, files, told) == len(files)


@pytest.mark.parametrize("share", [0.2, 0.6])
def test_a_log_cut_off_in_the_middle_is_repaired_or_told(tmp_path, share):
    """What a killed process had not written to the end is not committed; what was committed is told when lost."""
    files = random_files(np.random.default_rng(10), 6)
    path = tmp_path / "watch.duckdb"
    process = processes.Process(target=ingest_and_vanish, args=(path, files))
    process.start()
    process.join(60)
    log = path.with_name(path.name + ".wal")
    content = log.read_bytes()
    log.write_bytes(content[: int(len(content) * share)])
    with pytest.raises(StoreDamaged, match=r"lost|damaged"):
        open_store(path)

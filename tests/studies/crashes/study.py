"""Does the store keep what it acknowledged: kills, a full disk and flipped bytes, each many times.

    PYTHONPATH=src:tests python tests/studies/crashes/study.py [--kills N] [--seed N]

Real processes work on real files and are killed with SIGKILL at random moments. After every kill the store is opened,
verified and compared with a slow twin; a violated rule stops the study with its assertion. Bytes are flipped one at a
time at random places of the file and of the write-ahead log; the disk is made full with RLIMIT_FSIZE. Loss of power is
not tried. The table goes to ``results.md`` beside this file. About ten minutes.
"""

from __future__ import annotations

import argparse
import platform
import tempfile
from collections import Counter
from collections.abc import Callable, Iterator
from pathlib import Path

import duckdb
import numpy as np

from rhovane.model import StoreDamaged
from rhovane.store import Store, open_store
from rhovane.store.migrations import MIGRATIONS, migrate
from store.building import NOW, SERIES, ingest_and_vanish, processes, random_files
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

RESULTS = Path(__file__).with_name("results.md")
FLIPS = 24


def killed_ingests(folder: Path, kills: int, rng: np.random.Generator) -> str:
    """Ingests killed again and again on the same store until all files are in; then the next store."""
    files = random_files(rng, 40)
    hit = stores = before = between = 0
    while hit < kills:
        path, told = folder / f"ingest {stores}.duckdb", folder / f"told {stores}"
        stores += 1
        held = 0
        while held < len(files) and hit < kills:
            order = [files[i] for i in rng.permutation(len(files))]
            hit += kill_at_random(ingest, (path, order, told), rng, 0.5)
            held = expect_whole(path, files, told)
            before += held == 0
            between += 0 < held < len(files)
        with open_store(path) as store:
            store.append_files(files, now=NOW)
        assert expect_whole(path, files, told) == len(files)
    return f"{hit} kills, {before} before the first file, {between} between two files, stores made whole by the next ingest: {stores}"


def killed_checkpoints(folder: Path, kills: int, rng: np.random.Generator) -> str:
    """Checkpoints of some ten thousand readings, killed."""
    files = [large_file(rng, i, 4500) for i in range(2)]
    hit = left = tries = 0
    while hit < kills:
        path, told = folder / f"checkpoint {tries}.duckdb", folder / f"told c{tries}"
        tries += 1
        hit += kill_at_random(checkpoint, (path, files, told), rng, 0.3)
        left += path.with_name(path.name + ".wal").exists()
        assert expect_whole(path, files, told) == len(files)
    return f"{hit} kills, {left} with a write-ahead log left behind"


def killed_migrations(folder: Path, kills: int, rng: np.random.Generator) -> str:
    """Migrations of a store of an earlier version, killed; the next opening finishes them."""
    hit, tries = 0, 0
    reached: Counter[int] = Counter()
    while hit < kills:
        path = folder / f"migration {tries}.duckdb"
        tries += 1
        old_store(path)
        hit += kill_at_random(bring_up_to_date, (path,), rng, 0.6)
        reached[expect_one_step(path)] += 1
        with duckdb.connect(str(path)) as connection:
            migrate(connection, str(path), read_only=False, steps=(*MIGRATIONS, REWRITE))
        assert expect_one_step(path) == REWRITE.number
        path.unlink()
    steps = ", ".join(f"{n} × step {step}" for step, n in sorted(reached.items()))
    return f"{hit} kills from step {FIRST_STEP} on; found at {steps}"


def full_disks(folder: Path, _kills: int, rng: np.random.Generator) -> str:
    """Ingests that run out of room after more and more bytes."""
    files = [large_file(rng, i, 6000) for i in range(4)]
    said: Counter[str] = Counter()
    log = [(False, size) for size in range(50_000, 450_000, 50_000)]
    file = [(True, extra) for extra in range(0, 1_000_000, 125_000)]
    for i, (fold, size) in enumerate(log + file):
        path, told = folder / f"full {i}.duckdb", folder / f"told f{i}"
        with open_store(path) as store:
            store.ensure_series(SERIES)
            store.append_files(files[:1], now=NOW)
        told.write_text("1\n", encoding="utf-8")
        answer = processes.Queue()
        room = path.stat().st_size + size if fold else size
        process = processes.Process(
            target=ingest_with_little_room, args=(path, files, told, room, fold, answer)
        )
        process.start()
        message = answer.get(timeout=60)
        process.join(60)
        if "the disk is full" in message:
            said["undone and said"] += 1
        elif "all was kept" in message:
            said["kept, log not folded in, and said"] += 1
        else:
            assert message == "", message
            said["had room"] += 1
        assert expect_whole(path, files, told) >= 1
        with open_store(path) as store:
            store.append_files(files, now=NOW)
        assert expect_whole(path, files, told) == len(files)
    return ", ".join(f"{n} {words}" for words, n in said.items())


def content_of(store: Store) -> dict[str, list[tuple[object, ...]]]:
    """All rows of all tables."""
    return {table: sorted(store.rows(f"select * from {table}"), key=repr) for table in store.tables_of()}


def faults_of(path: Path, whole: dict[str, list[tuple[object, ...]]]) -> str:
    """How damage is told: when opening, by verify, or not at all, and then every row must be as it was."""
    try:
        with open_store(path, read_only=True) as store:
            if store.verify():
                return "told by verify"
            assert content_of(store) == whole, "damage that nothing tells has changed a row"
            return "not told: every row was as before"
    except StoreDamaged:
        return "told when opening"


def flipped_in_the_file(folder: Path, _kills: int, rng: np.random.Generator) -> str:
    """One flipped byte in a block that is in use."""
    path = folder / "flipped.duckdb"
    with open_store(path) as store:
        store.ensure_series(SERIES)
        store.append_files([large_file(rng, i) for i in range(3)], now=NOW)
    with open_store(path) as store:
        before = content_of(store)
    whole = path.read_bytes()
    told: Counter[str] = Counter()
    for place in rng.choice(np.flatnonzero(np.frombuffer(whole, np.uint8)), FLIPS, replace=False):
        content = bytearray(whole)
        content[place] ^= 0x10
        path.write_bytes(content)
        told[faults_of(path, before)] += 1
    return ", ".join(f"{n} × {words}" for words, n in told.items())


def flipped_in_the_log(folder: Path, _kills: int, rng: np.random.Generator) -> str:
    """One flipped byte in a write-ahead log with eight ingests."""
    path = folder / "log.duckdb"
    process = processes.Process(target=ingest_and_vanish, args=(path, random_files(rng, 8)))
    process.start()
    process.join(60)
    log = path.with_name(path.name + ".wal")
    kept = {p: p.read_bytes() for p in folder.glob("log.duckdb*")}
    with open_store(path) as store:
        before = content_of(store)
    told: Counter[str] = Counter()
    for place in rng.choice(len(kept[log]), FLIPS, replace=False):
        for one, content in kept.items():
            one.write_bytes(content)
        damaged = bytearray(kept[log])
        damaged[place] ^= 0x10
        log.write_bytes(damaged)
        told[faults_of(path, before)] += 1
    return ", ".join(f"{n} × {words}" for words, n in told.items())


PARTS: tuple[tuple[str, float, Callable[[Path, int, np.random.Generator], str]], ...] = (
    ("ingest killed", 0.4, killed_ingests),
    ("checkpoint killed", 0.3, killed_checkpoints),
    ("migration killed", 0.3, killed_migrations),
    ("disk full", 0, full_disks),
    ("byte flipped in the file", 0, flipped_in_the_file),
    ("byte flipped in the write-ahead log", 0, flipped_in_the_log),
)


def rows(kills: int, seed: int) -> Iterator[str]:
    """The rows of the table, as they are found."""
    for number, (what, share, part) in enumerate(PARTS):
        with tempfile.TemporaryDirectory() as folder:
            found = part(Path(folder), round(share * kills), np.random.default_rng([seed, number]))
        print(what, "|", found, flush=True)
        yield f"| {what} | {found} |"


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--kills", type=int, default=120)
    parser.add_argument("--seed", type=int, default=1)
    chosen = parser.parse_args()
    table = "\n".join(rows(chosen.kills, chosen.seed))
    RESULTS.write_text(
        f"""# Kills, full disks and flipped bytes

`PYTHONPATH=src:tests python tests/studies/crashes/study.py --kills {chosen.kills} --seed {chosen.seed}`, DuckDB {duckdb.__version__},
Python {platform.python_version()}. Nothing acknowledged was lost and nothing was half applied in any case: the study stops at the first one.

| what | found |
| --- | --- |
{table}

A flipped byte that nothing tells is in a part that the file does not use: every row was compared. Loss of power was not tried.
""",
        encoding="utf-8",
    )


if __name__ == "__main__":
    main()

"""Real processes at work on a real store, killed at random moments; and what must be true afterwards."""

from __future__ import annotations

import os
import signal
import time
from collections.abc import Callable
from pathlib import Path

import duckdb
import numpy as np

from reference.naive_store import NaiveStore
from rhovane.model import RhovaneError
from rhovane.store import open_store
from rhovane.store.manifest import losses, read_manifest
from rhovane.store.migrations import MIGRATIONS, Migration, applied_migrations, migrate
from store.building import FIRST_HOUR, KEYS, NOW, SERIES, current, naive_file, parsed_file, processes

FIRST_STEP = 3  # the step of the old stores whose migration is killed
N_OLD = 60_000  # readings in them: enough for a migration to take a while
# Beyond the program's own steps: one that rewrites a large table, as a step to come may have to.
REWRITE = Migration(
    MIGRATIONS[-1].number + 1,
    "rewrite",
    """
    create table rewritten as select *, value * 2 as doubled from reading order by ts, series_id;
    drop table reading;
    alter table rewritten rename to reading;
    """,
)


def kill_at_random(
    work: Callable[..., None], arguments: tuple[object, ...], rng: np.random.Generator, longest_s: float
) -> bool:
    """Start work in a process of its own and kill it within ``longest_s`` of its first sign; whether it was hit."""
    ready = processes.Event()
    process = processes.Process(target=work, args=(*arguments, ready))
    process.start()
    assert ready.wait(60)
    time.sleep(rng.uniform(0, longest_s))
    process.kill()
    process.join(60)
    return process.exitcode == -signal.SIGKILL


# -- what the processes do -----------------------------------------------------------------------------


def ingest(path: Path, files, told: Path, ready) -> None:
    """Take in files, each in a transaction of its own, and write down each number once it is acknowledged."""
    with open_store(path) as store, told.open("a", encoding="utf-8") as stream:
        store.ensure_series(SERIES)
        ready.set()
        for file in files:
            (outcome,) = store.append_files([file], now=NOW)
            stream.write(f"{outcome.ingest_id}\n")
            stream.flush()


def checkpoint(path: Path, files, told: Path, ready) -> None:
    """Take in files without a checkpoint, and then fold all of them into the file."""
    with open_store(path) as store, told.open("a", encoding="utf-8") as stream:
        store.ensure_series(SERIES)
        for file in files:
            (outcome,) = store.append_files([file], now=NOW, checkpoint=False)
            stream.write(f"{outcome.ingest_id}\n")
            stream.flush()
        ready.set()
        store.execute("checkpoint")


def bring_up_to_date(path: Path, ready) -> None:
    """Apply all steps, and one that rewrites the readings, to an old store."""
    with duckdb.connect(str(path)) as connection:
        ready.set()
        migrate(connection, str(path), read_only=False, steps=(*MIGRATIONS, REWRITE))


def large_file(rng: np.random.Generator, number: int, n: int = 12_000):
    """A file of many readings, so that folding it into the store takes a while."""
    hours = np.arange(n // 3) + 1000 * number
    rows = [
        {"series": key, "hour": int(h), "value": float(v)}
        for key in KEYS
        for h, v in zip(hours, rng.integers(0, 90, len(hours)), strict=True)
    ]
    return parsed_file(rows, name=f"feed/{number}.csv")


def old_store(path: Path) -> None:
    """A store of an earlier version with many readings."""
    with duckdb.connect(str(path)) as connection:
        migrate(connection, str(path), read_only=False, upto=FIRST_STEP)
        connection.execute(
            f"""
            insert into reading select i % 3 + 1, to_timestamp({FIRST_HOUR} + 3600 * (i // 3))::timestamp, i % 97, 1, 1,
                to_timestamp({FIRST_HOUR})::timestamp, i, 1, 1 + i % 2 from range({N_OLD}) t(i);
            checkpoint
            """
        )


# -- what must be true afterwards ----------------------------------------------------------------------


def expect_whole(path: Path, files, told: Path) -> int:
    """All that was acknowledged is there, and exactly the files of the ledger are in; their number."""
    acknowledged = [int(line) for line in told.read_text(encoding="utf-8").split()] if told.exists() else []
    expected = read_manifest(path)
    by_content = {(f.source, f.sha256): f for f in files}
    with open_store(path) as store:
        assert expected is None or losses(store.holds(), expected) == []
        assert read_manifest(path) == store.holds()
        assert store.verify() == []
        ledger = store.rows(
            "select source, sha256, rows_new, rows_revised, rows_unchanged from ingest order by id"
        )
        assert len(ledger) >= max(acknowledged, default=0), "an acknowledged file is lost"
        twin = NaiveStore()
        for source, sha256, *counts in ledger:
            assert twin.append(naive_file(by_content[source, sha256])) == tuple(counts)
        assert current(store) == twin.content()
        assert store.value("select count(*) from reading_history") == len(twin.losers)
        assert store.value("select count(*) from feed_file") == len(ledger)
    return len(ledger)


def expect_one_step(path: Path) -> int:
    """The tables are those of one step with all their rows; its number."""
    with duckdb.connect(str(path)) as connection:
        had = applied_migrations(connection)
        assert had == list(range(1, had[-1] + 1))
        with duckdb.connect() as fresh:
            migrate(fresh, "fresh", read_only=False, steps=(*MIGRATIONS, REWRITE), upto=had[-1])
            columns = "select table_name, column_name from duckdb_columns() where not internal order by all"
            assert connection.execute(columns).fetchall() == fresh.execute(columns).fetchall()
        assert connection.execute("select count(*), sum(value) from reading").fetchone() == (
            N_OLD,
            sum(i % 97 for i in range(N_OLD)),
        )
        if "reading_confirmation" in {table for (table, _) in connection.execute(columns).fetchall()}:
            confirmed = connection.execute("select count(*) from reading_confirmation").fetchone()
            assert confirmed == (N_OLD // 2,)
    return int(had[-1])


# -- disk full -----------------------------------------------------------------------------------------


def ingest_with_little_room(path: Path, files, told: Path, room: int, fold: bool, answer) -> None:
    """Take in files while no file of this process may grow beyond ``room`` bytes; answer with the message.

    With ``fold`` each file is folded into the store, which then is what has no room; without, it is the log.
    """
    import resource

    with open_store(path) as store, told.open("a", encoding="utf-8") as stream:
        resource.setrlimit(resource.RLIMIT_FSIZE, (room, room))
        message = ""
        try:
            for file in files:
                (outcome,) = store.append_files([file], now=NOW, checkpoint=fold)
                stream.write(f"{outcome.ingest_id}\n")
                stream.flush()
        except RhovaneError as error:
            message = f"{type(error).__name__}: {error}"
        answer.put(message)
        answer.close()
        answer.join_thread()
        os._exit(0)  # closing would write

"""How long a day's readings take into a store that holds ten million, and what tidying is worth.

    PYTHONPATH=src:tests python tests/benchmarks/store_benchmark.py

About a minute, 300 MB of memory and 200 MB of disk. Times are of the process that has the store open, on the clock and in processor time (on a
busy machine only the second says much); the table goes to ``store_results.md`` beside this file.
"""

from __future__ import annotations

import datetime as dt
import hashlib
import platform
import tempfile
import time
from pathlib import Path

import duckdb
import numpy as np

from rhovane.model import ParsedFile, Series
from rhovane.store import Store, open_store, tidy

N_SERIES, N_DAYS, N_FILES = 150, 2778, 8  # 150 series × 2,778 days × 24 hours = 10,000,800 readings
START = 1_500_000_000 // 86_400 * 86_400
NOW = dt.datetime(2025, 3, 1, 3, 40, tzinfo=dt.UTC)
SERIES = [Series(f"S{i:03d}.NO2", "ug/m3") for i in range(N_SERIES)]
OVERLAP_HOURS, REVISED = 24, 0.02  # each file repeats the day before; some of it revised
TURNS = 15
AIM_S = 0.3


def build(store: Store) -> None:
    """Ten million readings in order of arrival, one ledger row a day."""
    store.ensure_series(SERIES)
    with store.transaction():
        store.execute(
            f"""
            insert into ingest select d + 1, sha256(d::varchar), d, 'all', d || '.csv', 1, {N_SERIES * 24},
                {N_SERIES * 24}, 0, 0, 0, to_timestamp({START} + 86400 * d)::timestamp,
                to_timestamp({START} + 86400 * d + 82800)::timestamp, now()::timestamp from range({N_DAYS}) t(d)
            """
        )
        store.execute(
            f"""
            insert into reading select s + 1, to_timestamp({START} + 3600 * h)::timestamp, (hash(s, h) % 900) / 10, 1, 1,
                to_timestamp({START} + 3600 * h)::timestamp, h, h // 24 + 1, h // 24 + 1
            from range({N_DAYS * 24}) a(h), range({N_SERIES}) b(s)
            """
        )
        store.expect_after_commit("readings", N_SERIES * N_DAYS * 24)
        store.checkpoint_after_commit()


def files_of(day: int, rng: np.random.Generator) -> list[ParsedFile]:
    """A day's files: the day before again, a little revised, and the day."""
    hours = np.arange(24 * day - OVERLAP_HOURS, 24 * (day + 1))
    files = []
    for number, mine in enumerate(np.array_split(np.arange(N_SERIES), N_FILES)):
        n = len(mine) * len(hours)
        value = np.round(rng.random(n) * 90, 1) * (rng.random(n) < REVISED) + np.tile(hours % 90, len(mine))
        files.append(
            ParsedFile(
                source="all",
                path=f"{day}-{number}.csv",
                sha256=hashlib.sha256(f"{day} {number}".encode()).hexdigest(),
                size_bytes=1,
                modified=NOW,
                rows_read=n,
                series_key=np.repeat([SERIES[i].key for i in mine], len(hours)),
                hour_start=START + 3600 * np.tile(hours, len(mine)),
                value=value,
                flag=np.ones(n, np.int8),
                stage=np.ones(n, np.int8),
                result_time=np.full(n, START + 86_400 * day),
                line=np.arange(n) + 2,
            )
        )
    return files


def timed(store: Store, day: int, rng: np.random.Generator, *, checkpoint: bool) -> tuple[float, float, int]:
    """Seconds on the clock and of processor time to append a day, and the rows it had."""
    files = files_of(day, rng)
    clock, processor = time.perf_counter(), time.process_time()
    outcomes = store.append_files(files, now=NOW, checkpoint=checkpoint)
    return time.perf_counter() - clock, time.process_time() - processor, sum(o.rows_read for o in outcomes)


def measure(path: Path) -> list[str]:
    """The rows of the table."""
    rng = np.random.default_rng(3)
    rows = []
    with open_store(path, threads=1) as store:
        build(store)
        size = path.stat().st_size / 1e6
        day = N_DAYS
        for checkpoint in (True, False):
            taken = []
            for _ in range(TURNS):
                taken.append(timed(store, day, rng, checkpoint=checkpoint))
                day += 1
            clock, processor = (np.median([t[i] for t in taken]) for i in (0, 1))
            best = min(t[0] for t in taken)
            what = "with a checkpoint" if checkpoint else "without a checkpoint (as within a night)"
            rows.append(
                f"| one day, {taken[0][2]:,} rows in {N_FILES} files, into {store.holds().readings:,} readings, {what} | median "
                f"{1000 * clock:.0f} ms, best {1000 * best:.0f} ms, processor {1000 * processor:.0f} ms | {1000 * AIM_S:.0f} ms |"
            )
        for what, work in (
            ("verify", store.verify),
            ("backup: the copy, read back", lambda: store.backup(path.with_name("copy.duckdb"))),
            ("backup: the Parquet archive", lambda: store.archive(path.with_name("archive"))),
        ):
            clock, processor = time.perf_counter(), time.process_time()
            found = work()
            assert found == [] if what == "verify" else found
            rows.append(
                f"| {what} | {time.perf_counter() - clock:.1f} s, processor {time.process_time() - processor:.1f} s | |"
            )
    done = tidy(path, lambda: open_store(path, threads=1))
    rows.append(
        f"| tidying that store: size | {done.bytes_before / 1e6:.0f} → {done.bytes_after / 1e6:.0f} MB "
        f"({size:.0f} MB before the days were added) | |"
    )
    rows.append(
        f"| reading one series of {N_DAYS} days, before and after tidying | {1000 * done.seconds_before:.1f} → "
        f"{1000 * done.seconds_after:.1f} ms | |"
    )
    return rows


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        rows = measure(Path(folder) / "large.duckdb")
    text = (
        "# The store with ten million readings\n\n"
        f"`PYTHONPATH=src:tests python tests/benchmarks/store_benchmark.py`, DuckDB {duckdb.__version__}, Python "
        f"{platform.python_version()}, one thread.\n\n| what | found | aim |\n| --- | --- | --- |\n"
        + "\n".join(rows)
        + "\n"
    )
    Path(__file__).with_name("store_results.md").write_text(text, encoding="utf-8")
    print(text)


if __name__ == "__main__":
    main()

"""Ingest of a long CSV file beside a bare typed ``read_csv`` of DuckDB: processor time, ratio and memory.

    PYTHONPATH=src:demo_feed python tests/benchmarks/ingest_benchmark.py --rows 1000000

Both on one thread. The ingest includes hashing, clocks, quality codes, checks, precedence, history, ledger and
checkpoint. Fixed costs (imports, compiled code from disk) are paid before, with a small file.
"""

from __future__ import annotations

import argparse
import datetime as dt
import resource
import statistics
import tempfile
import time
from pathlib import Path

import duckdb
import numpy as np

from rhovane.ingest import parse_file
from rhovane.model import Series
from rhovane.settings import SeriesSettings, SourceSettings
from rhovane.store import open_store, read_parquet

STATIONS = 50
AIM = 0.40  # of the rate of the bare read
SMALL_FILES = 200
COLUMNS = (
    "{'time': 'timestamp', 'station': 'varchar', 'quantity': 'varchar', 'value': 'double', 'flag': 'varchar'}"
)


def write_feed(path: Path, rows: int, seed: int) -> None:
    """A long file, hour by hour, values with one decimal."""
    rng = np.random.default_rng(seed)
    first = np.datetime64("2020-01-01T00:00", "m")
    with path.open("w", encoding="utf-8") as stream:
        stream.write("time,station,quantity,value,flag\n")
        for hour in range(rows // STATIONS):
            label = str(first + 60 * hour).replace("T", " ")
            values = np.round(rng.gamma(2, 10, STATIONS), 1).tolist()
            stream.write("".join(f"{label},S{i:02d},NO2,{v},V\n" for i, v in enumerate(values)))


def main() -> None:
    """Measure and print."""
    arguments = argparse.ArgumentParser(description=__doc__)
    arguments.add_argument("--rows", type=int, default=1_000_000)
    arguments.add_argument("--times", type=int, default=3)
    given = arguments.parse_args()
    keys = {f"S{i:02d} NO2": f"S{i:02d}.NO2" for i in range(STATIONS)}
    source = SourceSettings.model_validate(
        {
            "name": "air",
            "form": "long csv",
            "files": "*.csv",
            "clock": "UTC",
            "label": "start",
            "columns": {
                "time": "time",
                "station": "station",
                "quantity": "quantity",
                "value": "value",
                "flag": "flag",
            },
            "series": keys,
            "flags": {"V": "pass"},
        }
    )
    network = {key: SeriesSettings(key=key, unit="ug/m3") for key in keys.values()}

    def parse(path: Path):
        return parse_file(path, source, network, read_parquet=read_parquet)

    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        big, warm, small = folder / "big.csv", folder / "warm.csv", folder / "small.csv"
        write_feed(big, given.rows, 1)
        write_feed(warm, 100_000, 2)
        write_feed(small, 24 * STATIONS, 3)
        parse(warm)
        ratios = []
        for turn in range(given.times):
            began = time.process_time()
            parsed = parse(big)
            middle = time.process_time()
            with open_store(folder / f"{turn}.duckdb", threads=1) as store:
                store.ensure_series([Series(key, "ug/m3") for key in network])
                outcome = store.append_files([parsed], now=dt.datetime(2026, 1, 1, tzinfo=dt.UTC))[0]
            ours = time.process_time() - began
            assert outcome.new == given.rows // STATIONS * STATIONS
            memory = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
            del parsed
            with duckdb.connect(str(folder / f"bare{turn}.duckdb"), config={"threads": 1}) as connection:
                begin = time.process_time()
                connection.execute(
                    f"create table r as select * from read_csv('{big}', columns = {COLUMNS}, header = true)"
                )
                connection.execute("checkpoint")
                bare = time.process_time() - begin
            ratios.append(bare / ours)
            print(
                f"bare read_csv {bare:.2f} s; ingest {ours:.2f} s (parse {middle - began:.2f} s): "
                f"{100 * bare / ours:.0f} % of its rate; at most {memory:.0f} MB so far"
            )
        print(f"{given.rows} rows: median {100 * statistics.median(ratios):.0f} % (aim {100 * AIM:.0f} %)")
        began = time.process_time()
        for _ in range(SMALL_FILES):
            parse(small)
        print(
            f"a file of {24 * STATIONS} rows: {1000 * (time.process_time() - began) / SMALL_FILES:.2f} ms to parse"
        )


if __name__ == "__main__":
    main()

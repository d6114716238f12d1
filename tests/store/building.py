"""Invented feed files for the tests of the store, and what other processes do in them."""

from __future__ import annotations

import datetime as dt
import hashlib
import json
import multiprocessing
import os
from pathlib import Path

import numpy as np

from reference.naive_store import NaiveDelivery, NaiveFile
from rhovane.model import ParsedFile, RejectedRow, Series
from rhovane.store import open_store

NOW = dt.datetime(2024, 5, 1, 3, 40, tzinfo=dt.UTC)
LONG_AGO, FAR_AHEAD = dt.datetime(1971, 1, 1), dt.datetime(2100, 1, 1)
FIRST_HOUR = 1_700_000_000 // 3600 * 3600
KEYS = ("ASHFORD.NO2", "ASHFORD.traffic", "MILLBRIDGE.NO2")
SERIES = [Series(key, "veh/h" if key.endswith("traffic") else "ug/m3") for key in KEYS]

# Processes that share nothing with the tests: no thread of an open database is copied into them.
processes = multiprocessing.get_context("forkserver")
processes.set_forkserver_preload(["rhovane.store"])


def parsed_file(readings, *, name="feed/a.csv", source="hourly", rejected=(), result_time=FIRST_HOUR):
    """A parsed file of readings, each a dict with at least series, hour (0, 1, ...) and value."""
    rows = [
        NaiveDelivery(
            r["series"],
            FIRST_HOUR + 3600 * r["hour"],
            r["value"],
            r.get("flag", 1 if r["value"] is not None else 9),
            r.get("stage", 1),
            r.get("result_time", result_time),
            r.get("line", i + 2),
        )
        for i, r in enumerate(readings)
    ]
    content = json.dumps([source, rows, [repr(r) for r in rejected]])
    return ParsedFile(
        source=source,
        path=name,
        sha256=hashlib.sha256(content.encode()).hexdigest(),
        size_bytes=len(content),
        modified=NOW,
        rows_read=len(rows) + sum(r.line > 0 for r in rejected),
        series_key=[r.series for r in rows],
        hour_start=[r.hour for r in rows],
        value=[float("nan") if r.value is None else r.value for r in rows],
        flag=[r.flag for r in rows],
        stage=[r.stage for r in rows],
        result_time=[r.result_time for r in rows],
        line=[r.line for r in rows],
        rejected=tuple(rejected),
    )


def naive_file(file: ParsedFile) -> NaiveFile:
    """The same file for the naive twin."""
    columns = (
        file.series_key,
        file.hour_start,
        file.value,
        file.flag,
        file.stage,
        file.result_time,
        file.line,
    )
    rows = [
        NaiveDelivery(k, h, None if v != v else v, *rest) for k, h, v, *rest in zip(*columns, strict=True)
    ]
    return NaiveFile(file.source, file.sha256, rows, sum(r.line > 0 for r in file.rejected))


def random_files(
    rng: np.random.Generator, n_files: int, *, n_hours: int = 6, most: int = 12
) -> list[ParsedFile]:
    """Files that overlap, repeat hours within themselves, disagree, and agree at another stage: all often."""
    files = []
    for i in range(n_files):
        readings = [
            {
                "series": KEYS[rng.integers(len(KEYS))],
                "hour": int(rng.integers(n_hours)),
                "value": [None, 0.0, 1.0, 2.0][rng.integers(4)],
                "flag": int(rng.choice([1, 3])),
                "stage": int(rng.integers(3)),
                "result_time": FIRST_HOUR + int(rng.integers(3)),
                "line": 2 + j // 2,  # a wide file: two readings in a line
            }
            for j in range(rng.integers(1, most))
        ]
        rejected = [RejectedRow(90 + j, "value", "n/a", "not a number") for j in range(rng.integers(3))]
        files.append(
            parsed_file(readings, name=f"feed/{i}.csv", source=["hourly", "daily"][i % 2], rejected=rejected)
        )
    return files


def current(store) -> dict[tuple[str, int], tuple]:
    """(series, hour) -> (value, flag, stage, result time) of the current readings."""
    rows = store.rows(
        """
        select s.key, epoch(r.ts)::bigint, r.value, r.flag, r.stage, epoch(r.result_time)::bigint
        from reading r join series s on s.id = r.series_id
        """
    )
    content = {(key, ts): tuple(rest) for key, ts, *rest in rows}
    assert len(content) == len(rows), "an hour has two current readings"
    return content


def seen(store, upto: int | None = None) -> dict[tuple[str, int], tuple]:
    """(series, hour) -> (value, flag) as read_readings gives them."""
    r = store.read_readings(KEYS, LONG_AGO, FAR_AHEAD, max_ingest_id=upto)
    content = {
        (r.keys[p], int(ts)): (None if np.isnan(v) else float(v), int(f))
        for p, ts, v, f in zip(r.position, r.ts, r.value, r.flag, strict=True)
    }
    assert len(content) == len(r), "an hour was read twice"
    return content


def value_and_flag(content):
    """The part of a content that a past night saw."""
    return {key: (value, flag) for key, (value, flag, *_) in content.items()}


# -- what other processes do -------------------------------------------------------------------------


def ingest_and_vanish(path: Path, files) -> None:
    """Take in files without a checkpoint and end as a killed process does."""
    store = open_store(path)
    store.ensure_series(SERIES)
    for file in files:
        store.append_files([file], now=NOW, checkpoint=False)
    os._exit(0)


def hold(path: Path, ready, release) -> None:
    """Keep the store open until told otherwise."""
    with open_store(path):
        ready.set()
        release.wait(30)

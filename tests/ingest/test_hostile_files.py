"""Whatever bytes arrive: never a traceback, a hang or a silent loss."""

from __future__ import annotations

import datetime as dt
import gzip
import time
from pathlib import Path

import numpy as np
import pytest

from ingest.hostile import damaged_files, good_files, parse_and_hold
from ingest.small_network import NETWORK, long_source, only_reason, wide_source
from rhovane.model import Series
from rhovane.store import open_store

SECONDS_A_FILE = 5.0  # a file of 4 MB at most takes far less, on a busy machine too
NOW = dt.datetime(2024, 12, 1, tzinfo=dt.UTC)


def test_good_files_come_out_whole(tmp_path: Path):
    for told, source, data in good_files(tmp_path):
        parsed = parse_and_hold(tmp_path, told, source, data)
        assert [row for row in parsed.rejected if row.line] == [], told


def test_damaged_files_of_every_form_lose_nothing_silently(tmp_path: Path):
    series = [Series(one.key, one.unit) for one in NETWORK.values()]
    kept = spoiled = 0
    with open_store(tmp_path / "watch.duckdb") as store:
        store.ensure_series(series)
        parsed = []
        for told, source, data in damaged_files(tmp_path, range(320)):
            began = time.monotonic()
            one = parse_and_hold(tmp_path, told, source, data)
            assert time.monotonic() - began < SECONDS_A_FILE, told
            kept += len(one.value) > 0
            spoiled += bool(one.rejected)
            if one.sha256:
                parsed.append(one)
        for outcome in store.append_files(parsed, now=NOW):
            assert outcome.rows_read == outcome.new + outcome.revised + outcome.unchanged + outcome.rejected
    assert kept > 60  # the damage left something to read in many files, and was seen in most
    assert spoiled > 200


@pytest.mark.parametrize("n_columns", [100_000, 1_000_000])
def test_a_million_columns_are_read_or_refused_in_few_words(parse, n_columns):
    header = "time,no2," + ",".join(f"c{i}" for i in range(n_columns))
    parsed = parse(
        header + "\n2024-03-01 00:00,1" + ",0" * n_columns + "\n", wide_source(series={"no2": "KEL.NO2"})
    )
    assert parsed.value.tolist() == [1]
    assert len(only_reason(parsed)) < 2000
    refused = parse(header + "\n2024-03-01 00:00,1\n", long_source())
    assert len(only_reason(refused)) < 2000


def test_formulas_and_paths_are_kept_as_text_and_nothing_more(parse):
    text = "time,station,quantity,value\n2024-03-01 00:00,KEL,NO2,=1+1\n2024-03-01 01:00,../../x,NO2,1\n"
    parsed = parse(text, long_source())
    assert [row.raw for row in parsed.rejected] == ["=1+1", "../../x NO2"]


def test_a_bomb_of_many_members_stops_at_the_limit(parse):
    member = gzip.compress(bytes(900_000))
    began = time.monotonic()
    parsed = parse(member * 2000, long_source(size_limit_mb=2))
    assert "more than 2 MB" in only_reason(parsed)
    assert time.monotonic() - began < SECONDS_A_FILE


def test_absurd_times_of_change_do_not_stop_a_file(tmp_path: Path):
    import os

    from ingest.small_network import read_parquet
    from rhovane.ingest import parse_file

    path = tmp_path / "a.csv"
    path.write_text("time,station,quantity,value\n2024-03-01 00:00,KEL,NO2,1\n")
    for moment in (-10_000_000_000, 0, 10_000_000_000):
        os.utime(path, (moment, moment))
        parsed = parse_file(path, long_source(), NETWORK, read_parquet=read_parquet)
        assert parsed.modified.year >= 1970
        np.testing.assert_array_equal(parsed.value, [1.0])

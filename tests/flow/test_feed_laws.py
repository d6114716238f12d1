"""Whatever order, form or packing readings arrive in, and however often, the current readings are the same."""

from __future__ import annotations

import datetime as dt
import gzip
from pathlib import Path

import numpy as np
import pytest

from ingest.small_network import NETWORK, long_source
from reference.feed_layouts import Layout, write_long, write_sensorthings
from rhovane.ingest import parse_file
from rhovane.model import ParsedFile, Series
from rhovane.settings import SourceSettings
from rhovane.store import Store, open_store, read_parquet

NOW = dt.datetime(2025, 2, 1, tzinfo=dt.UTC)
START = 1_735_689_600  # 2025-01-01 00:00 UTC
THINGS = {
    "form": "long sensorthings",
    "columns": {"time": "phenomenonTime", "station": "", "quantity": "Datastream", "value": "result", "issued": "resultTime"},
    "series": {"NO2": "KEL.NO2", "O3": "KEL.O3"},
}  # fmt: skip
CURRENT = "select series_id, ts, value, flag, stage, result_time from reading order by 1, 2"


def parsed(folder: Path, name: str, source: SourceSettings, data: bytes) -> ParsedFile:
    path = folder / name
    path.write_bytes(data)
    return parse_file(path, source, NETWORK, read_parquet=read_parquet, shown_as=name)


def fresh_store(place: Path) -> Store:
    store = open_store(place)
    store.ensure_series([Series(one.key, one.unit) for one in NETWORK.values()])
    return store


def current(place: Path, files: list[ParsedFile]) -> str:
    with fresh_store(place) as store:
        for file in files:
            store.append_files([file], now=NOW)
        return repr(store.rows(CURRENT))


def deliveries(folder: Path, rng: np.random.Generator) -> list[ParsedFile]:
    """Overlapping deliveries that disagree, in three forms and packings."""
    files = []
    for i in range(4):
        hours = [START + 3600 * int(h) for h in rng.permutation(30)[:15]]
        long = [("KEL", q, t, float(rng.integers(3))) for t in hours for q in ("NO2", "O3")]
        things = [((q, q), t, float(rng.integers(3))) for q in ("NO2", "O3") for t in hours]
        data = write_long(long, Layout("long"))
        files.append(parsed(folder, f"{i}.csv", long_source(name="lab"), data))
        files.append(parsed(folder, f"{i}.csv.gz", long_source(name="packed"), gzip.compress(data, mtime=i)))
        shape = ["page", "datastreams", "data arrays", "bare"][i]
        files.append(
            parsed(
                folder, f"{i}.json", long_source(name="things", **THINGS), write_sensorthings(things, shape)
            )
        )
    return files


@pytest.mark.parametrize("seed", range(3))
def test_order_and_repetition_of_files_change_nothing(tmp_path: Path, seed: int):
    rng = np.random.default_rng(seed)
    files = deliveries(tmp_path, rng)
    expected = current(tmp_path / "a.duckdb", files)
    for name in "bc":
        again = [files[i] for i in rng.permutation(len(files))] + [
            files[int(i)] for i in rng.integers(len(files), size=3)
        ]
        assert current(tmp_path / f"{name}.duckdb", again) == expected, f"seed {seed}"


def test_a_file_split_in_parts_packed_or_written_as_observations_gives_the_same_values(tmp_path: Path):
    rng = np.random.default_rng(4)
    readings = [
        ("KEL", q, START + 3600 * h, float(rng.integers(5))) for h in range(40) for q in ("NO2", "O3")
    ]
    source = long_source()
    whole = [parsed(tmp_path, "w.csv", source, write_long(readings, Layout("long")))]
    parts = [
        parsed(
            tmp_path, f"{i}.csv.gz", source, gzip.compress(write_long(readings[i : i + 20], Layout("long")))
        )
        for i in range(0, 80, 20)
    ]
    things = [((q, q), t, v) for _, q, t, v in readings]
    observed = [parsed(tmp_path, "o.json", long_source(**THINGS), write_sensorthings(things, "pages"))]
    seen = []
    for i, files in enumerate((whole, parts, observed)):
        with fresh_store(tmp_path / f"{i}.duckdb") as store:
            outcomes = store.append_files(files, now=NOW)
            assert sum(o.new for o in outcomes) == 80
            seen.append(store.rows("select series_id, ts, value, flag from reading order by 1, 2"))
    assert seen[0] == seen[1] == seen[2]


def test_what_is_exported_can_be_ingested_and_is_the_same(tmp_path: Path):
    rng = np.random.default_rng(5)
    exported = tmp_path / "readings.csv"
    with fresh_store(tmp_path / "a.duckdb") as store:
        for file in deliveries(tmp_path, rng):
            store.append_files([file], now=NOW)
        store.export_readings(exported, about="Cautions, with commas\nand a second line")
        before = store.rows(CURRENT)
    words = ["pass", "not evaluated", "suspect", "fail", "below limit", "missing"]
    stages = ["not verified", "preliminary", "verified"]
    source = long_source(
        time_format="%Y-%m-%d %H:%M:%S",
        comment="#",
        missing=[""],
        columns={"time": "hour_start_utc", "station": "", "quantity": "series", "value": "value", "unit": "unit", "flag": "flag",
                 "stage": "stage", "issued": "result_time_utc"},
        series={key: key for key in NETWORK},
        flags={word: word for word in words},
        stages={word: word for word in stages},
    )  # fmt: skip
    again = parsed(tmp_path, "readings.csv", source, exported.read_bytes())
    assert again.rejected == ()
    with fresh_store(tmp_path / "b.duckdb") as store:
        store.append_files([again], now=NOW)
        assert store.rows(CURRENT) == before

"""Files into readings: ledger, quarantine, what is known already, and what is refused."""

import dataclasses
import datetime as dt

import numpy as np
import pytest

from rhovane.model import FeedError, NotFound, RejectedRow, RhovaneError, Series
from rhovane.store import open_store, read_parquet
from rhovane.store.manifest import read_manifest
from store.building import FIRST_HOUR, KEYS, LONG_AGO, NOW, SERIES, current, parsed_file


def at(hour):
    return dt.datetime.fromtimestamp(FIRST_HOUR + 3600 * hour, dt.UTC)


def hours(values, series=KEYS[0], first=0):
    return [{"series": series, "hour": first + i, "value": v} for i, v in enumerate(values)]


def test_outcome_ledger_and_manifest_tell_the_same(store, path):
    rejected = [RejectedRow(0, "", "", "no header"), RejectedRow(7, "value", "n/a", "not a number")]
    files = [
        parsed_file(hours([1.0, None, 3.0]), name="feed/a.csv", rejected=rejected),
        parsed_file([], name="feed/empty.csv"),
        parsed_file(hours([9.0, 3.0], first=1), name="feed/b.csv", result_time=FIRST_HOUR + 1),
    ]
    a, empty, b = store.append_files(files, now=NOW)
    assert (a.ingest_id, a.rows_read, a.new, a.revised, a.unchanged, a.rejected) == (1, 4, 3, 0, 0, 1)
    assert (a.first, a.last) == (at(0), at(2))
    assert (empty.ingest_id, empty.rows_read, empty.first, empty.last) == (2, 0, None, None)
    assert (b.ingest_id, b.new, b.revised, b.unchanged) == (3, 0, 1, 1)
    ledger = store.ingests()
    assert ledger["id"].tolist() == [1, 2, 3]
    assert ledger["rows_read"].tolist() == [4, 0, 2]
    assert ledger["path"].tolist() == [f.path for f in files]
    assert ledger["sha256"].tolist() == [f.sha256 for f in files]
    assert np.isnat(ledger["first_ts"]).tolist() == [False, True, False]
    assert store.ingests(after=2)["id"].tolist() == [3]
    refused = store.rejected_rows()
    assert [tuple(row) for row in zip(*refused.values(), strict=True)] == [
        (1, "feed/a.csv", 0, "", "", "no header"),
        (1, "feed/a.csv", 7, "value", "n/a", "not a number"),
    ]
    manifest = read_manifest(path)
    assert (manifest.last_ingest_id, manifest.ingest_rows, manifest.rows_read, manifest.readings) == (
        3,
        3,
        6,
        3,
    )


def test_second_ingest_of_the_same_content_adds_nothing(store):
    file = parsed_file(hours([1.0, 2.0]), rejected=[RejectedRow(4, "", "?", "unreadable")])
    renamed = dataclasses.replace(file, path="feed/copy.csv")
    first, twin = store.append_files([file, renamed], now=NOW)
    before = current(store)
    (again,) = store.append_files([file], now=NOW)
    assert not first.already_known
    for outcome in (twin, again):
        assert outcome.already_known
        assert outcome.ingest_id == first.ingest_id
        assert (outcome.new, outcome.revised, outcome.unchanged, outcome.rejected) == (0, 0, 2, 1)
    assert current(store) == before
    assert store.last_ingest_id() == 1
    assert len(store.rejected_rows()["line"]) == 1
    assert set(store.known_files()) == {file.path, "feed/copy.csv"}


def test_same_content_from_another_source_is_taken_in(store):
    file = parsed_file(hours([1.0]))
    other = dataclasses.replace(file, source="daily", series_key=[KEYS[1]])
    assert [o.already_known for o in store.append_files([file, other], now=NOW)] == [False, False]
    assert len(current(store)) == 2


def test_known_files_have_size_and_exact_time_and_follow_the_latest_state(store):
    modified = dt.datetime(2024, 4, 30, 23, 59, 59, 123457, dt.timezone(dt.timedelta(hours=2)))
    file = dataclasses.replace(parsed_file(hours([1.0])), modified=modified)
    store.append_files([file], now=NOW)
    nanoseconds = int(modified.replace(microsecond=0).timestamp()) * 10**9 + 123_457_000
    assert store.known_files() == {file.path: (file.size_bytes, nanoseconds)}
    longer = parsed_file(hours([1.0, 2.0]))
    store.append_files([longer], now=NOW)
    assert store.known_files("hour") == {file.path: (longer.size_bytes, int(NOW.timestamp()) * 10**9)}
    assert store.known_files("daily") == {}


def test_no_files_leave_no_trace(store):
    assert store.append_files([], now=NOW) == []
    assert store.last_ingest_id() == 0


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"series_key": ["GHOST.NO2", KEYS[0]]}, "GHOST.NO2.*Define them"),
        ({"value": [1.0, float("inf")]}, "line 3 is infinite"),
        ({"flag": [1]}, "different lengths"),
        ({"rows_read": 5}, "5 rows read, but 2 readings"),
    ],
)
def test_file_that_contradicts_itself_is_refused_with_all_others(store, change, words):
    good = parsed_file(hours([5.0]), name="feed/good.csv")
    bad = dataclasses.replace(parsed_file(hours([1.0, 2.0])), **change)
    with pytest.raises(RhovaneError, match=words):
        store.append_files([good, bad], now=NOW)
    assert current(store) == {}
    assert store.known_files() == {}


def test_series_keep_their_numbers_and_refuse_another_unit_kind_or_step(store):
    ids = store.ensure_series(SERIES)
    assert ids == {key: i + 1 for i, key in enumerate(KEYS)}
    added = Series("NEW.rain", "mm", "accumulated", label="rain gauge")
    assert store.ensure_series([added, SERIES[1], added]) == {"NEW.rain": 4, KEYS[1]: 2}
    for change in ({"unit": "ppb"}, {"kind": "circular"}, {"step_minutes": 15}):
        with pytest.raises(RhovaneError, match=rf"{KEYS[0]}.*{next(iter(change.values()))}.*new key"):
            store.ensure_series([dataclasses.replace(SERIES[0], **change), Series("LATE.x", "m")])
    store.ensure_series([dataclasses.replace(added, label="tipping bucket")])
    assert store.rows("select key, label from series where id >= 4") == [("NEW.rain", "tipping bucket")]


def test_readings_are_read_by_position_in_a_half_open_span(store):
    store.append_files([parsed_file(hours([0.0, 1.0, None, 3.0]) + hours([7.0], KEYS[2], 1))], now=NOW)
    r = store.read_readings([KEYS[2], KEYS[1], KEYS[0]], at(1), at(3))
    rows = sorted(zip(r.position.tolist(), r.ts.tolist(), r.value.tolist(), r.flag.tolist(), strict=True))
    assert rows[0] == (0, FIRST_HOUR + 3600, 7.0, 1)
    assert rows[1] == (2, FIRST_HOUR + 3600, 1.0, 1)
    assert rows[2][:2] == (2, FIRST_HOUR + 7200)
    assert np.isnan(rows[2][2])
    assert len(rows) == 3
    assert (r.ts.dtype, r.value.dtype, r.flag.dtype) == (np.int64, np.float64, np.int8)
    nothing = store.read_readings([KEYS[0]], LONG_AGO, LONG_AGO)
    assert (len(nothing), nothing.value.dtype) == (0, np.float64)
    assert len(store.read_readings([], at(0), at(9))) == 0
    with pytest.raises(NotFound, match=r"no series GHOST\.x"):
        store.read_readings(["GHOST.x"], at(0), at(1))


def test_span_of_series_leaves_out_those_without_readings(store):
    store.append_files([parsed_file(hours([1.0, 2.0, 3.0], KEYS[1], 4))], now=NOW)
    assert store.span_of(KEYS) == {KEYS[1]: (at(4), at(6))}
    assert store.changed_since(0) == {KEYS[1]: at(4)}
    assert store.changed_since(1) == {}


def test_whole_years_at_once_and_again_at_a_later_stage(path):
    n = 50_000
    rng = np.random.default_rng(5)
    file = dataclasses.replace(
        parsed_file([]), rows_read=n, series_key=np.repeat(KEYS[:2], n // 2),
        hour_start=np.tile(FIRST_HOUR + 3600 * np.arange(n // 2), 2), value=rng.normal(size=n),
        flag=np.ones(n, int), stage=np.ones(n, int), result_time=np.zeros(n, int), line=np.arange(n) + 2,
    )  # fmt: skip
    value = file.value.copy()
    value[::100] += 1.0
    verified = dataclasses.replace(file, sha256="ab" * 32, value=value, stage=np.full(n, 2))
    with open_store(path, memory_limit_mb=256, threads=1) as store:
        store.ensure_series(SERIES)
        (first,) = store.append_files([file], now=NOW)
        (second,) = store.append_files([verified], now=NOW)
        assert (first.new, second.revised, second.unchanged) == (n, n // 100, n - n // 100)
        assert store.value("select sum(value) from reading") == pytest.approx(value.sum(), abs=1e-6)
        assert store.value("select count(*) from reading where stage = 2") == n
        assert store.value("select count(*) from reading_history") == n // 100


def test_parquet_columns_come_in_row_order_with_gaps_marked(store, tmp_path):
    file = tmp_path / "feed.parquet"
    store.execute(
        f"""
        copy (select * from (values
            (timestamp '2024-05-01 01:00:00', 'A', 1.5::double, 3, 2.25::decimal(5,2)),
            (null, null, null, null, null),
            (timestamp '2024-05-01 00:00:00', 'B', 'nan'::double, 4, 1.00)) t(time, code, value, n, price))
        to '{file}' (format parquet)
        """
    )
    columns = read_parquet(file)
    assert list(columns) == ["time", "code", "value", "n", "price"]
    assert columns["time"].dtype == "datetime64[us]"
    assert columns["time"].astype("datetime64[s]").tolist()[2] == dt.datetime(2024, 5, 1)
    assert np.isnat(columns["time"]).tolist() == [False, True, False]
    assert columns["code"].tolist() == ["A", None, "B"]
    np.testing.assert_array_equal(columns["value"], [1.5, np.nan, np.nan])
    assert columns["n"].tolist() == [3, None, 4]
    np.testing.assert_array_equal(columns["price"], [2.25, np.nan, 1.0])
    assert store.read_parquet(file).keys() == columns.keys()


def test_parquet_times_with_a_zone_keep_their_instant(store, tmp_path):
    file = tmp_path / "zoned.parquet"
    store.execute(
        f"copy (select * from (values (timestamptz '2024-05-01 03:00:00+02'), (null)) t(time)) to '{file}' (format parquet)"
    )
    times = store.read_parquet(file)["time"].tolist()
    assert times == [dt.datetime(2024, 5, 1, 1, tzinfo=dt.UTC), None]


def test_parquet_file_that_cannot_be_read_is_named(tmp_path):
    with pytest.raises(FeedError, match="no such file"):
        read_parquet(tmp_path / "none.parquet")
    (tmp_path / "text.parquet").write_text("time,value\n")
    with pytest.raises(FeedError, match=r"text\.parquet: cannot be read as Parquet"):
        read_parquet(tmp_path / "text.parquet")

"""What is particular to the long form, the wide form and Parquet files."""

from datetime import UTC, datetime
from unittest.mock import Mock

import duckdb
import numpy as np
import pandas as pd
import pytest

from ingest.small_network import NETWORK, WRITTEN, long_source, only_reason, places, read_parquet, wide_source
from rhovane.ingest import StillWritten, parse_file
from rhovane.model import FeedError, Flag

HEADER = "time,station,quantity,value\n"
MARCH_1 = 1_709_251_200


@pytest.mark.parametrize(
    ("station", "quantity", "place"),
    [
        ("UVE", "NO2", ("station", "UVE NO2")),
        ("KEL", "NOx", ("quantity", "KEL NOx")),
        ("", "NO2", ("station", " NO2")),
        ("TIV", "O3", ("quantity", "TIV O3")),
    ],
)
def test_unknown_codes_are_rejected_with_the_remedy(parse, station, quantity, place):
    text = f"{HEADER}2024-03-01 00:00,{station},{quantity},1\n2024-03-01 00:00,KEL,NO2,2\n"
    parsed = parse(text, long_source())
    assert places(parsed) == [(2, *place)]
    assert f'List "{place[1]}" under [source.series]' in only_reason(parsed)
    assert parsed.value.tolist() == [2]


def test_long_file_without_a_station_column(parse):
    source = long_source(columns={"station": ""}, series={"NO2 kerb": "KEL.NO2"})
    parsed = parse("time,quantity,value\n2024-03-01 00:00,NO2 kerb,1\n2024-03-01 00:00,NO2,2\n", source)
    assert parsed.series_key.tolist() == ["KEL.NO2"]
    assert places(parsed) == [(3, "quantity", "NO2")]


def test_two_codes_of_one_series_are_one_series(parse):
    source = long_source(series={"KEL NO2": "KEL.NO2", "KEL 8": "KEL.NO2"}, units={"KEL 8": "ppb"})
    parsed = parse(f"{HEADER}2024-03-01 00:00,KEL,NO2,1\n2024-03-01 00:00,KEL,8,1\n", source)
    np.testing.assert_allclose(parsed.value, [1.91247], rtol=1e-5)
    assert "another value for the same hour" in only_reason(parsed)


def test_a_code_of_an_undefined_series_is_rejected(parse):
    source = long_source(series={"KEL NO2": "KEL.NOx"})
    assert "not defined" in only_reason(parse(f"{HEADER}2024-03-01 00:00,KEL,NO2,1\n", source))
    wide = parse("time,no2\n2024-03-01 00:00,1\n", wide_source(series={"no2": "KEL.NOx"}))
    assert (wide.rows_read, [row.line for row in wide.rejected]) == (0, [0])
    assert 'not defined: "KEL.NOx"' in only_reason(wide)


def test_wide_readings_come_row_by_row(parse):
    text = "time,temp,no2,o3\n2024-03-01 00:00,1,2,3\n2024-03-01 01:00,4,5,6\n"
    parsed = parse(text, wide_source())
    assert parsed.value.tolist() == [1, 2, 3, 4, 5, 6]
    assert parsed.series_key.tolist() == ["KEL.temperature", "KEL.NO2", "KEL.O3"] * 2
    assert parsed.hour_start.tolist() == [MARCH_1] * 3 + [MARCH_1 + 3600] * 3
    assert parsed.line.tolist() == [2] * 3 + [3] * 3
    assert parsed.rows_read == 6


def test_a_bad_cell_of_a_wide_row_costs_that_cell_and_a_bad_row_counts_once(parse):
    text = (
        "time,no2,o3,temp\n2024-03-01 00:00,1,x,3\nnoon,4,5,6\n2024-03-01 02:00,7,8\n2024-03-01 03:00,,y,9\n"
    )
    parsed = parse(text, wide_source())
    assert parsed.value.tolist() == [1, 3, 9]
    assert places(parsed) == [
        (2, "o3", "x"),
        (3, "time", "noon"),
        (4, "", "2024-03-01 02:00,7,8"),
        (5, "no2", ""),
        (5, "o3", "y"),
    ]
    assert parsed.rows_read == 3 + 1 + 1 + 3


def test_columns_that_are_not_mapped_are_noted_once(parse):
    text = "time,no2,o3,temp,battery,\n" + "".join(f"2024-03-01 {h:02d}:00,1,2,3,12.6,\n" for h in range(24))
    parsed = parse(text, wide_source())
    assert [row.line for row in parsed.rejected] == [0]
    assert 'not read: "battery".' in only_reason(parsed)
    assert parsed.rows_read == len(parsed.value) == 72


def test_a_mapped_column_that_is_missing_is_noted_and_the_others_are_read(parse):
    parsed = parse("time,no2,temp\n2024-03-01 00:00,1,3\n", wide_source())
    assert parsed.value.tolist() == [1, 3]
    assert [row.line for row in parsed.rejected] == [0]
    assert 'lacks "o3"' in only_reason(parsed)
    assert "The other columns were read" in only_reason(parsed)


@pytest.mark.parametrize(
    "header", ["time,a,b,c", "hour,no2,o3,temp", "time,no2,no2,temp", "time,no2,o3,temp,time"]
)
def test_wide_headers_that_cannot_be_read(parse, header):
    parsed = parse(f"{header}\n", wide_source())
    assert (parsed.rows_read, [row.line for row in parsed.rejected]) == (0, [0])
    assert "The header" in only_reason(parsed)


def test_status_columns_of_a_wide_file_hold_for_the_whole_row(parse):
    source = wide_source(
        columns={"flag": "qc", "stage": "state"},
        flags={"ok": "pass", "gone": "missing"},
        stages={"final": "verified"},
        missing=["-"],
    )
    rows = ["00:00,1,-,3,ok,final", "01:00,,5,-,gone,final", "02:00,1,2,3,?,final", "03:00,1,2,x,gone,final"]
    text = "time,no2,o3,temp,qc,state\n" + "".join(f"2024-03-01 {row}\n" for row in rows)
    parsed = parse(text, source)
    assert parsed.flag.tolist() == [Flag.PASS, Flag.MISSING, Flag.PASS] + [Flag.MISSING] * 5
    assert set(parsed.stage) == {2}
    assert np.isnan(parsed.value).tolist() == [False, True, False] + [True] * 5
    assert places(parsed) == [(4, "qc", "?"), (5, "temp", "x")]
    assert parsed.rows_read == 10


@pytest.fixture
def parse_columns(tmp_path):
    """Write columns as a Parquet file (from a data frame or an SQL query) and parse it."""

    def run(frame, source, reader=read_parquet):
        path = tmp_path / "day.parquet"
        with duckdb.connect() as connection:
            query = frame if isinstance(frame, str) else "select * from frame"
            connection.execute(f"copy ({query}) to '{path}' (format parquet)")
        return parse_file(path, source, NETWORK, read_parquet=reader, shown_as="day.parquet")

    return run


def long_frame(**columns):
    n = 3
    return pd.DataFrame(
        {
            "time": pd.date_range("2024-03-01", periods=n, freq="h"),
            "station": ["KEL"] * n,
            "quantity": ["NO2"] * n,
            "value": [1.5, 2.5, 3.5],
            **columns,
        }
    )


@pytest.mark.parametrize("kind", ["timestamps", "texts", "nanoseconds"])
def test_long_parquet(parse_columns, kind):
    frame = long_frame()
    if kind == "texts":
        frame["time"] = frame["time"].dt.strftime("%Y-%m-%d %H:%M")
    elif kind == "nanoseconds":
        frame["time"] = frame["time"].dt.as_unit("ns")
    parsed = parse_columns(frame, long_source(form="long parquet", clock="+01:00", label="end"))
    assert parsed.rejected == ()
    assert parsed.hour_start.tolist() == [MARCH_1 - 7200, MARCH_1 - 3600, MARCH_1]
    assert parsed.value.tolist() == [1.5, 2.5, 3.5]
    assert parsed.line.tolist() == [1, 2, 3]


def test_wide_parquet(parse_columns):
    frame = pd.DataFrame(
        {
            "time": pd.date_range("2024-03-01", periods=2, freq="h"),
            "no2": [1, 2],
            "o3": np.array([1.5, np.nan], dtype=np.float32),
            "temp": [None, -999.0],
        }
    )
    parsed = parse_columns(frame, wide_source(form="wide parquet", missing=["-999"]))
    assert parsed.rejected == ()
    np.testing.assert_array_equal(parsed.value, [1, 1.5, np.nan, 2, np.nan, np.nan])
    assert (parsed.flag == Flag.MISSING).tolist() == [False, False, True, False, True, True]


def test_faulty_typed_cells_are_rejected_by_row_number(parse_columns):
    query = """
        select * from (values
            (timestamp '2024-03-01 00:00', 'KEL', 'NO2', 1.0, 1),
            (timestamp '2024-03-01 00:07', 'KEL', 'NO2', 2.0, 1),
            (null, 'KEL', 'NO2', 3.0, 1),
            (timestamp '2024-03-01 03:00', 'KEL', null, 4.0, 1),
            (timestamp '2024-03-01 04:00', 'KEL', 'NO2', 'inf'::double, 1),
            (timestamp '2024-03-01 05:00', 'KEL', 'NO2', null, 1),
            (timestamp '2024-03-01 06:00', 'KEL', 'NO2', 7.0, null),
            (timestamp '2024-03-01 07:00', 'KEL', 'NO2', 8.0, 4)
        ) t(time, station, quantity, value, qc)"""
    source = long_source(form="long parquet", columns={"flag": "qc"}, flags={"1": "pass", "4": "fail"})
    parsed = parse_columns(query, source)
    assert places(parsed) == [
        (2, "time", "2024-03-01 00:07:00"),
        (3, "time", ""),
        (4, "quantity", "KEL "),
        (5, "value", "inf"),
        (7, "qc", ""),
    ]
    np.testing.assert_array_equal(parsed.value, [1, np.nan, 8])
    assert parsed.flag.tolist() == [Flag.PASS, Flag.MISSING, Flag.FAIL]
    assert parsed.rows_read == 8


@pytest.mark.parametrize(
    ("column", "cells", "says"),
    [
        ("value", ["a", "b", "c"], "is not a number"),
        ("value", [True, False, True], "is not a number"),
        ("value", pd.date_range("2024-01-01", periods=3), "is a time, not a number"),
        ("time", [1.0, 2.0, 3.0], "is a number, not a time"),
    ],
)
def test_columns_of_the_wrong_type(parse_columns, column, cells, says):
    parsed = parse_columns(long_frame(**{column: cells}), long_source(form="long parquet"))
    assert [(row.line, row.column) for row in parsed.rejected] == [(1, column), (2, column), (3, column)]
    assert says in parsed.rejected[0].reason


def test_instants_with_their_offset_are_not_read_on_the_clock_of_the_source(parse_columns):
    aware = [datetime(2024, 3, 1, hour, tzinfo=UTC) for hour in range(3)]

    def reader(path):
        return {**read_parquet(path), "time": aware, "issued": [*aware[:2], None]}

    source = long_source(form="long parquet", clock="+01:00", columns={"issued": "issued"})
    parsed = parse_columns(long_frame(), source, reader)
    assert parsed.hour_start.tolist() == [MARCH_1, MARCH_1 + 3600, MARCH_1 + 7200]
    assert parsed.result_time.tolist() == [MARCH_1, MARCH_1 + 3600, parsed.modified.timestamp() // 1]


def test_civil_clock_in_a_parquet_file(parse_columns):
    frame = long_frame(time=pd.to_datetime(["2024-10-27 01:00", "2024-10-27 02:00", "2024-10-27 02:00"]))
    parsed = parse_columns(frame, long_source(form="long parquet", clock="civil Europe/Berlin"))
    assert np.diff(parsed.hour_start).tolist() == [3600, 3600]
    frame = long_frame(time=pd.to_datetime(["2024-03-31 01:00", "2024-03-31 02:00", "2024-03-31 03:00"]))
    parsed = parse_columns(frame, long_source(form="long parquet", clock="civil Europe/Berlin"))
    assert places(parsed) == [(2, "time", "2024-03-31 02:00:00")]


def test_repeated_typed_rows_show_the_whole_row(parse_columns):
    frame = long_frame(time=pd.to_datetime(["2024-03-01"] * 3), value=[1.0, 1.0, 2.0])
    parsed = parse_columns(frame, long_source(form="long parquet"))
    assert places(parsed) == [
        (1, "", "2024-03-01 00:00:00, KEL, NO2, 1.0"),
        (2, "", "2024-03-01 00:00:00, KEL, NO2, 1.0"),
    ]


def test_missing_column_of_a_parquet_file(parse_columns):
    parsed = parse_columns(long_frame().drop(columns="value"), long_source(form="long parquet"))
    assert (parsed.rows_read, [row.line for row in parsed.rejected]) == (0, [0])
    assert 'lacks "value"' in only_reason(parsed)


def test_parquet_file_without_rows(parse_columns):
    parsed = parse_columns(long_frame().head(0), long_source(form="long parquet"))
    assert "a header and no rows" in only_reason(parsed)


@pytest.mark.parametrize(
    ("damage", "says"),
    [
        (lambda _: b"", "is empty"),
        (lambda _: b"time,station\n", "is not a Parquet file"),
        (lambda data: data[:-20], "seems cut"),
        (lambda data: data[: len(data) // 2] + b"PAR1", "cannot be read"),
    ],
)
def test_damaged_parquet_files_do_not_stop_the_night(tmp_path, damage, says):
    good, bad = tmp_path / "good.parquet", tmp_path / "bad.parquet"
    frame = long_frame()
    with duckdb.connect() as connection:
        connection.execute(f"copy (select * from frame) to '{good}' (format parquet)")
    bad.write_bytes(damage(good.read_bytes()))

    def reader(path):
        try:
            return read_parquet(path)
        except duckdb.Error as error:
            raise FeedError(f"{path}: cannot be read as Parquet: {error}") from error

    parsed = parse_file(bad, long_source(form="long parquet"), NETWORK, read_parquet=reader)
    assert frame.shape == (3, 4)
    assert (parsed.rows_read, [row.line for row in parsed.rejected]) == (0, [0])
    assert says in only_reason(parsed)


@pytest.mark.parametrize("error", [OSError("disk"), ValueError("odd bytes")])
def test_failures_of_the_parquet_reader_stand_in_quarantine(parse_columns, error):
    parsed = parse_columns(long_frame(), long_source(form="long parquet"), Mock(side_effect=error))
    assert f"cannot be read ({error})" in only_reason(parsed)


def test_a_parquet_file_that_changes_while_it_is_read_is_refused(parse_columns):
    def reader(path):
        columns = read_parquet(path)
        path.write_bytes(b"PAR1 something else PAR1")
        return columns

    with pytest.raises(StillWritten, match="changed while it was read"):
        parse_columns(long_frame(), long_source(form="long parquet"), reader)


def test_columns_of_unequal_length_are_refused(parse_columns):
    parsed = parse_columns(
        long_frame(), long_source(form="long parquet"), lambda path: {**read_parquet(path), "value": [1.0]}
    )
    assert "differ in length" in only_reason(parsed)


def test_written_time_is_that_of_the_file(parse):
    parsed = parse(f"{HEADER}2024-03-01 00:00,KEL,NO2,1\n", long_source())
    assert parsed.modified == datetime.fromtimestamp(WRITTEN, UTC)

"""Large plain files take another way through the program, to the same readings and the same rejected rows."""

import numpy as np
import pytest

from ingest.small_network import long_source, places, wide_source
from rhovane.ingest import csv_table

ROWS = 900


def same(parse, monkeypatch, text, source):
    """The file parsed both ways, which must agree in everything; the parsed file."""
    monkeypatch.setattr(csv_table, "LEAST_BYTES", 1)
    fast = parse(text, source)
    monkeypatch.setattr(csv_table, "LEAST_BYTES", 1 << 40)
    slow = parse(text, source)
    for name in ("series_key", "hour_start", "value", "flag", "stage", "result_time", "line"):
        np.testing.assert_array_equal(getattr(fast, name), getattr(slow, name), err_msg=name)
    assert fast.rejected == slow.rejected
    assert fast.rows_read == slow.rows_read
    return fast


def long_lines(rng):
    codes = [("KEL", "NO2"), ("KEL", "O3"), ("TIV", "NO2"), ("KEL", "SO2")]
    lines = []
    for i in range(ROWS):
        station, quantity = codes[rng.choice(4, p=[0.4, 0.3, 0.28, 0.02])]
        value = rng.choice(
            ["1.5", "-2", "x", "", "-999", "1e5", " 7 "], p=[0.5, 0.3, 0.02, 0.02, 0.06, 0.05, 0.05]
        )
        lines.append(f"2024-03-{1 + i // 48:02d} {i // 2 % 24:02d}:00,{station},{quantity},{value}")
    return lines


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("end", ["\n", "\r\n"])
def test_both_ways_agree_on_messy_files(parse, monkeypatch, seed, end):
    rng = np.random.default_rng(seed)
    lines = long_lines(rng)
    odd = [
        "",
        " ",
        "a,b",
        "2024-03-01 00:00,KEL,NO2,1,9",
        "time,station,quantity,value",
        '2024-03-01 00:00,"KEL",NO2,1',
        "\0,,,",
        "é,KEL,NO2,1",
        ",,,",
    ]
    for _ in range(int(rng.integers(0, 4))):
        lines.insert(int(rng.integers(len(lines))), odd[int(rng.integers(len(odd)))])
    text = "time,station,quantity,value" + end + end.join(lines) + (end if rng.random() < 0.7 else "")
    parsed = same(parse, monkeypatch, text, long_source(missing=["-999"]))
    assert len(parsed.value) > 100
    assert len(parsed.rejected) > 10


def test_both_ways_agree_on_files_with_very_many_columns(parse, monkeypatch):
    for n in (62, 63, 64, 500):
        header = "time,no2," + ",".join(f"c{i}" for i in range(n - 2))
        text = header + "\n2024-03-01 00:00,1" + ",0" * (n - 2) + "\n2024-03-01 01:00,2\n"
        assert same(parse, monkeypatch, text, wide_source(series={"no2": "KEL.NO2"})).value.tolist() == [1]


@pytest.mark.parametrize("tail", ["", "2024-03-01 00:00,KEL", "2024-03-01 00:00,KEL,NO2,1", "\n\n"])
def test_both_ways_agree_on_the_end_of_a_file(parse, monkeypatch, tail):
    text = "time,station,quantity,value\n2024-03-02 00:00,KEL,NO2,1\n" + tail
    same(parse, monkeypatch, text, long_source())


def test_both_ways_agree_on_bytes_that_are_no_text(parse, monkeypatch):
    text = b"time,station,quantity,value\n2024-03-02 00:00,KEL,NO2,1\n2024-03-02 01:00,K\xffL,NO2,1\n2024-03-02 02:00,KEL,NO2,\xc3\n"
    assert places(same(parse, monkeypatch, text, long_source())) == [
        (3, "station", "K\\xffL NO2"),
        (4, "value", "\\xc3"),
    ]
    latin = text.replace(b"\xc3", b"2")
    same(parse, monkeypatch, latin, long_source(encoding="latin-1", series={"KÿL NO2": "KEL.NO2"}))


def test_both_ways_agree_on_wide_files(parse, monkeypatch):
    rng = np.random.default_rng(3)
    lines = [
        f"2024-03-{1 + i // 24:02d} {i % 24:02d}:00,{rng.integers(9)},{rng.choice(['1', 'x'])},,5"
        for i in range(500)
    ]
    text = "time,no2,o3,temp,other\n" + "\n".join(lines) + "\n"
    parsed = same(parse, monkeypatch, text, wide_source())
    assert len(parsed.rejected) > 500


def test_more_distinct_cells_than_a_table_holds_are_read_the_other_way(parse, monkeypatch):
    from rhovane.ingest import coded_csv

    lines = [f"2024-03-{1 + i // 24:02d} {i % 24:02d}:00,KEL,NO2,{i}" for i in range(300)]
    text = "time,station,quantity,value\n" + "\n".join(lines) + "\n"
    for most in ((16,), (16, 1024)):
        monkeypatch.setattr(coded_csv, "MOST_DISTINCT", most)
        assert same(parse, monkeypatch, text, long_source()).value.tolist() == list(range(300))

import numpy as np
import pytest

from ingest.small_network import long_source, places, wide_source

STATUS = {
    "columns": {"flag": "qc", "stage": "state", "issued": "issued"},
    "flags": {"V": "pass", "?": "suspect"},
    "stages": {"P": "preliminary", "R": "verified"},
    "missing": ["-"],
}


def text_of(rows):
    """A long file; each row is value, flag, stage, issue time of the same series and hour."""
    lines = [f"2024-03-01 00:00,KEL,NO2,{row}\n" for row in rows]
    return "time,station,quantity,value,qc,state,issued\n" + "".join(lines)


@pytest.mark.parametrize(
    ("rows", "stands", "rejected"),
    [
        (["1,V,P,", "1,V,P,"], 2, {3: "Repeats line 2"}),
        (["1.0,V,P,", "1,V,P,"], 2, {3: "Repeats line 2"}),
        (["-,V,P,", "-,V,P,"], 2, {3: "Repeats line 2"}),
        (["0,V,P,", "-0.0,V,P,"], 2, {3: "Repeats line 2"}),
        (
            ["1,V,P,", "2,V,P,"],
            3,
            {2: "Line 3 gives another value for the same hour and stands, as it is the later line"},
        ),
        (["1,V,P,", "-,V,P,"], 3, {2: "Line 3 gives another value"}),
        (["1,V,P,", "1,?,P,"], 3, {2: "Line 3 gives another status for the same hour"}),
        (
            ["-,V,R,", "-,V,P,"],
            2,
            {3: "Line 2 gives another status for the same hour and stands, as it has the higher"},
        ),
        (
            ["1,V,R,", "2,V,P,"],
            2,
            {3: "Line 2 gives another value for the same hour and stands, as it has the higher stage"},
        ),
        (["1,V,P,2024-03-03 00:00", "2,V,P,2024-03-02 00:00"], 2, {3: "as it was issued later"}),
        (["1,V,P,2024-03-03 00:00", "2,V,R,2024-03-02 00:00"], 3, {2: "as it has the higher stage"}),
        (["1,V,P,", "2,V,P,", "1,V,P,"], 4, {2: "Line 3 gives another", 3: "Line 4 gives another"}),
        (["1,V,P,", "1,V,P,", "2,V,P,"], 4, {2: "Line 4 gives another", 3: "Repeats line 2"}),
        (["1,V,P,", "2,V,P,", "2,V,P,"], 3, {2: "Line 3 gives another", 4: "Repeats line 3"}),
    ],
)
def test_one_reading_an_hour_stands(parse, rows, stands, rejected):
    parsed = parse(text_of(rows), long_source(**STATUS))
    assert parsed.line.tolist() == [stands]
    assert [row.line for row in parsed.rejected] == list(rejected)
    for row in parsed.rejected:
        assert rejected[row.line] in row.reason
        assert row.column == ""
        assert row.raw.startswith("2024-03-01 00:00,KEL,NO2,")


def test_a_faulty_row_does_not_replace_a_good_one(parse):
    parsed = parse(text_of(["1,V,P,", "x,V,P,"]), long_source(**STATUS))
    assert parsed.value.tolist() == [1]
    assert places(parsed) == [(3, "value", "x")]


def test_equal_hours_of_different_series_are_no_repeats(parse):
    text = "time,station,quantity,value\n2024-03-01 00:00,KEL,NO2,1\n2024-03-01 00:00,TIV,NO2,1\n"
    assert parse(text, long_source()).rejected == ()


def test_a_repeated_wide_row_is_judged_cell_by_cell(parse):
    text = "time,no2,o3,temp\n2024-03-01 00:00,1,2,3\n2024-03-01 01:00,1,2,3\n2024-03-01 00:00,1,5,x\n"
    parsed = parse(text, wide_source())
    assert places(parsed) == [(2, "o3", "2"), (4, "no2", "1"), (4, "temp", "x")]
    assert parsed.value.tolist() == [1, 3, 1, 2, 3, 5]
    assert parsed.line.tolist() == [2, 2, 3, 3, 3, 4]
    assert parsed.rows_read == 9


def test_a_file_joined_to_itself_gives_every_reading_once(parse):
    rng = np.random.default_rng(5)
    rows = [
        f"2024-03-01 {h:02d}:00,{s},NO2,{rng.integers(0, 5)}\n" for h in range(24) for s in ("KEL", "TIV")
    ]
    once = "time,station,quantity,value\n" + "".join(rows)
    alone, twice = parse(once, long_source()), parse(once + once, long_source())
    np.testing.assert_array_equal(alone.value, twice.value)
    np.testing.assert_array_equal(alone.line, twice.line)
    assert len(twice.rejected) == 49
    assert "repeats the header" in twice.rejected[0].reason
    assert {row.reason for row in twice.rejected[1:]} == {
        f"Repeats line {n}. Nothing is lost." for n in range(2, 50)
    }

import numpy as np
import pytest

from ingest.small_network import WRITTEN, long_source, only_reason, places, wide_source
from rhovane.model import Flag, Stage

HEADER = "time,station,quantity,value\n"


def row(value: str, hour: int = 0) -> str:
    return f"2024-03-01 {hour:02d}:00,KEL,NO2,{value}\n"


def test_numbers_are_read_to_the_last_digit(parse):
    texts = ["12.5", "-0.3", "+7", ".5", "5.", "1e-3", "0.1", "123456.789012345", " 4.25 ", "0"]
    parsed = parse(HEADER + "".join(row(t, i) for i, t in enumerate(texts)), long_source())
    assert parsed.rejected == ()
    np.testing.assert_array_equal(parsed.value, [12.5, -0.3, 7, 0.5, 5, 1e-3, 0.1, 123456.789012345, 4.25, 0])
    assert set(parsed.flag) == {Flag.NOT_EVALUATED}
    assert set(parsed.stage) == {Stage.NOT_VERIFIED}
    assert set(parsed.result_time) == {WRITTEN}


def test_columns_have_the_stated_types(parse):
    parsed = parse(HEADER + row("1"), long_source())
    kinds = [
        column.dtype.str[1:]
        for column in (
            parsed.hour_start,
            parsed.value,
            parsed.flag,
            parsed.stage,
            parsed.result_time,
            parsed.line,
        )
    ]
    assert kinds == ["i8", "f8", "i1", "i1", "i8", "i8"]
    assert parsed.series_key.dtype == object
    assert parsed.series_key[0] == "KEL.NO2"
    assert parsed.modified.isoformat() == "2025-01-01T00:00:00+00:00"


def test_decimal_comma(parse):
    source = long_source(decimal=",", delimiter=";")
    text = (HEADER + row("12,5") + row("-0,25", 1) + row("1,5e2", 2)).replace(",", ";")
    text = text.replace("12;5", "12,5").replace("0;25", "0,25").replace("1;5e2", "1,5e2")
    parsed = parse(text, source)
    np.testing.assert_array_equal(parsed.value, [12.5, -0.25, 150.0])


def test_decimal_comma_inside_quotes_with_comma_delimiter(parse):
    parsed = parse(HEADER + row('"12,5"'), long_source(decimal=","))
    assert parsed.value.tolist() == [12.5]


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("n/a", 'list "n/a" under missing'),
        ("< 0.5", 'below_limit = "half"'),
        ("12.5*", "is not a number"),
        ("1_000", "is not a number"),
        ("1 000", "is not a number"),
        ("--5", "is not a number"),
        ("0x1F", "is not a number"),
        ("٣", "is not a number"),
        ("−3", "is not a number"),
        ("nan", "is not a finite number"),
        ("-Infinity", "is not a finite number"),
        ("inf", "is not a finite number"),
        ("1e999", "too large"),
        ("", 'list "" under missing'),
        ("   ", 'list "" under missing'),
        ('"12,5"', 'Set decimal = ","'),
    ],
)
@pytest.mark.parametrize("others", [["7"], ["7", "x"]])
def test_text_that_is_no_number_is_rejected_with_line_column_and_remedy(parse, text, says, others):
    parsed = parse(HEADER + row("1.5") + row(text, 1) + row(others[0], 2), long_source())
    assert places(parsed) == [(3, "value", text.strip('"'))]
    assert says in only_reason(parsed)
    assert parsed.value.tolist() == [1.5, 7.0]
    assert parsed.line.tolist() == [2, 4]


def test_decimal_point_in_a_file_with_decimal_comma_is_not_read_as_thousands(parse):
    parsed = parse((HEADER + row("1.234")).replace(",", ";"), long_source(decimal=",", delimiter=";"))
    assert 'Set decimal = "."' in only_reason(parsed)
    parsed = parse(
        (HEADER + row("1.234@5")).replace(",", ";").replace("@", ","), long_source(decimal=",", delimiter=";")
    )
    assert places(parsed) == [(2, "value", "1.234,5")]


def test_missing_codes_are_readings_without_a_value(parse):
    source = long_source(missing=["-999", "NA", ""])
    texts = ["NA", "-999", "-999.0", "-9.99e2", "", "  ", " NA ", "3"]
    parsed = parse(HEADER + "".join(row(t, i) for i, t in enumerate(texts)), source)
    assert parsed.rejected == ()
    np.testing.assert_array_equal(np.isnan(parsed.value), [True] * 7 + [False])
    assert parsed.flag.tolist() == [Flag.MISSING] * 7 + [Flag.NOT_EVALUATED]


def test_a_missing_code_is_recognised_beside_a_faulty_text(parse):
    parsed = parse(HEADER + row("-999") + row("-999.00", 1) + row("x", 2), long_source(missing=["-999"]))
    assert parsed.flag.tolist() == [Flag.MISSING, Flag.MISSING]
    assert places(parsed) == [(4, "value", "x")]


STATUS = {
    "columns": {"flag": "qc", "stage": "state", "issued": "issued"},
    "flags": {"V": "pass", "?": "suspect", "I": "fail", "M": "missing", "": "not evaluated"},
    "stages": {"P": "preliminary", "R": "verified"},
}
STATUS_HEADER = "time,station,quantity,value,qc,state,issued\n"


def test_flags_stages_and_times_of_issue_are_mapped(parse):
    rows = [
        "2024-03-01 00:00,KEL,NO2,1,V,P,2024-03-02 04:00\n",
        "2024-03-01 01:00,KEL,NO2,2,?,R,2024-03-02T04:00:30+02:00\n",
        "2024-03-01 02:00,KEL,NO2,3,I,P,\n",
        "2024-03-01 03:00,KEL,NO2,4,,R,2024-03-02 04:00:59.5\n",
    ]
    parsed = parse(STATUS_HEADER + "".join(rows), long_source(**STATUS))
    assert parsed.rejected == ()
    assert parsed.flag.tolist() == [Flag.PASS, Flag.SUSPECT, Flag.FAIL, Flag.NOT_EVALUATED]
    assert parsed.stage.tolist() == [1, 2, 1, 2]
    four = 1_709_352_000  # 2024-03-02 04:00 UTC
    assert parsed.result_time.tolist() == [four, four - 7200 + 30, WRITTEN, four + 59]


@pytest.mark.parametrize(
    ("line", "place", "says"),
    [
        ("1,Q,P,", ("qc", "Q"), 'Add "Q" to [source.flags]'),
        ("1,V,Z,", ("state", "Z"), 'Add "Z" to [source.stages]'),
        ("1,V,,", ("state", ""), 'Add "" to [source.stages]'),
        ("1,V,P,yesterday", ("issued", "yesterday"), "no time of issue"),
        ("x,Q,Z,yesterday", ("qc", "Q"), "[source.flags]"),  # the first fault of a row is the one told
    ],
)
def test_unmapped_status_is_rejected_with_the_remedy(parse, line, place, says):
    parsed = parse(f"{STATUS_HEADER}2024-03-01 00:00,KEL,NO2,{line}\n", long_source(**STATUS))
    assert places(parsed) == [(2, *place)]
    assert says in only_reason(parsed)


def test_a_flag_that_says_missing_outranks_a_number_and_explains_an_empty_cell(parse):
    rows = [f"2024-03-01 {i:02d}:00,KEL,NO2,{v},M,P,\n" for i, v in enumerate(["-999", "", "12", "oops"])]
    parsed = parse(STATUS_HEADER + "".join(rows), long_source(**STATUS))
    assert np.isnan(parsed.value).tolist() == [True, True, True]
    assert set(parsed.flag) == {Flag.MISSING}
    assert places(parsed) == [(5, "value", "oops")]


UNIT_HEADER = "time,station,quantity,value,unit\n"


def test_units_beside_the_values_are_converted(parse):
    source = long_source(
        columns={"unit": "unit"},
        series={"KEL NO2": "KEL.NO2", "KEL T": "KEL.temperature", "KEL W": "KEL.wind", "KEL CO": "KEL.CO"},
        unit_names={"parts per billion": "ppb", "Grad": "degC"},
    )
    rows = [
        "2024-03-01 00:00,KEL,NO2,10,parts per billion\n",
        "2024-03-01 01:00,KEL,NO2,10,ug/m3\n",
        "2024-03-01 00:00,KEL,T,293.15,K\n",
        "2024-03-01 01:00,KEL,T,1.1,Grad\n",
        "2024-03-01 00:00,KEL,W,36,km/h\n",
        "2024-03-01 00:00,KEL,CO,500,µg/m³\n",
    ]
    parsed = parse(UNIT_HEADER + "".join(rows), source)
    assert parsed.rejected == ()
    np.testing.assert_allclose(parsed.value, [19.1247, 10, 20, 1.1, 10, 0.5], rtol=1e-5)
    assert parsed.value[1] == 10.0
    assert parsed.value[3] == 1.1


def test_a_unit_that_does_not_match_is_rejected_naming_both(parse):
    rows = [
        "2024-03-01 00:00,KEL,NO2,10,furlong\n",
        "2024-03-01 01:00,KEL,NO2,-999,\n",
        "2024-03-01 02:00,KEL,NO2,3,\n",
    ]
    parsed = parse(UNIT_HEADER + "".join(rows), long_source(columns={"unit": "unit"}, missing=["-999"]))
    assert places(parsed) == [(2, "unit", "furlong"), (4, "unit", "")]
    assert '"furlong" in the feed, "ug/m3" for KEL.NO2' in parsed.rejected[0].reason
    assert '"furlong" = "ug/m3" under [source.unit_names]' in parsed.rejected[0].reason
    assert '"KEL NO2" under [source.units]' in parsed.rejected[1].reason
    assert np.isnan(parsed.value).tolist() == [True]  # a missing value needs no unit


def test_declared_units_hold_where_the_file_does_not_say(parse):
    source = long_source(units={"KEL NO2": "ppb"})
    parsed = parse(HEADER + row("10") + "2024-03-01 00:00,TIV,NO2,10\n", source)
    np.testing.assert_allclose(parsed.value, [19.1247, 10], rtol=1e-5)
    with_column = long_source(units={"KEL NO2": "ppb"}, columns={"unit": "unit"})
    lines = "2024-03-01 00:00,KEL,NO2,10,\n2024-03-01 01:00,KEL,NO2,10,ug/m3\n"
    np.testing.assert_allclose(parse(UNIT_HEADER + lines, with_column).value, [19.1247, 10], rtol=1e-5)


def test_declared_unit_that_does_not_match_is_rejected_at_the_value(parse):
    parsed = parse(HEADER + row("10"), long_source(units={"KEL NO2": "K"}))
    assert places(parsed) == [(2, "value", "10")]
    wide = parse("time,no2,o3,temp\n2024-03-01 00:00,1,2,3\n", wide_source(units={"temp": "ppb"}))
    assert places(wide) == [(2, "temp", "3")]
    assert wide.rows_read == 3


def test_wide_columns_are_converted(parse):
    source = wide_source(units={"no2": "ppb", "temp": "K"})
    parsed = parse("time,no2,o3,temp\n2024-03-01 00:00,10,20,273.15\n", source)
    np.testing.assert_allclose(parsed.value, [19.1247, 20, 0], rtol=1e-5, atol=1e-12)

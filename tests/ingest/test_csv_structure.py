import hashlib

import pytest

from ingest.small_network import long_source, only_reason, places, wide_source

HEADER = "time,station,quantity,value\n"
FIRST = "2024-03-01 00:00,KEL,NO2,1.5\n"
SECOND = "2024-03-01 01:00,KEL,NO2,2.5\n"


def unreadable(parsed):
    """The reason of a file that gave nothing."""
    assert (parsed.rows_read, len(parsed.value), len(parsed.rejected)) == (0, 0, 1)
    assert parsed.rejected[0].line == 0
    return parsed.rejected[0].reason


@pytest.mark.parametrize("content", ["", "\n", "\r\n \r\n", "\ufeff", "\ufeff\n\n"])
def test_empty_file(parse, content):
    assert "Ask the source to deliver it again" in unreadable(parse(content, long_source()))


@pytest.mark.parametrize("content", [HEADER, HEADER.strip(), "\n" + HEADER + "\n \n"])
@pytest.mark.parametrize("form", ["long", "wide"])
def test_header_only(parse, content, form):
    source = long_source() if form == "long" else wide_source(series={"value": "KEL.NO2"})
    assert "a header and no rows" in unreadable(parse(content, source))


@pytest.mark.parametrize("line_end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("mark", ["", "\ufeff"])
@pytest.mark.parametrize("last", ["", "end"])
def test_line_ends_byte_order_mark_and_blank_lines(parse, line_end, mark, last):
    text = mark + "\n" + HEADER + "\n" + FIRST + "   \n\n" + SECOND
    text = text if last else text.rstrip("\n")
    parsed = parse(text.replace("\n", line_end).encode(), long_source())
    assert parsed.rejected == ()
    assert parsed.value.tolist() == [1.5, 2.5]
    assert parsed.line.tolist() == [4, 7]


def test_digest_and_size_are_those_of_the_bytes(parse):
    data = (HEADER + FIRST).encode()
    parsed = parse(data, long_source())
    assert parsed.sha256 == hashlib.sha256(data).hexdigest()
    assert parsed.size_bytes == len(data)


@pytest.mark.parametrize("encoding", ["utf-8", "utf-16", "latin-1"])
def test_encodings(parse, encoding):
    source = long_source(encoding=encoding, series={"Süd NO2": "KEL.NO2"})
    text = (HEADER + FIRST).replace("KEL", "Süd")
    assert parse(text.encode(encoding), source).value.tolist() == [1.5]


def test_utf16_in_a_utf8_source_is_recognised(parse):
    assert 'set encoding = "utf-16"' in unreadable(parse((HEADER + FIRST).encode("utf-16"), long_source()))
    assert "written in utf-16" in unreadable(parse((HEADER + FIRST).encode("utf-16-le"), long_source()))


def test_utf8_mark_in_a_latin1_source_is_recognised(parse):
    data = (HEADER + FIRST).encode("utf-8-sig")
    assert 'set encoding = "utf-8"' in unreadable(parse(data, long_source(encoding="latin-1")))


def test_bytes_that_are_no_text_are_rejected_where_they_matter(parse):
    header = "time,station,quantity,value,remark\n"
    rows = [
        b"2024-03-01 00:00,KEL,NO2,1,caf\xe9\n",  # in a column that nobody reads
        b"2024-03-01 01:00,K\xcbL,NO2,2,\n",
        b"2024-03-01 02:00,KEL,NO2,3\xff,\n",
        b"2024-03-01\xa003:00,KEL,NO2,4,\n",
        b"2024-03-01 04:00,KEL,NO2,5,\n",
    ]
    parsed = parse(header.encode() + b"".join(rows), long_source())
    assert parsed.value.tolist() == [1, 5]
    assert places(parsed) == [
        (3, "station", "K\\xcbL NO2"),
        (4, "value", "3\\xff"),
        (5, "time", "2024-03-01\\xa003:00"),
    ]
    assert all("Set encoding" in row.reason for row in parsed.rejected)


def test_bytes_that_are_no_text_in_one_wide_cell_cost_that_cell(parse):
    data = b"time,no2,o3,temp\n2024-03-01 00:00,1,2\xb0,3\n"
    parsed = parse(data, wide_source())
    assert parsed.value.tolist() == [1, 3]
    assert places(parsed) == [(2, "o3", "2\\xb0")]


def test_half_a_character_at_the_end_of_a_utf16_file(parse):
    data = (HEADER + FIRST + SECOND).rstrip("\n").encode("utf-16")[:-1]
    parsed = parse(data, long_source(encoding="utf-16"))
    assert parsed.value.tolist() == [1.5]
    assert [(row.line, row.column) for row in parsed.rejected] == [(3, "value")]


def test_unreadable_header_bytes_are_told(parse):
    reason = unreadable(parse(b"time,station,quantity,v\xe4lue\n" + FIRST.encode(), long_source()))
    assert 'lacks "value"' in reason
    assert '"v\\xe4lue"' in reason


@pytest.mark.parametrize(("delimiter", "written"), [(";", ";"), ("\t", "\\t"), ("|", "|")])
def test_wrong_delimiter_is_named(parse, delimiter, written):
    reason = unreadable(parse((HEADER + FIRST).replace(",", delimiter), long_source()))
    assert f'wrong delimiter: set delimiter = "{written}"' in reason
    wide = "time;no2;o3;temp\n2024-03-01 00:00;1;2;3\n".replace(";", delimiter)
    assert f'set delimiter = "{written}"' in unreadable(parse(wide, wide_source()))


def test_missing_column_names_found_and_expected(parse):
    reason = unreadable(parse("time,station,quantity,concentration\n" + FIRST, long_source()))
    assert reason.startswith(
        'The header lacks "value". Found: "time", "station", "quantity", "concentration"; expected:'
    )
    assert "Correct the column names" in reason


def test_column_named_twice_cannot_be_read(parse):
    reason = unreadable(parse("time,station,quantity,value,value\n" + FIRST, long_source()))
    assert 'names "value" more than once' in reason


def test_unused_columns_may_be_named_twice_or_not_at_all(parse):
    parsed = parse("time,station,quantity,value,,\n" + FIRST.replace("1.5", "1.5,,"), long_source())
    assert parsed.rejected == ()


def test_header_with_an_open_quote(parse):
    assert "Correct its quotes" in unreadable(parse('time,station,quantity,"value\n' + FIRST, long_source()))


def test_file_cut_in_its_last_line(parse):
    parsed = parse(HEADER + FIRST + "2024-03-01 01:00,KEL,N", long_source())
    assert parsed.value.tolist() == [1.5]
    assert places(parsed) == [(3, "", "2024-03-01 01:00,KEL,N")]
    assert "The file seems cut: its last line has 3 of 4 columns" in only_reason(parsed)


def test_file_cut_inside_a_quoted_field(parse):
    parsed = parse(HEADER + FIRST + '2024-03-01 01:00,KEL,NO2,"2', long_source())
    assert "The file seems cut" in only_reason(parsed)
    assert parsed.value.tolist() == [1.5]


def test_complete_last_line_without_line_end_is_fine(parse):
    parsed = parse((HEADER + FIRST + SECOND).rstrip("\n"), long_source())
    assert parsed.value.tolist() == [1.5, 2.5]
    assert parsed.rejected == ()


@pytest.mark.parametrize(
    ("line", "says"),
    [
        ("2024-03-01 01:00,KEL,NO2", "Too few columns: 3 instead of 4"),
        ("2024-03-01 01:00,KEL,NO2,2,5", "Too many columns: 5 instead of 4"),
        ("2024-03-01 01:00,KEL,NO2,2,", "Too many columns"),
        ("lorem ipsum", "Too few columns: 1"),
        ('2024-03-01 01:00,KEL,NO2,"2', "cannot be split"),
        ('2024-03-01 01:00,KEL,NO2,"2"x', "cannot be split"),
        ("2024-03-01 01:00,K\rEL,NO2,2", "cannot be split"),
        ("2024-03-01 01:00,KEL,NO2,2\0", "NUL bytes"),
        ("\0" * 40, "NUL bytes"),
        (HEADER.strip(), "repeats the header"),
    ],
)
@pytest.mark.parametrize("form", ["long", "wide"])
def test_bad_lines_cost_themselves_only(parse, line, says, form):
    source = long_source() if form == "long" else wide_source(series={"value": "KEL.NO2"})
    parsed = parse(HEADER + FIRST + line + "\n" + SECOND, source)
    rows = [row for row in parsed.rejected if row.line]
    assert [(row.line, row.column, row.raw) for row in rows] == [(3, "", line.replace("\0", "\\x00"))]
    assert says in rows[0].reason
    assert parsed.value.tolist() == [1.5, 2.5]
    assert parsed.line.tolist() == [2, 4]
    assert parsed.rows_read == 3


def test_quoted_fields(parse):
    text = 'time,"station","quantity",value,remark\n"2024-03-01 00:00","KEL","NO2","1.5","dry, ""calm"""\n'
    parsed = parse(text, long_source())
    assert parsed.value.tolist() == [1.5]


def test_a_forgotten_quote_does_not_swallow_the_following_lines(parse):
    text = (
        HEADER
        + FIRST.replace("KEL", '"KEL')
        + SECOND
        + FIRST.replace("00:00", "02:00").replace("KEL", '"KEL"')
    )
    parsed = parse(text, long_source())
    assert [row.line for row in parsed.rejected] == [2]
    assert parsed.line.tolist() == [3, 4]


def test_very_long_lines_are_kept_in_part(parse):
    parsed = parse(HEADER + "x" * 200_000 + "\n" + FIRST, long_source())
    (row,) = parsed.rejected
    assert len(row.raw) == 4001
    parsed = parse(HEADER + f'2024-03-01 00:00,KEL,NO2,"{"y" * 200_000}"\n' + FIRST, long_source())
    assert len(only_reason(parsed)) < 400


def test_blanks_around_names_and_codes_do_not_matter(parse):
    text = " time , station,quantity ,value\n 2024-03-01 00:00 , KEL, NO2 , 1.5\n"
    assert parse(text, long_source()).value.tolist() == [1.5]


def test_a_picture_is_no_feed_file(parse):
    assert "The header" in unreadable(
        parse(b"\x89PNG\r\n\x1a\n\x00\x00\x00\rIHDR\x00\x00\x01" * 30, long_source())
    )


def test_preamble_comments_and_two_header_rows_keep_their_line_numbers(parse):
    text = (
        'Network of 1901; "unclosed\n\nwritten by hand\n'
        "# units below\ntime,no2,o3\n,ug/m3,ug/m3\n# first day\n2024-03-01 00:00,1,2\n\n2024-03-01 01:00,x,4\n# end\n"
    )
    source = wide_source(
        preamble_lines=3, comment="#", header_rows=2, series={"no2 ug/m3": "KEL.NO2", "o3 ug/m3": "KEL.O3"}
    )
    parsed = parse(text, source)
    assert parsed.value.tolist() == [1, 2, 4]
    assert places(parsed) == [(10, "no2 ug/m3", "x")]
    assert parsed.line.tolist() == [8, 8, 10]


def test_a_file_without_a_header_has_numbered_columns(parse):
    source = long_source(header_rows=0, columns={"time": "1", "station": "2", "quantity": "3", "value": "4"})
    parsed = parse("2024-03-01 00:00,KEL,NO2,1\n2024-03-01 01:00,KEL,NO2\n", source)
    assert parsed.value.tolist() == [1]
    assert [row.line for row in parsed.rejected] == [2]


def test_header_rows_of_different_width_are_refused(parse):
    assert "different numbers of columns (3, 2)" in only_reason(
        parse("time,no2,o3\n,u\n", wide_source(header_rows=2))
    )
    assert "1 lines, but 3 name the columns" in only_reason(parse("time,no2\n", wide_source(header_rows=3)))


def test_comments_that_were_not_declared_are_rejected_and_a_repeated_header_row_is_told(parse):
    text = "time,no2,o3,temp\n# note\n2024-03-01 00:00,1,2,3\n"
    assert [row.line for row in parse(text, wide_source()).rejected] == [2]
    twice = "time,no2\nx,u\n2024-03-01 00:00,1\nx,u\n"
    parsed = parse(twice, wide_source(header_rows=2, columns={"time": "time x"}, series={"no2 u": "KEL.NO2"}))
    assert "repeats the header" in only_reason(parsed)


def test_what_the_program_exports_with_its_cautions_can_be_read_back(parse):
    text = "# Cautions: these lines\n# begin with a hash\ntime,station,quantity,value\n2024-03-01 00:00,KEL,NO2,1\n"
    assert parse(text, long_source(comment="#")).value.tolist() == [1]
    assert "lacks" in only_reason(parse(text, long_source()))

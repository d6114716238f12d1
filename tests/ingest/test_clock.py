import numpy as np
import pytest

from ingest.small_network import long_source, only_reason, places, wide_source
from reference.feed_layouts import Layout, label_of, write_long, write_wide
from rhovane.ingest.clock import clock_of, text_reader

HOUR = 3600
MARCH_1 = 1_709_251_200  # 2024-03-01 00:00 UTC
AUTUMN = 1_729_987_200  # 2024-10-27 00:00 UTC; Central European clocks go back at 01:00 UTC (03:00 → 02:00)
SPRING = 1_711_843_200  # 2024-03-31 00:00 UTC; they go forward at 01:00 UTC (02:00 → 03:00)
CIVIL = "civil Europe/Berlin"


def long_text(labels, station="KEL"):
    rows = [f"{label},{station},NO2,{i + 1}\n" for i, label in enumerate(labels)]
    return "time,station,quantity,value\n" + "".join(rows)


def wide_text(labels):
    return "time,no2\n" + "".join(f"{label},{i + 1}\n" for i, label in enumerate(labels))


@pytest.mark.parametrize(
    ("clock", "label", "hours_after_utc_midnight"),
    [
        ("UTC", "start", 5),
        ("UTC", "end", 4),
        ("+01:00", "start", 4),
        ("+01:00", "end", 3),
        ("-05:30", "start", 10.5),
    ],
)
def test_labels_become_interval_starts_in_utc(parse, clock, label, hours_after_utc_midnight):
    parsed = parse(long_text(["2024-03-01 05:00"]), long_source(clock=clock, label=label))
    assert parsed.hour_start.tolist() == [MARCH_1 + hours_after_utc_midnight * HOUR]


@pytest.mark.parametrize(
    ("time_format", "label"),
    [
        ("%Y-%m-%dT%H:%M:%SZ", "2024-03-01T05:00:00Z"),
        ("%d.%m.%Y %H:%M", "01.03.2024 05:00"),
        ("%d.%m.%Y %H:%M", "1.3.2024  5:00"),
        ("%Y%m%d%H", "2024030105"),
        ("%Y%m%d%H%M", "202403010500"),
        ("%m/%d/%y %I:%M %p", "03/01/24 05:00 AM"),
        ("%d %b %Y %H:%M", "1 Mar 2024 05:00"),
        ("%Y-%m-%dT%H:%M%z", "2024-03-01T07:00+02:00"),
        ("%Y-%j %H", "2024-061 05"),
    ],
)
def test_time_formats(parse, time_format, label):
    parsed = parse(long_text([label]), long_source(time_format=time_format))
    assert parsed.hour_start.tolist() == [MARCH_1 + 5 * HOUR]


def test_hour_24_ends_its_day(parse):
    parsed = parse(long_text(["2024-02-29 24:00", "2024-03-01 01:00"]), long_source(label="end"))
    assert parsed.hour_start.tolist() == [MARCH_1 - HOUR, MARCH_1]


@pytest.mark.parametrize("clock", ["UTC", "+05:45", CIVIL])
@pytest.mark.parametrize(
    ("label", "says"),
    [
        ("2024-03-01 00:07", "not on the step of 1h"),
        ("2024-03-01 24:07", "time_format"),
        ("2024-02-30 00:00", "time_format"),
        ("2024-03-01 25:00", "time_format"),
        ("2024-03-01 12:60", "time_format"),
        ("2024-03-01T12:00", "time_format"),
        ("2024-03-01 12:00:00", "time_format"),
        ("٢024-03-01 12:00", "time_format"),
        ("soon", "time_format"),
        ("", "no time label"),
        ("0000-01-01 00:00", "time_format"),
    ],
)
def test_labels_that_name_no_interval_are_rejected(parse, clock, label, says):
    parsed = parse(long_text(["2024-03-01 03:00", label, "2024-03-01 04:00"]), long_source(clock=clock))
    assert places(parsed) == [(3, "time", label)]
    assert says in only_reason(parsed)
    assert parsed.value.tolist() == [1, 3]
    wide = parse(wide_text(["2024-03-01 03:00", label]), wide_source(clock=clock, series={"no2": "KEL.NO2"}))
    assert places(wide) == [(3, "time", label)]


def test_quarter_hours_are_on_their_own_step(parse):
    labels = ["2024-03-01 00:15", "2024-03-01 00:30", "2024-03-01 00:35"]
    parsed = parse(long_text(labels), long_source(step="15min", label="end"))
    assert parsed.hour_start.tolist() == [MARCH_1, MARCH_1 + 900]
    assert places(parsed) == [(4, "time", labels[2])]


def test_seconds_off_the_step_are_rejected(parse):
    labels = ["2024-03-01 00:00:00.0", "2024-03-01 01:00:00.5"]
    parsed = parse(long_text(labels), long_source(time_format="%Y-%m-%d %H:%M:%S.%f"))
    assert places(parsed) == [(3, "time", labels[1])]


def civil_day(first_utc, n_hours, **changes):
    """Starts and civil labels of consecutive intervals."""
    layout = Layout("long", clock=CIVIL, **changes)
    starts = [first_utc + i * layout.step_minutes * 60 for i in range(n_hours)]
    return starts, [label_of(start, layout) for start in starts]


@pytest.mark.parametrize("label", ["start", "end"])
@pytest.mark.parametrize(("first", "n_hours"), [(AUTUMN - 2 * HOUR, 25), (SPRING - HOUR, 23)])
def test_days_of_25_and_23_hours(parse, label, first, n_hours):
    starts, labels = civil_day(first, n_hours, label=label)
    assert len(set(labels)) == (24 if n_hours == 25 else 23)
    parsed = parse(long_text(labels), long_source(clock=CIVIL, label=label))
    assert parsed.rejected == ()
    assert parsed.hour_start.tolist() == starts
    wide = parse(wide_text(labels), wide_source(clock=CIVIL, label=label, series={"no2": "KEL.NO2"}))
    assert wide.hour_start.tolist() == starts


def test_autumn_labels_are_what_the_civil_clock_shows():
    _, starts = civil_day(AUTUMN - HOUR, 4, label="start")
    _, ends = civil_day(AUTUMN - HOUR, 4, label="end")
    assert [text[-5:] for text in starts] == ["01:00", "02:00", "02:00", "03:00"]
    assert [text[-5:] for text in ends] == ["02:00", "02:00", "03:00", "04:00"]


def test_skipped_hour_is_rejected(parse):
    parsed = parse(
        long_text(["2024-03-31 01:00", "2024-03-31 02:00", "2024-03-31 03:00"]), long_source(clock=CIVIL)
    )
    assert parsed.hour_start.tolist() == [SPRING, SPRING + HOUR]
    assert places(parsed) == [(3, "time", "2024-03-31 02:00")]
    assert "does not exist on the clock 'civil Europe/Berlin'" in only_reason(parsed)


@pytest.mark.parametrize("newest_first", [False, True])
def test_repeated_hour_of_quarter_hours_with_gaps(parse, newest_first):
    starts, labels = civil_day(AUTUMN - HOUR, 16, step_minutes=15)
    keep = [
        i for i in range(16) if i not in (5, 10)
    ]  # one quarter missing before the change, another after it
    order = keep[::-1] if newest_first else keep
    parsed = parse(long_text([labels[i] for i in order]), long_source(clock=CIVIL, step="15min"))
    assert parsed.rejected == ()
    assert parsed.hour_start.tolist() == [starts[i] for i in order]


def test_order_is_judged_series_by_series(parse):
    starts, labels = civil_day(AUTUMN - HOUR, 4)
    stations = ["KEL", "TIV"]
    interleaved = [(label, s) for label in labels for s in stations]
    by_station = [(label, s) for s in stations for label in labels]
    for rows in (interleaved, by_station):
        text = "time,station,quantity,value\n" + "".join(f"{label},{s},NO2,1\n" for label, s in rows)
        parsed = parse(text, long_source(clock=CIVIL))
        assert parsed.rejected == ()
        for station in stations:
            assert parsed.hour_start[parsed.series_key == f"{station}.NO2"].tolist() == starts


def test_repeated_hour_that_one_series_has_once_is_rejected_for_it_alone(parse):
    _, labels = civil_day(AUTUMN - HOUR, 4)
    rows = [(label, "KEL") for label in labels] + [(label, "TIV") for i, label in enumerate(labels) if i != 2]
    text = "time,station,quantity,value\n" + "".join(f"{label},{s},NO2,1\n" for label, s in rows)
    parsed = parse(text, long_source(clock=CIVIL))
    assert places(parsed) == [(7, "time", "2024-10-27 02:00")]
    assert "the series has it once" in only_reason(parsed)
    assert (parsed.series_key == "KEL.NO2").sum() == 4


@pytest.mark.parametrize(
    "labels",
    [
        ["2024-10-27 02:00"],
        ["2024-10-27 01:00", "2024-10-27 02:00", "2024-10-27 03:00"],
        ["2024-10-27 01:00", "2024-10-27 02:00"],
    ],
)
def test_repeated_hour_that_stands_once_is_rejected(parse, labels):
    row = labels.index("2024-10-27 02:00") + 2
    parsed = parse(long_text(labels), long_source(clock=CIVIL))
    assert places(parsed) == [(row, "time", "2024-10-27 02:00")]
    assert "Have this source deliver UTC" in only_reason(parsed)
    wide = parse(wide_text(labels), wide_source(clock=CIVIL, series={"no2": "KEL.NO2"}))
    assert places(wide) == [(row, "time", "2024-10-27 02:00")]


@pytest.mark.parametrize(
    ("labels", "lines"),
    [
        (["01:00", "02:00", "02:00", "02:00", "03:00"], [3, 4, 5]),  # three times
        (["01:00", "02:00", "03:00", "02:00"], [3, 5]),  # the second one out of order
        (["03:00", "02:00", "02:00", "04:00", "05:00"], [3, 4]),  # after a later hour
        (["00:00", "02:00", "02:00", "01:00", "03:00"], [3, 4]),  # before an earlier hour
    ],
)
def test_order_that_contradicts_itself_settles_nothing(parse, labels, lines):
    parsed = parse(long_text([f"2024-10-27 {t}" for t in labels]), long_source(clock=CIVIL))
    assert [row.line for row in parsed.rejected] == lines
    assert parsed.rows_read == len(labels)


def test_a_bad_value_still_shows_its_place_in_the_order(parse):
    text = long_text(["2024-10-27 01:00", "2024-10-27 02:00", "2024-10-27 02:00"]).replace(",2\n", ",oops\n")
    parsed = parse(text, long_source(clock=CIVIL))
    assert places(parsed) == [(3, "value", "oops")]
    assert parsed.hour_start.tolist() == [AUTUMN - HOUR, AUTUMN + HOUR]


def test_two_autumns_in_one_file(parse):
    year = 364 * 24 * HOUR  # 2025-10-26
    layout = Layout("wide", clock=CIVIL)
    starts = [AUTUMN + i * HOUR for i in (-1, 0, 1, 2)] + [AUTUMN + year + i * HOUR for i in (0, 1)]
    data = write_wide(starts, {"no2": [1.0] * 6}, layout)
    parsed = parse(data, wide_source(clock=CIVIL, series={"no2": "KEL.NO2"}))
    assert parsed.hour_start.tolist() == starts
    # Nothing but repeated hours, of two years, next to each other:
    parsed = parse(
        write_wide([AUTUMN, AUTUMN + HOUR, AUTUMN + year, AUTUMN + year + HOUR], {"no2": [1.0] * 4}, layout),
        wide_source(clock=CIVIL, series={"no2": "KEL.NO2"}),
    )
    assert parsed.hour_start.tolist() == [AUTUMN, AUTUMN + HOUR, AUTUMN + year, AUTUMN + year + HOUR]


def test_labels_with_an_offset_need_no_order(parse):
    labels = ["2024-10-27 02:00+0200", "2024-10-27 01:00+0200", "2024-10-27 02:00+0100"]
    parsed = parse(long_text(labels), long_source(clock=CIVIL, time_format="%Y-%m-%d %H:%M%z"))
    assert parsed.hour_start.tolist() == [AUTUMN, AUTUMN - HOUR, AUTUMN + HOUR]


def test_times_of_issue_on_a_civil_clock(parse):
    text = "time,station,quantity,value,issued\n2024-10-26 00:00,KEL,NO2,1,2024-10-27 02:30\n"
    text += "2024-10-26 01:00,KEL,NO2,1,2024-03-31 02:30\n"
    parsed = parse(text, long_source(clock=CIVIL, columns={"issued": "issued"}))
    assert parsed.result_time.tolist() == [AUTUMN + HOUR + 1800]  # the later of the two half past two
    assert places(parsed) == [(3, "issued", "2024-03-31 02:30")]


def test_a_clock_half_an_hour_off_and_a_half_hour_change():
    lord_howe = clock_of("civil Australia/Lord_Howe")  # +11:00 → +10:30 on 2024-04-07 at 02:00
    wall = 1_712_454_300  # 2024-04-07 01:45 on the clock
    assert lord_howe(wall) == (wall - 11 * HOUR, wall - 10 * HOUR - 1800)
    assert lord_howe(wall - 1800) == (wall - 1800 - 11 * HOUR,) * 2


def test_every_hour_of_a_year_comes_back_from_its_civil_label(parse):
    starts = [AUTUMN - 300 * 24 * HOUR + i * HOUR for i in range(8760)]
    layout = Layout("long", clock=CIVIL, label="end")
    readings = [("KEL", "NO2", start, 1.0) for start in starts]
    parsed = parse(write_long(readings, layout), long_source(clock=CIVIL, label="end"))
    assert parsed.rejected == ()
    np.testing.assert_array_equal(parsed.hour_start, starts)


def test_patterns_of_plain_numbers_read_what_strptime_reads():
    from datetime import datetime

    texts = [
        "2024-03-01 05:00",
        "2024-3-1 5:0",
        "2024-03-01  05:00",
        "24-03-01 05:00",
        "2024-13-01 05:00",
        "x",
        "",
    ]
    texts += ["2024-03-01 05:00 ", "2024-03-0105:00", "20240301 05:00", "2024-03-01 5:5"]
    for pattern in (
        "%Y-%m-%d %H:%M",
        "%Y-%m-%d%n%H:%M",
        "%Y-%m-%d  %H:%M",
        "%d.%m.%Y",
        "%Y%m%d %H:%M",
        "%Y%%%m%d",
    ):
        read = text_reader(pattern)
        for text in texts:
            try:
                expected = round((datetime.strptime(text, pattern) - datetime(1970, 1, 1)).total_seconds())
            except ValueError:
                expected = None
            found = read(text)
            assert (found[0] if found else None) == expected, (pattern, text)


@pytest.mark.parametrize("label", ["start", "end"])
def test_days_of_the_civil_clock_have_23_24_and_25_hours(parse, label):
    shift = 1 if label == "end" else 0
    dates = [f"2024-{m:02d}-{d + shift:02d}" for m, d in ((3, 30), (3, 31), (10, 26), (10, 27))]
    dates = ["2024-04-01" if d == "2024-03-32" else d for d in dates]
    parsed = parse(long_text(dates), long_source(clock=CIVIL, label=label, step="1d", time_format="%Y-%m-%d"))
    assert parsed.rejected == ()
    assert parsed.hour_start.tolist() == [
        SPRING - 25 * HOUR,
        SPRING - HOUR,
        AUTUMN - 26 * HOUR,
        AUTUMN - 2 * HOUR,
    ]


def test_a_label_inside_a_day_is_not_on_the_step_of_a_day(parse):
    parsed = parse(long_text(["2024-03-01 00:00", "2024-03-02 06:00"]), long_source(step="1d"))
    assert places(parsed) == [(3, "time", "2024-03-02 06:00")]


def test_only_days_may_be_labelled_without_an_hour():
    with pytest.raises(ValueError, match="only a step of 1d needs no hour"):
        long_source(time_format="%Y-%m-%d")

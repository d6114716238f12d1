"""Readings written in any layout come back as they were."""

import tempfile
from pathlib import Path

import numpy as np
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from ingest.small_network import NETWORK, long_source, read_parquet, wide_source
from reference.feed_layouts import Layout, write_long, write_wide
from rhovane.ingest import parse_file

AUTUMN = 1_729_987_200  # 2024-10-27 00:00 UTC, an hour before Central European clocks go back
SPRING = 1_711_843_200  # 2024-03-31 00:00 UTC, an hour before they go forward
SERIES = {("KEL", "NO2"): "KEL.NO2", ("KEL", "O3"): "KEL.O3", ("TIV", "NO2"): "TIV.NO2"}
OFF_THE_HOUR = {"-03:30": -12_600, "+05:45": 20_700}  # seconds
STEPS = {5: "5min", 15: "15min", 30: "30min", 60: "1h"}

# Time limits would only measure how busy the machine is.
LAYOUTS = settings(deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow])

values = st.one_of(
    st.none(),
    st.integers(-5, 5).map(float),  # ties
    st.floats(-900, 1e6),  # -999 would rightly be read as missing
    st.sampled_from([0.1, 1e-7, 123456.789, -0.0, 1e22]),
)


@st.composite
def layouts(draw, form):
    delimiter = draw(st.sampled_from([",", ";", "\t", "|"]))
    return Layout(
        form,
        clock=draw(
            st.sampled_from(
                ["UTC", "+01:00", "-03:30", "+05:45", "civil Europe/Berlin", "civil America/New_York"]
            )
        ),
        label=draw(st.sampled_from(["start", "end"])),
        step_minutes=draw(st.sampled_from(list(STEPS))),
        time_format=draw(
            st.sampled_from(
                ["%Y-%m-%d %H:%M", "%Y-%m-%dT%H:%M:%S", "%d.%m.%Y %H:%M", "%m/%d/%y %I:%M %p", "%Y%m%d%H%M"]
            )
        ),
        delimiter=delimiter,
        decimal=draw(st.sampled_from([".", ","])),
        encoding=draw(st.sampled_from(["utf-8", "utf-16", "latin-1"])),
        line_end=draw(st.sampled_from(["\n", "\r\n"])),
        final_line_end=draw(st.booleans()),
        quote_all=draw(st.booleans()),
        missing=draw(st.sampled_from(["-999", "", "NA", "n/a"])),
    )


@st.composite
def runs_of_steps(draw, layout):
    """Consecutive interval starts; where the civil clock repeats itself, the whole repeated hour is among them."""
    day = draw(st.sampled_from([AUTUMN, SPRING, AUTUMN + 7 * 86_400, 1_704_067_200]))
    step = layout.step_minutes * 60
    # From before any clock change of that day to after it, in either zone.
    first = day - draw(st.integers(1, 6)) * 3600
    if layout.clock in OFF_THE_HOUR:
        first -= OFF_THE_HOUR[layout.clock] % step  # labels are on the step of their own clock
    n = draw(st.integers(9, 14)) * 3600 // step
    return [first + i * step for i in range(n)]


def source_settings(layout):
    return {
        "clock": layout.clock,
        "label": layout.label,
        "step": STEPS[layout.step_minutes],
        "time_format": layout.time_format,
        "delimiter": layout.delimiter,
        "decimal": layout.decimal,
        "encoding": layout.encoding,
        "missing": [layout.missing],
    }


def parse_bytes(data, source):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "day.csv"
        path.write_bytes(data)
        return parse_file(path, source, NETWORK, read_parquet=read_parquet)


def expected_values(written):
    return np.array([np.nan if v is None else v for v in written])


@settings(LAYOUTS, max_examples=70)
@given(st.data())
def test_long_files_come_back(data):
    layout = data.draw(layouts("long"))
    starts = data.draw(runs_of_steps(layout))
    chosen = data.draw(st.lists(st.sampled_from(list(SERIES)), min_size=1, max_size=3, unique=True))
    by_station = data.draw(st.booleans())
    keys = (
        [(s, t) for s in chosen for t in starts] if by_station else [(s, t) for t in starts for s in chosen]
    )
    pool = data.draw(st.lists(values, min_size=1, max_size=6))
    readings = [(s[0], s[1], t, pool[i % len(pool)]) for i, (s, t) in enumerate(keys)]
    parsed = parse_bytes(write_long(readings, layout), long_source(**source_settings(layout)))
    assert parsed.rejected == ()
    assert parsed.rows_read == len(readings)
    assert parsed.series_key.tolist() == [SERIES[(s, q)] for s, q, _, _ in readings]
    assert parsed.hour_start.tolist() == [t for _, _, t, _ in readings]
    np.testing.assert_array_equal(parsed.value, expected_values([v for *_, v in readings]))
    np.testing.assert_array_equal(parsed.flag == 9, [v is None for *_, v in readings])


@settings(LAYOUTS, max_examples=50)
@given(st.data())
def test_wide_files_come_back(data):
    layout = data.draw(layouts("wide"))
    starts = data.draw(runs_of_steps(layout))
    names = data.draw(st.lists(st.sampled_from(["no2", "o3", "temp"]), min_size=1, max_size=3, unique=True))
    pool = data.draw(st.lists(values, min_size=1, max_size=7))
    columns = {n: [pool[(i + j) % len(pool)] for i in range(len(starts))] for j, n in enumerate(names)}
    keys = {"no2": "KEL.NO2", "o3": "KEL.O3", "temp": "KEL.temperature"}
    source = wide_source(**source_settings(layout), series={n: keys[n] for n in names})
    parsed = parse_bytes(write_wide(starts, columns, layout), source)
    assert parsed.rejected == ()
    assert parsed.rows_read == len(starts) * len(names)
    assert parsed.hour_start.tolist() == [t for t in starts for _ in names]
    assert parsed.series_key.tolist() == [keys[n] for _ in starts for n in names]
    written = [columns[n][i] for i in range(len(starts)) for n in names]
    np.testing.assert_array_equal(parsed.value, expected_values(written))

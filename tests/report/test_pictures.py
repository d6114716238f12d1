"""Pictures say what the numbers say, in well-formed SVG that needs nothing from outside."""

from __future__ import annotations

import datetime as dt
import re
from xml.etree import ElementTree

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rhovane.model import CorrelationEstimate
from rhovane.report.axes import DAY_S, Scale, nice_ticks, rounded_range, seconds_of, tick_label, time_ticks
from rhovane.report.lag_map import lag_map, shade
from rhovane.report.small_pictures import change_bar, coverage_figure
from rhovane.report.svg import Drawing
from rhovane.report.time_chart import Band, Level, Line, Moment, Span, TimeChart, legend_of, runs
from rhovane.review.relations import SeriesDays, WindowTrack

SVG = "{http://www.w3.org/2000/svg}"
X = (np.arange(10) * DAY_S).astype(np.int64)


def chart(y: np.ndarray, **more: object) -> TimeChart:
    return TimeChart("ρ", "day", (-1.0, 1.0), (Line("rolling", X, y),), **more)


def parsed(svg: str) -> ElementTree.Element:
    return ElementTree.fromstring(svg)


def test_words_in_a_picture_are_escaped():
    d = Drawing(100, 50, '<script> & "quoted"')
    d.text(1, 2, "<b>&</b>")
    picture = parsed(str(d))
    assert picture.get("aria-label") == '<script> & "quoted"'
    assert picture.find(f"{SVG}text").text == "<b>&</b>"
    assert "<b>" not in str(d)


def test_a_gap_breaks_the_line_and_a_lone_value_is_a_dot():
    y = np.array([0.1, 0.2, np.nan, 0.3, np.nan, 0.4, 0.5, 0.6, np.nan, np.nan])
    assert [list(r) for r in runs(y)] == [[0, 1], [3], [5, 6, 7]]
    paths = list(parsed(chart(y).draw(400, 200, "x")).iter(f"{SVG}path"))
    lines = [p.get("d") for p in paths if p.get("stroke-linecap") is None]
    dots = [p.get("d") for p in paths if p.get("stroke-linecap") == "round"]
    assert [d.count("M") for d in lines] == [2]
    assert [d.count("h0") for d in dots] == [1]


def test_a_line_is_drawn_where_its_values_are():
    y = np.linspace(-1, 1, 10)
    d = next(p.get("d") for p in parsed(chart(y).draw(400, 200, "x")).iter(f"{SVG}path"))
    points = np.array([[float(v) for v in p.split()] for p in re.split("[ML]", d)[1:]])
    assert (np.diff(points[:, 0]) > 0).all()
    assert (np.diff(points[:, 1]) < 0).all()  # larger values stand higher
    slopes = np.diff(points[:, 1]) / np.diff(points[:, 0])
    assert np.allclose(slopes, slopes[0], atol=0.01)


def test_nothing_known_draws_axes_and_no_line():
    picture = parsed(chart(np.full(10, np.nan)).draw(400, 200, "x"))
    assert list(picture.iter(f"{SVG}path")) == []
    assert any(t.text == "ρ" for t in picture.iter(f"{SVG}text"))


def test_bands_spans_levels_and_moments_have_a_legend_each():
    y = np.linspace(0, 0.5, 10)
    full = chart(
        y,
        bands=(Band("95 % interval", X, y - 0.1, y + 0.1),),
        spans=(Span("change", 2.0 * DAY_S, 99.0 * DAY_S),),
        levels=(Level("reference", 0.1, 0.3), Level("threshold", 0.6)),
        moments=(Moment("alert 1 raised", 3.0 * DAY_S),),
    )
    assert [s.label for s in legend_of(full)] == [
        "rolling", "95 % interval", "reference", "threshold", "change", "alert 1 raised",
    ]  # fmt: skip
    picture = parsed(full.draw(400, 200, "x"))
    rightmost = max(float(r.get("x")) + float(r.get("width")) for r in picture.iter(f"{SVG}rect"))
    assert rightmost <= 400  # a span that lasts ends with the picture
    data = full.zoom()
    assert data["bands"] == [[2, 3]]
    assert data["series"][1]["values"][0] == pytest.approx(0.1)
    assert data["levels"] == [0.1, 0.3, 0.6]


def test_zoom_data_put_lines_of_different_days_on_common_ones():
    other = Line("point", np.array([3 * DAY_S, 20 * DAY_S]), np.array([1.0, 2.0]))
    data = TimeChart("e", "day", (0, 2), (Line("a", X, np.arange(10.0)), other)).zoom()
    assert len(data["x"]) == 11
    assert data["series"][1]["values"][3] == 1.0
    assert data["series"][1]["values"][4] is None
    assert data["series"][0]["values"][-1] is None


@given(st.floats(-1e6, 1e6), st.floats(1e-3, 1e6), st.integers(2, 12))
def test_ticks_are_few_round_and_inside(low: float, width: float, most: int):
    ticks = nice_ticks(low, low + width, most)
    assert len(ticks) <= most + 1
    slack = 1e-6 * max(abs(low), width)
    assert all(low - slack <= t <= low + width + slack for t in ticks)


@pytest.mark.parametrize("days", [3, 20, 90, 400, 1100])
@pytest.mark.parametrize("width", [300, 700])
def test_time_labels_keep_their_distance(days: int, width: int):
    low = seconds_of(dt.date(2024, 7, 3))
    ticks = time_ticks(low, low + days * DAY_S, width)
    x = Scale(low, low + days * DAY_S, 0, width)
    places = [x(second) for second, _ in ticks]
    assert ticks
    assert min(np.diff(places), default=width) >= 45
    assert 0 <= places[0] <= places[-1] <= width


def test_ranges_without_values_and_with_one_value_are_drawable():
    assert rounded_range(np.array([np.nan])) == (0.0, 1.0)
    low, high = rounded_range(np.array([3.0]))
    assert low < 3.0 < high
    assert tick_label(-0.5) == "−0.5"


def test_shades_tell_sign_and_size():
    assert shade(0.0) == "#ffffff"
    assert shade(1.0) == "#0b5394"
    assert shade(-1.0) == "#b34700"
    assert shade(0.52) == shade(0.48) != shade(0.7)


def track(map_: np.ndarray, lags: list[int]) -> WindowTrack:
    n = len(map_)
    nothing = np.full(n, np.nan)
    return WindowTrack(
        "A~B", np.datetime64("2025-01-01") + np.arange(n), map_[:, lags.index(0)], nothing, nothing, np.zeros(n, int),
        nothing, nothing, nothing, np.full(n, None), np.array(lags), map_,
    )  # fmt: skip


def test_the_lag_map_marks_the_strongest_lag_of_each_day():
    map_ = np.array([[0.1, 0.9, 0.2], [0.1, 0.2, -0.9], [np.nan] * 3])
    windows = track(map_, [-1, 0, 1])
    assert windows.strongest_lag()[:2].tolist() == [0, 1]
    assert np.isnan(windows.strongest_lag()[2])
    picture = parsed(lag_map(windows, (), "day", 400, "x"))
    colours = {r.get("fill") for r in picture.iter(f"{SVG}rect")}
    assert {shade(0.9), shade(-0.9)} <= colours
    (dots,) = [p for p in picture.iter(f"{SVG}path") if p.get("stroke") == "#1f2328"]
    assert dots.get("d").count("h0") == 2


def test_the_change_bar_puts_both_correlations_and_says_them():
    one = CorrelationEstimate(dt.date(2025, 1, 1), dt.date(2025, 1, 28), 0.5, 600, 30.0, 0.2, 0.7)
    none = CorrelationEstimate(
        dt.date(2025, 2, 1), dt.date(2025, 2, 2), None, 3, None, None, None, "too few pairs"
    )
    bar = parsed(change_bar(one, none))
    assert "before +0.50 (+0.20 to +0.70), after –" in bar.get("aria-label")
    assert float(bar.find(f"{SVG}circle").get("cx")) == pytest.approx(8 + 154 * 0.75, abs=0.1)
    assert any(t.text == "not computable" for t in bar.iter(f"{SVG}text"))


def test_the_coverage_calendar_counts_whole_partial_and_empty_days():
    n = 40
    seen = np.full(n, 24)
    seen[3], seen[10:12] = 20, 0
    days = SeriesDays(
        np.datetime64("2025-01-01") + np.arange(n),
        24,
        {"pass": seen, "suspect": np.full(n, 0), "no reading": 24 - seen},
    )
    figure = coverage_figure(days, ("pass", "not evaluated"))
    assert "37 with all 24 observations, 1 with some missing, 2 with none" in figure.sentence
    assert [row[3:] for row in figure.table[1]] == [["3", "2"], ["0", "0"]]
    empty = [r for r in parsed(figure.wide).iter(f"{SVG}rect") if r.get("fill") == "#ffffff"]
    assert len(empty) == 2

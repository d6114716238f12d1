"""Correlation by lag and day as a map: shade for size, warm for negative, dots at the strongest lag."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rhovane.report.axes import DAY_S, Scale, day_seconds, tick_label, time_ticks
from rhovane.report.svg import INK, MUTED, ORANGE, Drawing
from rhovane.report.time_chart import Span
from rhovane.review import WindowTrack

CELL_PX = 26.0  # px; height of one lag
LEFT, RIGHT, TOP, BELOW = 46.0, 14.0, 24.0, 76.0
STEPS = 10  # shades on either side of zero
COLD, WARM = (11, 83, 148), (179, 71, 0)
NOTHING = "#ffffff"
MOST_COLUMNS = 260  # of a long history every second, third, … day is drawn: windows of weeks change slowly


def shade(value: float) -> str:
    """The colour of a correlation, in steps of a tenth; white at 0."""
    share = min(round(abs(value) * STEPS) / STEPS, 1.0)
    end = COLD if value >= 0 else WARM
    return "#" + "".join(f"{round(255 + (c - 255) * share):02x}" for c in end)


def lag_map(windows: WindowTrack, spans: Sequence[Span], clock: str, width: float, alternative: str) -> str:
    """The map as SVG; days run to the right, lags upward."""
    every = 1 + len(windows) // MOST_COLUMNS
    x_low, x_high = float(day_seconds(windows.day)[0]), float(day_seconds(windows.day)[-1]) + DAY_S
    plot = CELL_PX * len(windows.lags)
    d = Drawing(width, TOP + plot + BELOW, alternative)
    x = Scale(x_low, x_high, LEFT, width - RIGHT)
    d.text(4, 13, "lag, hours", colour=INK)
    for i, lag in enumerate(windows.lags):
        top = TOP + plot - CELL_PX * (i + 1)
        d.text(LEFT - 6, top + CELL_PX / 2 + 4, tick_label(float(lag)), "end")
        _row(d, x, windows, i, top, every)
    _strongest(d, x, windows, plot, every)
    for span in spans:
        if x_low <= span.begin <= x_high:
            d.line(x(span.begin), TOP - 6, x(span.begin), TOP + plot, ORANGE, stroke_width="2")
    for second, words in time_ticks(x_low, x_high, width - LEFT - RIGHT):
        d.line(x(second), TOP + plot, x(second), TOP + plot + 5, MUTED)
        anchor = "start" if x(second) < LEFT + 24 else "end" if x(second) > width - RIGHT - 24 else "middle"
        d.text(x(second), TOP + plot + 18, words, anchor)
    d.text(width - RIGHT, TOP + plot + 34, clock, "end")
    step = (width - LEFT - RIGHT) / 11
    for i, value in enumerate(np.linspace(-1.0, 1.0, 11)):
        d.rect(LEFT + i * step, TOP + plot + 44, step, 10, shade(float(value)))
        if i % 2 == 0 or step > 40:
            d.text(LEFT + (i + 0.5) * step, TOP + plot + 68, tick_label(round(float(value), 1)), "middle")
    return str(d)


def _row(d: Drawing, x: Scale, windows: WindowTrack, lag: int, top: float, every: int) -> None:
    """One lag: neighbouring days of the same shade as one rectangle."""
    seconds = day_seconds(windows.day)[::every]
    colours = [shade(float(v)) if np.isfinite(v) else NOTHING for v in windows.map[::every, lag]]
    end = float(day_seconds(windows.day)[-1]) + DAY_S
    begin = 0
    for i in range(1, len(colours) + 1):
        broken = (
            i == len(colours) or colours[i] != colours[begin] or seconds[i] - seconds[i - 1] > every * DAY_S
        )
        if broken:
            a, b = x(float(seconds[begin])), x(min(float(seconds[i - 1]) + every * DAY_S, end))
            d.rect(a, top, b - a + 0.2, CELL_PX, colours[begin])
            begin = i


def _strongest(d: Drawing, x: Scale, windows: WindowTrack, plot: float, every: int) -> None:
    strongest = windows.strongest_lag()
    seconds = day_seconds(windows.day)
    places = {int(lag): i for i, lag in enumerate(windows.lags)}
    points = [
        (x(float(seconds[i]) + DAY_S / 2), TOP + plot - CELL_PX * (places[int(strongest[i])] + 0.5))
        for i in range(0, len(seconds), every)
        if np.isfinite(strongest[i])
    ]
    d.dots(points, "#ffffff", 4.4)
    d.dots(points, INK, 2.8)

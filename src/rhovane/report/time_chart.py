"""Lines over time with bands, shaded spans, levels and marked moments."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.report.axes import Scale, nice_ticks, tick_label, time_ticks
from rhovane.report.svg import BLUE, INK, MUTED, ORANGE, Drawing

Floats = NDArray[np.float64]
LEFT, RIGHT, TOP, BOTTOM = 46.0, 14.0, 24.0, 40.0


@dataclass(frozen=True)
class Line:
    """One line; ``x`` in seconds of the standard clock, NaN in ``y`` breaks it. ``steps``: flat until the next x."""

    label: str
    x: NDArray[np.int64]
    y: Floats
    colour: str = BLUE
    dash: str | None = None
    width: float = 1.8


@dataclass(frozen=True)
class Band:
    """An interval around a line."""

    label: str
    x: NDArray[np.int64]
    low: Floats
    high: Floats
    colour: str = BLUE


@dataclass(frozen=True)
class Span:
    """A shaded stretch of time."""

    label: str
    begin: float
    end: float


@dataclass(frozen=True)
class Level:
    """A level across the chart, or a stretch between two levels."""

    label: str
    low: float
    high: float | None = None


@dataclass(frozen=True)
class Moment:
    """A marked moment."""

    label: str
    x: float


@dataclass(frozen=True)
class TimeChart:
    """What is drawn; ``clock`` says what the time axis counts in."""

    y_label: str
    clock: str
    y_range: tuple[float, float]
    lines: tuple[Line, ...]
    bands: tuple[Band, ...] = ()
    spans: tuple[Span, ...] = ()
    levels: tuple[Level, ...] = ()
    moments: tuple[Moment, ...] = ()
    x_range: tuple[float, float] | None = None

    def limits(self) -> tuple[float, float]:
        """First and last second shown."""
        if self.x_range is not None:
            return self.x_range
        ends = [float(v) for line in self.lines if len(line.x) for v in (line.x[0], line.x[-1])]
        low, high = min(ends, default=0.0), max(ends, default=86_400.0)
        return (low, high) if high > low else (low, low + 86_400.0)

    def draw(self, width: float, height: float, alternative: str) -> str:
        """The chart as SVG."""
        d = Drawing(width, height, alternative)
        low, high = self.limits()
        x = Scale(low, high, LEFT, width - RIGHT)
        y = Scale(*self.y_range, height - BOTTOM, TOP)
        for span in self.spans:
            a, b = x(max(span.begin, low)), x(min(span.end, high))
            if b > a:
                d.rect(a, TOP, b - a, height - BOTTOM - TOP, ORANGE, opacity="0.13")
                d.line(a, TOP, a, height - BOTTOM, ORANGE, stroke_width="1.2")
        self._axes(d, x, y, width, height)
        for level in self.levels:
            if level.high is not None:
                d.rect(
                    LEFT,
                    y(level.high),
                    width - RIGHT - LEFT,
                    y(level.low) - y(level.high),
                    MUTED,
                    opacity="0.16",
                )
            else:
                d.line(
                    LEFT,
                    y(level.low),
                    width - RIGHT,
                    y(level.low),
                    INK,
                    stroke_width="1.2",
                    stroke_dasharray="7 4",
                )
        for band in self.bands:
            for rows in runs(band.low + band.high):
                top = [(x(band.x[i]), y(band.high[i])) for i in rows]
                d.area(
                    top + [(x(band.x[i]), y(band.low[i])) for i in reversed(rows)], band.colour, opacity="0.2"
                )
        for line in self.lines:
            found = [[(x(line.x[i]), y(line.y[i])) for i in rows] for rows in runs(line.y)]
            d.path(
                [r for r in found if len(r) > 1],
                line.colour,
                stroke_width=line.width,
                stroke_dasharray=line.dash,
            )
            d.dots([r[0] for r in found if len(r) == 1], line.colour, 7.0 if len(line.x) == 1 else 3.0)
        for moment in self.moments:
            if low <= moment.x <= high:
                at = x(moment.x)
                d.line(at, TOP, at, height - BOTTOM, INK, stroke_width="1.4", stroke_dasharray="2 3")
                d.area([(at - 5, TOP - 7), (at + 5, TOP - 7), (at, TOP)], INK)
        return str(d)

    def _axes(self, d: Drawing, x: Scale, y: Scale, width: float, height: float) -> None:
        for value in nice_ticks(*self.y_range, most=max(3, int(height / 44))):
            d.line(LEFT, y(value), width - RIGHT, y(value))
            d.text(LEFT - 6, y(value) + 4, tick_label(value), "end")
        for second, words in time_ticks(*self.limits(), width - LEFT - RIGHT):
            d.line(x(second), height - BOTTOM, x(second), height - BOTTOM + 5, MUTED)
            anchor = (
                "start" if x(second) < LEFT + 24 else "end" if x(second) > width - RIGHT - 24 else "middle"
            )
            d.text(x(second), height - BOTTOM + 18, words, anchor)
        d.line(LEFT, height - BOTTOM, width - RIGHT, height - BOTTOM, MUTED)
        d.text(4, 13, self.y_label, colour=INK)
        d.text(width - RIGHT, height - 6, self.clock, "end")

    def zoom(self) -> dict[str, Any]:
        """The same content as plain values, for zooming in a browser."""
        every = np.unique(np.concatenate([np.asarray(line.x) for line in self.lines]))
        series = [
            {
                "label": line.label,
                "colour": line.colour,
                "dash": line.dash,
                "values": _on(every, line.x, line.y),
            }
            for line in self.lines
        ]
        bands = []
        for band in self.bands:
            bands.append([len(series) + 1, len(series) + 2])
            for word, values in (("upper end", band.high), ("lower end", band.low)):
                label = f"{band.label}, {word}"
                series.append(
                    {
                        "label": label,
                        "colour": band.colour,
                        "dash": "2 3",
                        "values": _on(every, band.x, values),
                    }
                )
        levels = [v for level in self.levels for v in (level.low, level.high) if v is not None]
        return {
            "x": every.tolist(),
            "series": series,
            "bands": bands,
            "levels": levels,
            "spans": [[span.begin, span.end] for span in self.spans],
            "moments": [moment.x for moment in self.moments],
            "yLabel": self.y_label,
            "yRange": list(self.y_range),
            "clock": self.clock,
        }


@dataclass(frozen=True)
class Swatch:
    """One entry of a legend: what it looks like (line, dashes, band, span, level, moment, dots) and what it is."""

    kind: str
    colour: str
    label: str
    dash: str | None = None

    @property
    def picture(self) -> str:
        """A small SVG sample."""
        d = Drawing(28, 14, "")
        match self.kind:
            case "band" | "between" | "span":
                opacity = {"band": "0.3", "between": "0.3", "span": "0.25"}[self.kind]
                d.rect(0.0, 1.0, 28.0, 12.0, self.colour, opacity=opacity)
                if self.kind == "span":
                    d.line(1, 1, 1, 13, self.colour, stroke_width="2")
            case "moment":
                d.line(14, 2, 14, 14, self.colour, stroke_width="1.4", stroke_dasharray="2 2")
                d.area([(9, 0), (19, 0), (14, 6)], self.colour)
            case "dot":
                d.dots([(14.0, 7.0)], self.colour, 8.0)
            case "dots":
                d.dots([(8.0, 7.0), (20.0, 7.0)], self.colour, 5.0)
            case _:
                d.line(0, 7, 28, 7, self.colour, stroke_width="2.2", stroke_dasharray=self.dash)
        return str(d).replace('role="img" aria-label=""', 'aria-hidden="true"')


def legend_of(chart: TimeChart) -> list[Swatch]:
    """The legend of a chart."""
    found = [
        Swatch("dot" if len(line.x) == 1 else "line", line.colour, line.label, line.dash)
        for line in chart.lines
    ]
    found += [Swatch("band", band.colour, band.label) for band in chart.bands]
    found += [
        Swatch("between", MUTED, level.label)
        if level.high is not None
        else Swatch("level", INK, level.label, "7 4")
        for level in chart.levels
    ]
    found += [Swatch("span", ORANGE, label) for label in dict.fromkeys(s.label for s in chart.spans)]
    found += [Swatch("moment", INK, moment.label) for moment in chart.moments]
    return found


def runs(values: Floats) -> Iterator[Sequence[int]]:
    """Stretches of rows without NaN."""
    known = np.flatnonzero(np.isfinite(values))
    if len(known):
        for part in np.split(known, np.flatnonzero(np.diff(known) > 1) + 1):
            yield part.tolist()


def _on(every: NDArray[np.int64], x: NDArray[np.int64], y: Floats) -> list[float | None]:
    """Values at all places; None where there is none."""
    out = np.full(len(every), np.nan)
    out[np.searchsorted(every, x)] = y
    return [round(float(v), 4) if np.isfinite(v) else None for v in out]


@dataclass(frozen=True)
class Figure:
    """A picture with everything that belongs to it: words for those who cannot see it, numbers, legend, zoom.

    ``wide`` is for screens and paper, ``narrow`` for a phone; ``table`` is (headings, rows).
    """

    name: str
    title: str
    sentence: str
    wide: str
    narrow: str
    legend: list[Swatch] = field(default_factory=list)
    table: tuple[list[str], list[list[str]]] | None = None
    zoom: dict[str, Any] | None = None

"""Small pictures: two intervals in a list, the coverage calendar of a series."""

from __future__ import annotations

import datetime as dt

import numpy as np

from rhovane.model import CorrelationEstimate
from rhovane.report.axes import MONTHS, Scale
from rhovane.report.lag_map import shade
from rhovane.report.svg import BLUE, GRID, INK, MUTED, ORANGE, Drawing
from rhovane.report.time_chart import Figure
from rhovane.report.words import interval, signed
from rhovane.review.relations import SeriesDays


def change_bar(before: CorrelationEstimate, after: CorrelationEstimate) -> str:
    """Both correlations with their intervals on a scale from −1 to 1; before above, after below."""
    words = (
        f"before {signed(before.statistic)} ({interval(before.low, before.high)}), "
        f"after {signed(after.statistic)} ({interval(after.low, after.high)}), on a scale from −1 to 1"
    )
    d = Drawing(170, 40, words)
    x = Scale(-1.0, 1.0, 8.0, 162.0)
    for tick in (-1.0, 0.0, 1.0):
        d.line(x(tick), 2, x(tick), 30, GRID)
        d.text(x(tick), 39, f"{tick:g}".replace("-", "−"), "middle", size=9.5)
    for y, one, colour in ((9.0, before, BLUE), (22.0, after, ORANGE)):
        if one.low is not None and one.high is not None:
            d.line(x(one.low), y, x(one.high), y, colour, stroke_width="3", opacity="0.55")
        if one.statistic is None:
            d.text(x(0.0), y + 4, "not computable", "middle", size=10)
        elif colour == BLUE:
            d.add("circle", cx=x(one.statistic), cy=y, r=4.2, fill=colour)
        else:
            d.add("rect", x=x(one.statistic) - 4, y=y - 4, width=8, height=8, fill=colour)
    return str(d)


def coverage_figure(days: SeriesDays, accepted: tuple[str, ...]) -> Figure:
    """A month a row, a day a cell: filled whole, crossed in part, empty none."""
    observed = days.observations(accepted)
    whole = int((observed >= days.expected).sum())
    none = int((observed == 0).sum())
    sentence = (
        f"{len(days.day)} days: {whole} with all {days.expected} observations, {len(days.day) - whole - none} with "
        f"some missing, {none} with none. Filled: all; crossed: some missing (paler the more); empty: none."
    )
    shares = observed / days.expected
    months: dict[str, list[float]] = {}
    for day, share in zip(days.day, shares, strict=True):
        months.setdefault(str(day)[:7], []).append(float(share))
    rows = [
        [m, str(len(v)), f"{np.mean(v):.1%}", str(sum(s < 1 for s in v)), str(sum(s == 0 for s in v))]
        for m, v in months.items()
    ]
    return Figure(
        "coverage",
        "Coverage calendar",
        sentence,
        _calendar(days.day, shares, 20.0, 20.0, sentence),
        _calendar(days.day, shares, 7.4, 15.0, sentence),
        [],
        (["month", "days", "observations of those expected", "days with gaps", "days with none"], rows),
    )


def _calendar(days: np.ndarray, shares: np.ndarray, wide: float, tall: float, alternative: str) -> str:
    """Cells ``wide`` by ``tall`` px, months downward."""
    across, down = wide + 1.5, tall + 1.5
    first, last = days[0].astype(dt.date), days[-1].astype(dt.date)
    n_months = (last.year - first.year) * 12 + last.month - first.month + 1
    left, top = 66.0, 20.0
    d = Drawing(left + 31 * across + 4, top + n_months * down + 4, alternative)
    for number in range(1, 32):
        if number in (1, 10, 20, 30) or wide > 12:
            d.text(left + (number - 0.5) * across, 13, str(number), "middle", size=10.5)
    for i in range(n_months):
        year, month = first.year + (first.month - 1 + i) // 12, (first.month - 1 + i) % 12
        d.text(left - 6, top + i * down + tall / 2 + 4, f"{MONTHS[month]} {year}", "end", size=11.5)
    for day, share in zip(days, shares, strict=True):
        date = day.astype(dt.date)
        row = (date.year - first.year) * 12 + date.month - first.month
        x, y = left + (date.day - 1) * across, top + row * down
        if share <= 0:
            d.rect(x + 0.5, y + 0.5, wide - 1, tall - 1, "#ffffff", stroke=ORANGE, stroke_width="1.4")
        else:
            d.rect(x, y, wide, tall, shade(0.25 + 0.5 * min(float(share), 1.0)))
            if share < 1:
                d.line(x, y + tall, x + wide, y, INK, stroke_width="1.2")
    d.line(left, top + n_months * down, left + 31 * across, top + n_months * down, MUTED)
    return str(d)

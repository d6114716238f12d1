"""The pictures of alert sheets and pair sheets."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence

import numpy as np

from rhovane.report.axes import day_seconds, nice_ticks, rounded_range, seconds_of, tick_label
from rhovane.report.lag_map import lag_map
from rhovane.report.svg import BLUE, GRID, INK, MUTED, ORANGE, Drawing
from rhovane.report.time_chart import (
    Band,
    Figure,
    Level,
    Line,
    Moment,
    Span,
    Swatch,
    TimeChart,
    legend_of,
)
from rhovane.report.words import clock_words, interval, signed, statistic_name, unit_words
from rhovane.review import AlertEntry
from rhovane.review.sheets import HourlyReadings, PairPictures, RankScatter
from rhovane.settings import SeriesSettings, Settings

WIDE, NARROW = 760.0, 350.0  # px: reading column of a screen or of A4; a phone
TABLE_DAYS = 7  # days between two rows of a table of numbers
LEARNING, CHANGED = 0, 2
SCORES = {
    "innovation": "the changes from hour to hour",
    "day shape": "departures from the usual course of the day",
    "day course": "the course of the day itself",
}


def figure(
    name: str,
    title: str,
    sentence: str,
    chart: TimeChart,
    *,
    height: float = 250.0,
    table: tuple[list[str], list[list[str]]] | None = None,
) -> Figure:
    """A time chart as a figure."""
    alternative = f"{title}. {sentence}"
    return Figure(
        name,
        title,
        sentence,
        chart.draw(WIDE, height, alternative),
        chart.draw(NARROW, height, alternative),
        legend_of(chart),
        table,
        chart.zoom(),
    )


def alert_spans(entries: Sequence[AlertEntry], last: dt.date) -> tuple[Span, ...]:
    """The time of each change, from its likeliest first day to its end or to the last day."""
    spans = []
    for entry in entries:
        ended = entry.standing.ended
        day = None if ended is None else ended.payload.get("day")
        end = dt.date.fromisoformat(day) if day else last
        begin = seconds_of(entry.alert.onset_day)
        spans.append(Span("change, from its likeliest first day", begin, max(begin, seconds_of(end))))
    return tuple(spans)


def rolling_figure(
    settings: Settings, pictures: PairPictures, entries: Sequence[AlertEntry], name: str
) -> Figure:
    """The rolling correlation with its interval, the band of the reference, and the changes shaded."""
    windows = pictures.windows
    statistic = statistic_name(settings)
    x = day_seconds(windows.day)
    chart = TimeChart(
        f"rank correlation {statistic}, lag 0 (no unit)",
        f"last day of the window; {clock_words(settings)}",
        _correlation_range(windows.statistic, windows.low, windows.high),
        (Line(f"rolling {statistic}", x, windows.statistic),),
        bands=(Band("95 % interval", x, windows.low, windows.high),),
        spans=_spans(pictures, entries),
        levels=_reference(pictures),
        moments=_alarms(entries),
    )
    known = np.isfinite(windows.statistic)
    if known.any():
        least, most = float(np.nanmin(windows.statistic)), float(np.nanmax(windows.statistic))
        last = int(np.flatnonzero(known)[-1])
        sentence = (
            f"{statistic} between {signed(least)} and {signed(most)}; newest {signed(float(windows.statistic[last]))} "
            f"(95 %: {interval(float(windows.low[last]), float(windows.high[last]))}) on {windows.day[last]}. "
            f"{int((~known).sum())} of {len(windows)} windows could not be computed."
        )
    else:
        sentence = "No window of these days could be computed: there is no correlation to show."
    rows = [
        [
            str(windows.day[i]),
            signed(float(windows.statistic[i])),
            interval(float(windows.low[i]), float(windows.high[i])),
            str(int(windows.n_pairs[i])),
            "–" if np.isnan(windows.n_effective[i]) else f"{windows.n_effective[i]:.0f}",
            str(windows.reason[i] or ""),
        ]
        for i in range(len(windows) - 1, -1, -TABLE_DAYS)
    ]
    heads = ["window ends", statistic, "95 % interval", "joint hours", "independent hours", "why not"]
    return figure(
        name, f"Rolling {statistic} over {settings.correlation.window_hours} hours", sentence, chart,
        height=270.0, table=(heads, rows[::-1]),
    )  # fmt: skip


def _correlation_range(*values: np.ndarray) -> tuple[float, float]:
    seen = np.concatenate([v[np.isfinite(v)] for v in values])
    if not len(seen):
        return -1.0, 1.0
    low, high = min(float(seen.min()), 0.0), max(float(seen.max()), 0.0)
    return max(-1.02, low - 0.06 if low < 0 else -0.02), min(1.02, high + 0.06)


def _spans(pictures: PairPictures, entries: Sequence[AlertEntry]) -> tuple[Span, ...]:
    windows = pictures.windows
    return alert_spans(entries, windows.day[-1].astype(dt.date)) if len(windows) else ()


def _alarms(entries: Sequence[AlertEntry]) -> tuple[Moment, ...]:
    return tuple(Moment(f"alert {e.alert.id} raised", seconds_of(e.alert.alarm_day)) for e in entries)


def _reference(pictures: PairPictures) -> tuple[Level, ...]:
    if pictures.reference_low is None or pictures.reference_high is None:
        return ()
    words = "reference: middle 90 % of the windows in the 90 days before the onset"
    return (Level(words, pictures.reference_low, pictures.reference_high),)


def evidence_figure(
    settings: Settings, pictures: PairPictures, entries: Sequence[AlertEntry], name: str
) -> Figure | None:
    """The evidence of the change watch day by day, with its threshold; None where it has not been replayed."""
    track = pictures.evidence
    if track is None or not len(track.day):
        return None
    x = day_seconds(track.day)
    own = [e for e in entries if e.alert.pair_key == pictures.recipe.key]
    top = max([float(e.alert.evidence) for e in own], default=0.0)
    shown = np.concatenate([track.evidence, track.threshold])
    chart = TimeChart(
        "evidence (logarithm of the chart value, no unit)",
        f"day; {clock_words(settings)}",
        rounded_range(shown, include=(0.0, top)),
        (
            Line("evidence of this pair", x, track.evidence),
            Line("threshold of this pair", x, track.threshold, INK, "7 4", 1.3),
            *_own_charts(own),
        ),
        spans=_spans(pictures, own),
        moments=_alarms(own),
    )
    learning = int((track.state == LEARNING).sum())
    held = int((track.state == CHANGED).sum())
    parts = [f"An alert is raised when evidence exceeds its threshold. Watched: {SCORES[track.score]}."]
    parts += [
        f"Alert {e.alert.id}: evidence {e.alert.evidence:.2f} over {e.alert.threshold:.2f} on {e.alert.alarm_day}"
        + ("." if e.alert.suspect.startswith("pair") else f" (chart of {e.alert.suspect}).")
        for e in own
    ]
    if learning:
        parts.append(f"{learning} of these days were for learning: no judgement.")
    if held:
        parts.append(f"On {held} days the pair counted as changed and was not judged anew.")
    rows = [
        [str(track.day[i]), signed(float(track.evidence[i])), signed(float(track.threshold[i]))]
        for i in range(len(track.day) - 1, -1, -TABLE_DAYS)
    ]
    return figure(
        name, "Evidence and its threshold", " ".join(parts), chart,
        height=220.0, table=(["day", "evidence", "threshold"], rows[::-1]),
    )  # fmt: skip


def _own_charts(entries: Sequence[AlertEntry]) -> list[Line]:
    """Where the chart stood that raised each alert: a series' or station's own one is not that of a pair."""
    return [
        Line(
            f"alert {e.alert.id}: its own chart, {e.alert.suspect.partition(' ')[0] or 'pair'}",
            day_seconds(np.array([e.alert.alarm_day], dtype="datetime64[D]")),
            np.array([e.alert.evidence]),
            ORANGE,
        )
        for e in entries
        if not e.alert.suspect.startswith("pair")
    ]


def lag_figure(
    settings: Settings, pictures: PairPictures, entries: Sequence[AlertEntry], name: str
) -> Figure | None:
    """Correlation by lag and day; None where the pair is looked at with one lag only."""
    windows = pictures.windows
    if len(windows.lags) < 2 or not len(windows):
        return None
    strongest = windows.strongest_lag()
    usual = [int(v) for v in strongest[np.isfinite(strongest)]]
    counts = {lag: usual.count(lag) for lag in sorted(set(usual), key=lambda lag: -usual.count(lag))}
    first, second = pictures.recipe.first, pictures.recipe.second
    told = ", ".join(f"lag {tick_label(lag)} on {n} days" for lag, n in list(counts.items())[:3])
    sentence = (
        f"Strongest: {told or 'none computable'}. Lag above 0: {first} leads {second} by that many hours."
    )
    alternative = f"Map of lag by time. {sentence}"
    rows = [
        [str(windows.day[i]), *(signed(float(v)) for v in windows.map[i]), tick_label(float(strongest[i]))]
        for i in range(len(windows) - 1, -1, -TABLE_DAYS)
        if np.isfinite(strongest[i])
    ]
    spans = _spans(pictures, entries)
    clock = f"last day of the window; {clock_words(settings)}"
    return Figure(
        name,
        f"{statistic_name(settings)} by lag and time",
        sentence,
        lag_map(windows, spans, clock, WIDE, alternative),
        lag_map(windows, spans, clock, NARROW, alternative),
        [Swatch("dots", INK, "strongest lag of the day")],
        (
            ["window ends", *(f"lag {tick_label(float(lag))}" for lag in windows.lags), "strongest"],
            rows[::-1],
        ),
    )


def readings_figures(
    settings: Settings, pictures: PairPictures, readings: HourlyReadings, onset: dt.date, name: str
) -> list[Figure]:
    """Both raw series around the onset, each with its own unit."""
    offset = int(settings.network.standard_offset.total_seconds())
    found = []
    for which, series, values, colour in (
        ("a", pictures.first, readings.first, BLUE),
        ("b", pictures.second, readings.second, ORANGE),
    ):
        x = readings.hour + offset
        unit = unit_words(series.unit)
        chart = TimeChart(
            f"{series.key}, {unit}",
            f"hour; {clock_words(settings)}",
            rounded_range(values),
            (Line(f"{series.key}, observations", x, values, colour, width=1.2),),
            x_range=(float(x[0]), float(x[-1])) if len(x) else None,
            moments=(Moment("likeliest first day of the change", seconds_of(onset)),),
        )
        found.append(
            figure(
                f"{name}-{which}", series.label or series.key, _spread(series, values), chart, height=170.0
            )
        )
    return found


def _spread(series: SeriesSettings, values: np.ndarray) -> str:
    seen = values[np.isfinite(values)]
    missing = f"{len(values) - len(seen)} of {len(values)} hours without an observation"
    if not len(seen):
        return f"{missing}: nothing to show."
    low, middle, high = np.quantile(seen, (0.05, 0.5, 0.95))
    unit = unit_words(series.unit)
    return (
        f"Median {middle:.3g} {unit}, nine hours in ten between {low:.3g} and {high:.3g} {unit}; {missing}."
    )


def scatter_figure(
    settings: Settings, pictures: PairPictures, before: RankScatter, after: RankScatter, entry: AlertEntry
) -> Figure:
    """Joint ranks before and after the onset, side by side."""
    statistic = statistic_name(settings)
    alert = entry.alert
    sentence = (
        f"Each dot is one hour: its rank among the hours of its own stretch, 0 lowest, 1 highest. Before: {statistic} "
        f"{signed(alert.before.statistic)} over {len(before.x)} hours; after: {signed(alert.after.statistic)} over "
        f"{len(after.x)} hours. Dots along the rising diagonal move together; a cloud without direction does not."
    )
    alternative = f"Rank scatter before and after. {sentence}"
    panels = [
        ("before", before, signed(alert.before.statistic), BLUE),
        ("after", after, signed(alert.after.statistic), ORANGE),
    ]
    labels = (pictures.recipe.first, pictures.recipe.second)
    return Figure(
        "scatter",
        "Ranks before and after",
        sentence,
        _scatter(panels, labels, statistic, WIDE, 2, alternative),
        _scatter(panels, labels, statistic, NARROW, 1, alternative),
    )


def _scatter(
    panels: Sequence[tuple[str, RankScatter, str, str]],
    labels: tuple[str, str],
    statistic: str,
    width: float,
    columns: int,
    alternative: str,
) -> str:
    side = (width - 46.0 * columns - 14.0) / columns
    side = min(side, 300.0)
    tall = side + 94.0
    d = Drawing(width, tall * (len(panels) // columns), alternative)
    for i, (word, scatter, value, colour) in enumerate(panels):
        left = 46.0 + (i % columns) * (side + 60.0)
        top = 54.0 + (i // columns) * tall
        d.text(left, top - 40, f"{word}: {statistic} {value}", colour=INK, size=14.0, font_weight="600")
        d.text(left, top - 24, f"{scatter.first_day} to {scatter.last_day}, {len(scatter.x)} hours")
        d.text(left - 20, top - 7, f"↑ rank of {labels[1]}", colour=INK)
        for tick in nice_ticks(0.0, 1.0, 4):
            at = top + side * (1 - tick)
            d.line(left, at, left + side, at, GRID)
            d.line(left + side * tick, top, left + side * tick, top + side, GRID)
            d.text(left - 6, at + 4, tick_label(tick), "end")
            d.text(left + side * tick, top + side + 15, tick_label(tick), "middle")
        d.line(left, top + side, left + side, top, MUTED, stroke_dasharray="4 4")
        points = [
            (left + side * px, top + side * (1 - py)) for px, py in zip(scatter.x, scatter.y, strict=True)
        ]
        d.dots(points, colour, 3.6, opacity="0.45")
        d.text(left + side, top + side + 31, f"rank of {labels[0]} →", "end", INK)
    return str(d)

"""One number a day for a pair: how strongly its two series moved together within that day.

Three readings of a day, made from the hourly scores of :mod:`rhovane.stats.hourly_scores`:

* *innovation*: the uncentred correlation of the two series' innovations, what moved them from hour to hour;
* *shape*: the correlation of their levels about the day's own means, the course of the day beside the usual;
* *course*: the same with the daily cycle kept, for pairs in which an activity drives a concentration.

All go through Fisher's atanh. Pairs adjusted for control series use residuals of both sides on the
controls, and for the shape too keep the daily cycle: there the controls stand for what the cycle shares.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.compiled import compiled
from rhovane.stats.hourly_scores import (
    FIT_DAYS,
    SERIES_HISTORY_DAYS,
    SeriesScores,
    checked_days,
    series_scores,
    sort_present,
)
from rhovane.stats.whitening import CLIP

Floats = NDArray[np.float64]

MIN_HOURS = 8
"""Fewest joint hours of a day for which a score is reported."""
MIN_MASKED_HOURS = 6
"""The same where a mask keeps only part of the hours."""
MAX_TIED_SHARE = 0.75
"""A side is nearly constant where more of a day's joint readings than this share one midrank."""
MIN_INNOVATION_SQUARES = 0.2
"""A side is nearly constant where the day's squared innovations (in trailing variances) sum to less."""
MIN_SHAPE_SQUARES = 0.02
"""The same for squared deviations from the day's mean (in trailing variances about it)."""
MAX_DAILY_CORRELATION = 0.98
"""Daily correlations are kept inside ± this before atanh."""
MAX_LAG_STEP = 2
"""Steps on either side of the pair's lag at which daily innovation correlations are kept as well."""
MAX_LAG_DAYS = 2
"""Longest lag, in days, that :data:`HISTORY_DAYS` makes room for."""
HISTORY_DAYS = SERIES_HISTORY_DAYS + 1 + FIT_DAYS + MAX_LAG_DAYS
"""Days of readings, the scored day included, that suffice for any pair with a lag of at most two days:
those of an hourly score, one for neighbouring lags, and for adjusted pairs the days of the adjustment."""


@dataclass(frozen=True)
class DailyScores:
    """Daily scores of one pair.

    Attributes
    ----------
    day : ndarray of int64, shape (n_days,)
        Day numbers.
    innovation, shape, course : ndarray of float64, shape (n_days,)
        atanh of the day's correlation; NaN where there were too few joint hours or a side was nearly
        constant. ``course`` is None where it was not kept: the watch then does without it.
    innovation_hours, shape_hours, course_hours : ndarray of float64, shape (n_days,)
        Joint hours behind each score; 0 where it is NaN.
    lagged : ndarray of float64, shape (n_days, 5)
        Innovation correlations (not transformed) at the pair's lag plus -2, -1, 0, 1 and 2
        steps: column ``2 + s`` is high where the second series runs ``s`` steps later than usual.
    """

    day: NDArray[np.int64]
    innovation: Floats
    innovation_hours: Floats
    shape: Floats
    shape_hours: Floats
    lagged: Floats
    course: Floats | None = None
    course_hours: Floats | None = None

    def last(self, n_days: int) -> DailyScores:
        """The scores of the last ``n_days`` days."""
        begin = max(0, len(self.day) - n_days)
        given: dict[str, Any] = {f.name: getattr(self, f.name) for f in fields(self)}
        part: dict[str, Any] = {name: v[begin:] for name, v in given.items() if v is not None}
        return DailyScores(**part)


def lookback_days(lag: int, *, controls: bool, steps_per_day: int = 24) -> int:
    """Days before the first scored one for which a pair needs the hourly scores of its series."""
    return 1 + -(-abs(lag) // steps_per_day) + (FIT_DAYS if controls else 0)


def daily_scores(
    x: Floats,
    y: Floats,
    *,
    days: range | None = None,
    lag: int = 0,
    controls: Floats | None = None,
    keep: NDArray[np.bool_] | None = None,
    steps_per_day: int = 24,
) -> DailyScores:
    """Daily scores of one pair from the readings of its series.

    Parameters
    ----------
    x, y : ndarray of float64, shape (n_hours,)
        Observations on the same grid, which starts with a day; NaN marks an hour without one.
    days : range, optional
        Consecutive day numbers to score; default all complete days.
    lag : int
        Steps by which x leads y: pairs (x[t - lag], y[t]), each belonging to the day of its later hour.
    controls : ndarray of float64, shape (n_hours, n_controls), optional
        Readings of the series to adjust for, each at the hour of the member it is taken from.
    keep : ndarray of bool, shape (n_hours,), optional
        Hours that count (wind sector, working hours); a pair follows its later hour.
    steps_per_day : int
        Readings a day, 24 for hourly values.

    Raises
    ------
    ValueError
        When shapes do not fit, or a series holds an infinite value.

    See Also
    --------
    pair_scores : the same from hourly scores shared by many pairs.
    """
    x, y = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if x.shape != y.shape:
        raise ValueError(f"x has shape {x.shape} and y {y.shape}; both must be (n_hours,).")
    columns = [] if controls is None else list(np.atleast_2d(np.asarray(controls, dtype=np.float64).T))
    for column in columns:
        if column.shape != x.shape:
            raise ValueError(
                f"controls has {len(column)} rows for {len(x)} hours; one row an hour is needed."
            )
    wanted = checked_days(days, len(x) // steps_per_day)
    before = lookback_days(lag, controls=bool(columns), steps_per_day=steps_per_day)
    # A negative lag reads y before x: still the past of the later hour, so only earlier days are needed.
    needed = range(max(0, wanted.start - before), wanted.stop)
    first, second, *others = (series_scores(v, needed, steps_per_day=steps_per_day) for v in (x, y, *columns))
    return pair_scores(first, second, days=wanted, lag=lag, controls=others, keep=keep)


def pair_scores(
    x: SeriesScores,
    y: SeriesScores,
    *,
    days: range,
    lag: int = 0,
    controls: Sequence[SeriesScores] = (),
    keep: NDArray[np.bool_] | None = None,
) -> DailyScores:
    """Daily scores of one pair from hourly scores shared with other pairs.

    Parameters
    ----------
    x, y : SeriesScores
        Hourly scores of the two series for the same days, reaching :func:`lookback_days` before ``days``
        (or back to day 0).
    days : range
        Consecutive day numbers to score.
    lag : int
        Steps by which x leads y.
    controls : sequence of SeriesScores
        Series to adjust for, same days.
    keep : ndarray of bool, shape (n_hours,), optional
        Hours that count, from the start of day 0.

    Raises
    ------
    ValueError
        When the hourly scores cover different days or too few, or ``keep`` is too short.

    Notes
    -----
    A day is not scored with fewer than 8 joint hours (6 under a mask; in that proportion for other steps),
    or where a side is nearly constant: more than three quarters of its joint readings at one midrank, or
    next to no variance. Adjusting is least squares on the 90 days before, over the pair's own joint hours.
    """
    steps = x.innovation.shape[1]
    first = x.first_day
    for other in (y, *controls):
        if other.first_day != first or other.innovation.shape != x.innovation.shape:
            raise ValueError(
                f"hourly scores cover days {first}..{first + x.n_days - 1} and {other.first_day}.."
                f"{other.first_day + other.n_days - 1}; compute them for the same days."
            )
    needed = max(0, days.start - lookback_days(lag, controls=bool(controls), steps_per_day=steps))
    if days.step != 1 or needed < first or days.stop > first + x.n_days:
        raise ValueError(
            f"days={days} at lag {lag} need hourly scores from day {needed} to {days.stop - 1}; "
            f"they cover {first} to {first + x.n_days - 1}."
        )
    fewest = MIN_HOURS if keep is None else MIN_MASKED_HOURS
    if keep is None:
        kept = np.ones(x.n_days * steps, dtype=np.bool_)
    else:
        keep = np.asarray(keep, dtype=np.bool_)
        if len(keep) < days.stop * steps:
            raise ValueError(
                f"keep has {len(keep)} hours; day {days.stop - 1} ends at hour {days.stop * steps}."
            )
        kept = np.ascontiguousarray(keep[first * steps : (first + x.n_days) * steps])
    last = days.stop - first
    begin, x_delay, y_delay = days.start - first, max(lag, 0), max(-lag, 0)
    x_rows, y_rows = _aligned(x, x_delay, controls), _aligned(y, y_delay, controls)
    if controls:
        joint = kept & np.isfinite(x_rows[1]) & np.isfinite(y_rows[1])
        for rows, delay in ((x_rows, x_delay), (y_rows, y_delay)):
            for kind, name in enumerate(("innovation", "normal_score", "normal_score")):
                design = np.stack([_delayed(getattr(c, name), delay) for c in controls])
                rows[kind] = residuals(rows[kind], design, joint, max(0, begin - 1), last, steps, FIT_DAYS)
    scores, hours, lagged = score_days(
        x_rows,
        y_rows,
        _day_scales(x, x_delay, controls),
        _day_scales(y, y_delay, controls),
        kept,
        (begin, last, steps),
        max(3, -(-fewest * steps // 24)),
    )
    day = np.arange(days.start, days.stop, dtype=np.int64)
    return DailyScores(day, scores[0], hours[0], scores[1], hours[1], lagged, scores[2], hours[2])


def _delayed(hourly: Floats, delay: int) -> Floats:
    """Hourly values moved to the row of the hour ``delay`` steps later, flat; NaN where there are none."""
    flat = np.full(hourly.size, np.nan)
    if delay < hourly.size:
        flat[delay:] = hourly.ravel()[: hourly.size - delay]
    return flat


def _aligned(scores: SeriesScores, delay: int, controls: Sequence[SeriesScores]) -> Floats:
    """Sources of innovation, shape and course, and the midrank, in the rows of the later hours: (4, n_rows)."""
    shape = scores.normal_score if controls else scores.level
    parts = (scores.innovation, shape, scores.normal_score, scores.midrank)
    return np.stack([_delayed(v, delay) for v in parts])


def _day_scales(scores: SeriesScores, delay: int, controls: Sequence[SeriesScores]) -> Floats:
    """Scales of shape and course for each day of the later hour: those of the day in which its rows begin."""
    steps = scores.innovation.shape[1]
    parts = (scores.course_sd if controls else scores.shape_sd, scores.course_sd)
    return np.stack([_delayed(v, -(-delay // steps)) for v in parts])


@compiled
def solve_positive(matrix: Floats, right: Floats) -> None:
    """Solve a small positive definite system by Cholesky's method, in place; ``right`` becomes the solution.

    Only the lower triangle of ``matrix`` is read.
    """
    n = len(right)
    for i in range(n):
        for j in range(i + 1):
            total = matrix[i, j]
            for m in range(j):
                total -= matrix[i, m] * matrix[j, m]
            matrix[i, j] = math.sqrt(max(total, 1e-300)) if i == j else total / matrix[j, j]
    for i in range(n):
        for m in range(i):
            right[i] -= matrix[i, m] * right[m]
        right[i] /= matrix[i, i]
    for i in range(n - 1, -1, -1):
        for m in range(i + 1, n):
            right[i] -= matrix[m, i] * right[m]
        right[i] /= matrix[i, i]


@compiled
def residuals(
    y: Floats, design: Floats, use: NDArray[np.bool_], begin: int, end: int, steps: int, fit_days: int
) -> Floats:
    """What is left of ``y`` for days ``begin`` to ``end`` after least squares on the days before each.

    An intercept is fitted. With too few rows for the fit a day is left NaN.
    """
    k = len(design) + 1
    out = np.full(len(y), np.nan)
    for day in range(begin, end):
        gram = np.zeros((k, k))
        moment = np.zeros(k)
        row = np.ones(k)
        n = 0
        for t in range(max(0, day - fit_days) * steps, day * steps):
            ok = use[t] and not np.isnan(y[t])
            for i in range(1, k):
                row[i] = design[i - 1, t]
                ok = ok and not np.isnan(row[i])
            if not ok:
                continue
            n += 1
            for i in range(k):
                moment[i] += row[i] * y[t]
                for j in range(i + 1):
                    gram[i, j] += row[i] * row[j]
        if n < 10 * k:
            continue
        for i in range(k):
            gram[i, i] += 1e-9 * n  # a control that stands still is left out rather than divided by
        solve_positive(gram, moment)
        for t in range(day * steps, (day + 1) * steps):
            fitted = moment[0]
            for i in range(1, k):
                fitted += moment[i] * design[i - 1, t]
            out[t] = y[t] - fitted
    return out


@compiled
def tied_share(values: Floats) -> float:
    """Share of the most frequent value."""
    ordered = np.empty(len(values))
    n = sort_present(values, ordered)
    longest = 1
    run = 1
    for i in range(1, n):
        run = run + 1 if ordered[i] == ordered[i - 1] else 1
        longest = max(longest, run)
    return longest / n


@compiled
def lagged_correlation(
    x: Floats, y: Floats, kept: NDArray[np.bool_], begin: int, end: int, step: int
) -> float:
    """Uncentred correlation of rows ``begin`` to ``end`` with x ``step`` rows earlier (negative: y earlier)."""
    xy = 0.0
    xx = 0.0
    yy = 0.0
    for t in range(begin, end):
        i, j = t - max(step, 0), t + min(step, 0)
        if kept[t] and i >= 0 and j >= 0 and not np.isnan(x[i]) and not np.isnan(y[j]):
            xy += x[i] * y[j]
            xx += x[i] * x[i]
            yy += y[j] * y[j]
    return xy / np.sqrt(xx * yy) if xx > 0.0 and yy > 0.0 else np.nan


@compiled
def score_days(
    x: Floats,
    y: Floats,
    x_scale: Floats,
    y_scale: Floats,
    kept: NDArray[np.bool_],
    span: tuple[int, int, int],
    fewest: int,
) -> tuple[Floats, Floats, Floats]:
    """Scores of days ``span[0]`` to ``span[1]`` from aligned rows; see :func:`pair_scores`.

    Scores and joint hours have shape (3, n_days), innovation, shape, course; then the lagged correlations.
    """
    begin, end, steps = span
    n_days = end - begin
    scores, hours = np.full((3, n_days), np.nan), np.zeros((3, n_days))
    lagged = np.full((n_days, 2 * MAX_LAG_STEP + 1), np.nan)
    a, b = np.empty(steps), np.empty(steps)
    x_ties, y_ties = np.empty(steps), np.empty(steps)
    for i in range(n_days):
        day = begin + i
        for kind in range(3):
            n = 0
            for t in range(day * steps, (day + 1) * steps):
                if kept[t] and not np.isnan(x[kind, t]) and not np.isnan(y[kind, t]):
                    a[n], b[n] = x[kind, t], y[kind, t]
                    x_ties[n], y_ties[n] = x[3, t], y[3, t]
                    n += 1
            if n < fewest:
                continue
            if tied_share(x_ties[:n]) > MAX_TIED_SHARE or tied_share(y_ties[:n]) > MAX_TIED_SHARE:
                continue
            least = MIN_INNOVATION_SQUARES
            if kind > 0:
                x_sd, y_sd = x_scale[kind - 1, day], y_scale[kind - 1, day]
                if np.isnan(x_sd) or np.isnan(y_sd):
                    continue
                least = MIN_SHAPE_SQUARES
                centre(a[:n], x_sd)
                centre(b[:n], y_sd)
            xx = (a[:n] * a[:n]).sum()
            yy = (b[:n] * b[:n]).sum()
            if xx <= least or yy <= least:
                continue
            r = (a[:n] * b[:n]).sum() / np.sqrt(xx * yy)
            scores[kind, i] = np.arctanh(min(max(r, -MAX_DAILY_CORRELATION), MAX_DAILY_CORRELATION))
            hours[kind, i] = n
            if kind == 0:
                for s in range(-MAX_LAG_STEP, MAX_LAG_STEP + 1):
                    lagged[i, s + MAX_LAG_STEP] = lagged_correlation(
                        x[0], y[0], kept, day * steps, (day + 1) * steps, s
                    )
    return scores, hours, lagged


@compiled
def centre(values: Floats, scale: float) -> None:
    """Deviations from the mean in units of ``scale``, clipped; in place."""
    mean = values.sum() / len(values)
    for i in range(len(values)):
        values[i] = min(max((values[i] - mean) / max(scale, 1e-6), -CLIP), CLIP)

"""From readings to hourly scores of one series: ranks, cycle removed, whitened; each day from a bounded past.

Three steps, each causal and each decided by ranks only, so that a strictly increasing transform of a
series changes nothing:

1. *Normal score*: the midrank of a reading among the last 30 days of the series, as a normal quantile.
2. *Level*: the normal score minus its trailing 28-day mean at that hour of the day.
3. *Innovation*: what an AR(2) process, fitted afresh for every day on the 90 days before it, could not
   foresee of the level. Gaps are bridged by the exact Kalman filter of that process.

Nothing is anchored to a calendar or to the first reading: the scores of day *d* are a function of the
readings of days ``d - SERIES_HISTORY_DAYS + 1`` to *d*, the same to the last bit whether a night computes
that day alone or a study computes years at once.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from rhovane.stats.arguments import as_series
from rhovane.stats.compiled import compiled
from rhovane.stats.whitening import whiten

Floats = NDArray[np.float64]

RANK_DAYS = 30
"""Days, today included, among which a reading is ranked (720 hours)."""
MIN_RANKED_DAYS = 2
"""A reading is scored once this many days' worth of observations stand in its ranking window."""
SCORE_TAIL = 1e-4
"""Ranks are kept this far from 0 and 1 before they become normal quantiles."""
CYCLE_DAYS = 28
"""Days, today included, of the trailing mean that stands for the daily cycle (four whole weeks)."""
FIT_DAYS = 90
"""Days before a day on which its AR(2) process and its scale are fitted."""
MIN_FIT_DAYS = 14
"""Days' worth of observations among those, below which a day gets no innovations."""
SERIES_HISTORY_DAYS = FIT_DAYS + CYCLE_DAYS + RANK_DAYS - 1
"""Days of readings, the scored day included, that its hourly scores depend on."""
SCORED_BEFORE_DAYS = FIT_DAYS + CYCLE_DAYS - 1
"""Days before a day whose own scores its hourly scores depend on."""


@dataclass(frozen=True)
class SeriesScores:
    """Hourly scores of one series for consecutive days; work that all its pairs share.

    Attributes
    ----------
    first_day : int
        Number of the first day; row ``i`` belongs to day ``first_day + i``.
    midrank : ndarray of float64, shape (n_days, steps_per_day)
        Midrank in (0, 1) among the last 30 days; NaN without an observation or with too few to rank.
    normal_score : ndarray of float64, shape (n_days, steps_per_day)
        Normal quantile of the midrank, daily cycle kept.
    level : ndarray of float64, shape (n_days, steps_per_day)
        Normal score minus its trailing 28-day mean at that time of day.
    innovation : ndarray of float64, shape (n_days, steps_per_day)
        Whitened level in units of its trailing standard deviation, within ±3.5; NaN where the level is
        missing, where a gap is too wide to bridge, or where fewer than 14 days' worth of observations
        stand in the 90 days before.
    shape_sd, course_sd : ndarray of float64, shape (n_days,)
        Standard deviation of level and of normal score about their daily means over the 90 days before;
        NaN as above.
    """

    first_day: int
    midrank: Floats
    normal_score: Floats
    level: Floats
    innovation: Floats
    shape_sd: Floats
    course_sd: Floats

    @property
    def n_days(self) -> int:
        """How many days are scored."""
        return len(self.shape_sd)

    def rows(self, hourly: Floats, begin: int, end: int) -> Floats:
        """The rows of one of the arrays for days ``begin`` to ``end``; ValueError where they are not all there."""
        if begin < self.first_day or end > self.first_day + self.n_days:
            raise ValueError(
                f"known scores cover days {self.first_day}..{self.first_day + self.n_days - 1}; "
                f"days {begin}..{end - 1} are needed."
            )
        return hourly[begin - self.first_day : end - self.first_day]

    def since(self, day: int) -> SeriesScores:
        """The scores from a day on, days numbered as before."""
        begin = max(0, day - self.first_day)
        return self.part(begin, self.n_days, first_day=self.first_day + begin)

    def part(self, begin: int, end: int, *, first_day: int) -> SeriesScores:
        """Rows ``begin`` to ``end``, the first of them numbered ``first_day``."""
        arrays = (getattr(self, f.name)[begin:end] for f in fields(self) if f.name != "first_day")
        return SeriesScores(first_day, *arrays)

    def followed_by(self, later: SeriesScores) -> SeriesScores:
        """These days and the ones right after them."""
        if self.first_day + self.n_days != later.first_day:
            raise ValueError(
                f"days {later.first_day} on do not follow day {self.first_day + self.n_days - 1}; join neighbours only."
            )
        arrays = (
            np.concatenate((getattr(self, f.name), getattr(later, f.name)))
            for f in fields(self)
            if f.name != "first_day"
        )
        return SeriesScores(self.first_day, *arrays)


def series_scores(
    values: Floats,
    days: range | None = None,
    *,
    steps_per_day: int = 24,
    known: SeriesScores | None = None,
) -> SeriesScores:
    """Hourly scores of one series for a range of days.

    Parameters
    ----------
    values : ndarray of float64, shape (n_hours,)
        Observations on a regular grid that starts with a day; NaN marks an hour without one. A last day
        that is not complete is left out.
    days : range, optional
        Consecutive day numbers to score, 0 being the first day of ``values``; default all. Scores of day
        *d* use the readings of the ``SERIES_HISTORY_DAYS`` days that end with *d*, as far as they exist.
    steps_per_day : int
        Readings a day, 24 for hourly values.
    known : SeriesScores, optional
        Scores of the same readings that reach from ``SCORED_BEFORE_DAYS`` before ``days`` (or from day 0) to
        right before ``days`` or beyond. They save most of the work and change nothing.

    Raises
    ------
    ValueError
        When ``values`` is not one numeric series or holds an infinite value, ``days`` reaches beyond it, or
        ``known`` does not reach far enough.

    Notes
    -----
    Yule-Walker estimates from the pairs of readings that exist at each lag; forecast errors and their
    variances from the Kalman filter, see Jones (1980). An error after a gap is divided by the square root
    of its variance, and dropped where that variance is more than 2.5 times the usual one. Their scale comes from
    the levels that have two others right before them.

    References
    ----------
    R. H. Jones (1980), Technometrics 22, 389-395.

    Examples
    --------
    >>> scores = series_scores(np.random.default_rng(1).normal(size=24 * 40), range(39, 40))
    >>> scores.innovation.shape
    (1, 24)
    """
    values = as_series(values, "values")
    days = checked_days(days, len(values) // steps_per_day)
    first, last = days.start, days.stop
    fit_first = max(0, first - FIT_DAYS)
    cycle_first = max(0, first - SCORED_BEFORE_DAYS)
    rank_first, level_first = (cycle_first, fit_first) if known is None else (first, first)
    grid = values[: last * steps_per_day].reshape(last, steps_per_day)
    midrank = trailing_midranks(grid, rank_first, RANK_DAYS, MIN_RANKED_DAYS * steps_per_day)
    score = ndtri(np.clip(midrank, SCORE_TAIL, 1.0 - SCORE_TAIL))
    if known is not None:
        score = np.concatenate((known.rows(known.normal_score, cycle_first, first), score))
    level = remove_daily_cycle(score, level_first - cycle_first, CYCLE_DAYS)
    if known is not None:
        level = np.concatenate((known.rows(known.level, fit_first, first), level))
    least = MIN_FIT_DAYS * steps_per_day
    return SeriesScores(
        first,
        midrank[first - rank_first :],
        score[first - cycle_first :],
        level[first - fit_first :],
        whiten(level, first - fit_first, FIT_DAYS, least),
        within_day_sd(level, first - fit_first, FIT_DAYS, least),
        within_day_sd(score[fit_first - cycle_first :], first - fit_first, FIT_DAYS, least),
    )


def checked_days(days: range | None, n_days: int) -> range:
    """The range of days to score, default all of ``n_days``; ValueError where it is not among them."""
    if days is None:
        return range(n_days)
    if days.step != 1 or not 0 <= days.start <= days.stop <= n_days:
        raise ValueError(
            f"days={days} is not a run of consecutive days among the {n_days} complete days of the values; "
            f"choose range(first, last + 1) within range(0, {n_days})."
        )
    return days


@compiled
def sort_present(values: Floats, ordered: Floats) -> int:
    """Fill the values that are not NaN in ascending order, and return their number.

    By insertion: for the few values of a day that is as fast as any, and compiles at once.
    """
    n = 0
    for value in values:
        if np.isnan(value):
            continue
        at = n
        while at > 0 and ordered[at - 1] > value:
            ordered[at] = ordered[at - 1]
            at -= 1
        ordered[at] = value
        n += 1
    return n


@compiled
def first_at_least(ordered: Floats, value: float) -> int:
    """How many of the ascending values are smaller; np.searchsorted takes a second longer to compile."""
    low, high = 0, len(ordered)
    while low < high:
        middle = (low + high) // 2
        if ordered[middle] < value:
            low = middle + 1
        else:
            high = middle
    return low


@compiled
def trailing_midranks(grid: Floats, first: int, rank_days: int, min_ranked: int) -> Floats:
    """Midranks of each day's readings among the last ``rank_days`` days, for days ``first`` to the last.

    The sorted window moves by one day at a time: yesterday's window without the day that leaves, merged
    with the day that enters. Whole-number counts, hence exact.
    """
    n_days, steps = grid.shape
    out = np.full((n_days - first, steps), np.nan)
    window = np.empty((rank_days + 1) * steps)
    merged = np.empty((rank_days + 1) * steps)
    entering, leaving = np.empty(steps), np.empty(steps)
    count = 0
    for day in range(max(0, first - rank_days), n_days):
        n_entering = sort_present(grid[day], entering)
        gone = day - rank_days
        n_leaving = sort_present(grid[gone], leaving) if gone >= max(0, first - rank_days) else 0
        n = 0
        out_at = 0
        in_at = 0
        for i in range(count):
            value = window[i]
            if out_at < n_leaving and leaving[out_at] == value:
                out_at += 1
                continue
            while in_at < n_entering and entering[in_at] < value:
                merged[n] = entering[in_at]
                n += 1
                in_at += 1
            merged[n] = value
            n += 1
        while in_at < n_entering:
            merged[n] = entering[in_at]
            n += 1
            in_at += 1
        window, merged = merged, window
        count = n
        if day < first or count < min_ranked:
            continue
        ranked = window[:count]
        for t in range(steps):
            value = grid[day, t]
            if not np.isnan(value):
                less = first_at_least(ranked, value)
                not_more = less
                while not_more < count and ranked[not_more] == value:
                    not_more += 1
                out[day - first, t] = (less + 0.5 * (not_more - less)) / count
    return out


@compiled
def remove_daily_cycle(score: Floats, first: int, cycle_days: int) -> Floats:
    """Scores minus their trailing mean at that time of day, for rows ``first`` to the last."""
    n_days, steps = score.shape
    out = np.empty((n_days - first, steps))
    for day in range(first, n_days):
        for t in range(steps):
            total = 0.0
            count = 0
            for earlier in range(max(0, day - cycle_days + 1), day + 1):
                value = score[earlier, t]
                if not np.isnan(value):
                    total += value
                    count += 1
            out[day - first, t] = score[day, t] - total / count if count > 0 else np.nan
    return out


@compiled
def within_day_sd(values: Floats, first: int, fit_days: int, min_fit: int) -> Floats:
    """Standard deviation about daily means over the days before each of the rows ``first`` to the last."""
    n_days, steps = values.shape
    out = np.full(n_days - first, np.nan)
    within, rows = np.zeros(n_days), np.zeros(n_days)
    for day in range(n_days):
        total = 0.0
        for t in range(steps):
            if not np.isnan(values[day, t]):
                total += values[day, t]
                rows[day] += 1
        for t in range(steps):
            if not np.isnan(values[day, t]):
                within[day] += (values[day, t] - total / rows[day]) ** 2
    for day in range(first, n_days):
        count = 0.0
        squares = 0.0
        for earlier in range(max(0, day - fit_days), day):
            count += rows[earlier]
            squares += within[earlier]
        if count >= min_fit:
            out[day - first] = np.sqrt(squares / count)
    return out

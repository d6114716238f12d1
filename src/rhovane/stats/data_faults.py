"""What is wrong with the data of a series: gaps, stuck values, low coverage, dry gauges, raised ties.

Each function looks at hours (or days) in rows and series in columns, and finds stretches. What it finds about an
hour depends on a bounded stretch before it, so that a night that looks only at what is new finds what a night over
the whole history finds. Nothing depends on the unit of a series.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Rows = NDArray[np.int64]

CHANCE_OF_REPEATS = (
    1e-6  # a run that a series' usual share of repeated values makes likelier is no stuck value
)
USUAL_HOURS = 672  # hours before a run from which that share is taken
LONGEST_STUCK_HOURS = 336  # no series is required to repeat a value for longer
FEWEST_USUAL = 168  # pairs of successive observations that make a share
DRY_HOURS = 1440  # hours back in which a gauge's neighbours must have been wet: 60 days
WEEK_HOURS = 168
USUAL_WEEKS = 4  # weeks before that a week's ties are compared with
TIES_RAISED = 5.0  # times the ties of the weeks before ...
SMALLEST_TIES = 0.02  # ... and at least this probability that two values of a week are equal
FEWEST_IN_WEEK = 84  # observations


@dataclass(frozen=True)
class Runs:
    """Stretches of rows, one entry each, in order of series and row.

    ``begin`` and ``end`` are the first and the last row, both included; an ``end`` in the last row looked at may not
    be the end yet. ``measure`` is what the finding function says it is.
    """

    series: Rows
    begin: Rows
    end: Rows
    measure: Floats

    def where(self, keep: Bools) -> Runs:
        """Some of the runs."""
        return Runs(self.series[keep], self.begin[keep], self.end[keep], self.measure[keep])


def runs_of(condition: Bools) -> Runs:
    """Stretches of rows in which a condition (n_rows, n_series) holds; ``measure`` is their length."""
    edge = np.zeros((condition.shape[1], 1), dtype=np.int8)
    turned = np.diff(condition.T.astype(np.int8), axis=1, prepend=edge, append=edge)
    series, begin = np.nonzero(turned == 1)
    end = np.nonzero(turned == -1)[1] - 1
    return Runs(series, begin, end, (end - begin + 1).astype(float))


def gap_runs(observed: Bools, first_row: Rows, longest_hours: int) -> Runs:
    """Stretches of more than ``longest_hours`` without observation, after a series' first row.

    ``observed`` has shape (n_hours, n_series); ``first_row`` (n_series,) may be negative; ``measure`` is in hours.
    """
    known = np.arange(len(observed))[:, None] >= first_row
    gaps = runs_of(~observed & known)
    return gaps.where(gaps.measure > longest_hours)


def stuck_runs(values: Floats, accumulates: Bools, stuck_hours: int) -> Runs:
    """Stretches in which a series repeats one value for longer than its resolution explains.

    Parameters
    ----------
    values : ndarray of float64, shape (n_hours, n_series)
    accumulates : ndarray of bool, shape (n_series,)
        Series whose zeros mean that nothing fell; a run of zeros is not looked at there.
    stuck_hours : int
        Fewest hours. A series that often repeats its last value (whole numbers, calm nights) needs more: as many as it
        would repeat by chance once in a million, by its share of repeats in the 672 hours before, at most 336.

    Returns
    -------
    Runs
        ``measure`` is the value.
    """
    repeats = np.zeros(values.shape, dtype=bool)
    np.equal(values[1:], values[:-1], out=repeats[1:])
    repeats &= ~(accumulates & (values == 0))
    found = runs_of(repeats)
    found = found.where(found.measure >= stuck_hours - 1)
    begin = found.begin - 1  # the value itself, before its first repeat
    keep = np.zeros(len(begin), dtype=bool)
    for i, (row, column) in enumerate(zip(begin.tolist(), found.series.tolist(), strict=True)):
        usual = slice(max(0, row - USUAL_HOURS), row + 1)
        pairs = int(np.isfinite(values[usual, column][1:] - values[usual, column][:-1]).sum())
        share = float(repeats[usual, column][1:].sum()) / max(pairs, FEWEST_USUAL)
        needed = np.log(CHANCE_OF_REPEATS) / np.log(share) if 0 < share < 1 else 0.0
        keep[i] = found.measure[i] + 1 >= min(needed, LONGEST_STUCK_HOURS)
    return Runs(found.series, begin, found.end, values[found.end, found.series]).where(keep)


def low_coverage_runs(per_day: Rows, first_day: Rows, window_days: int, least: float) -> Runs:
    """Stretches of days whose trailing window has too small a share of observations.

    ``per_day`` (n_days, n_series) counts each day's observations; only windows that begin on or after a series' ``first_day``
    are judged. ``measure`` is the share in the window that ends with the first day of the run.
    """
    total = np.concatenate((np.zeros((1, per_day.shape[1]), dtype=np.int64), np.cumsum(per_day, axis=0)))
    share = np.full(per_day.shape, np.inf)
    if len(per_day) >= window_days:
        share[window_days - 1 :] = (total[window_days:] - total[:-window_days]) / (24 * window_days)
    judged = np.arange(len(per_day))[:, None] >= first_day + window_days - 1
    low = runs_of((share < least) & judged)
    return Runs(low.series, low.begin, low.end, share[low.begin, low.series])


def dry_runs(gauge: Floats, neighbours: Floats, wet_hours: int) -> Runs:
    """Stretches in which a gauge reads nothing but zeros while its neighbours are wet.

    Parameters
    ----------
    gauge : ndarray of float64, shape (n_hours,)
    neighbours : ndarray of float64, shape (n_hours, n_neighbours)
        Other gauges; an hour is wet when their median is above zero.
    wet_hours : int
        Hours with zero here and rain there, within 60 days and with no rain here in between, that make a run.

    Returns
    -------
    Runs
        From the first such hour until the last hour before the gauge is wet again; ``series`` is 0 and ``measure`` the
        neighbours' amount in the hours that made it a run.
    """
    if neighbours.shape[1] == 1:
        sums = neighbours[:, 0]
    else:
        sums = np.full(len(gauge), np.nan)
        some = np.isfinite(neighbours).any(axis=1)
        sums[some] = np.nanmedian(neighbours[some], axis=1)
    contrary = (gauge == 0) & (sums > 0)
    count = np.cumsum(contrary)
    last_wet = np.maximum.accumulate(np.where(gauge > 0, count, 0))
    long_ago = np.concatenate((np.zeros(min(DRY_HOURS, len(count)), dtype=np.int64), count[:-DRY_HOURS]))
    passed = np.maximum(last_wet, long_ago)  # contrary hours that do not count any more
    reached = count - passed >= wet_hours
    wet_again = np.cumsum(gauge > 0)
    begin, end, amount = [], [], []
    at = 0
    while (hits := np.flatnonzero(reached[at:])).size:
        made = at + int(hits[0])
        start = int(np.searchsorted(count, passed[made] + 1))
        later = np.flatnonzero(wet_again[made:] > wet_again[made])
        stop = made + int(later[0]) - 1 if later.size else len(gauge) - 1
        begin.append(start)
        end.append(stop)
        span = slice(start, made + 1)
        amount.append(float(sums[span][contrary[span]].sum()))
        at = stop + 1
    return Runs(
        np.zeros(len(begin), np.int64), np.array(begin, np.int64), np.array(end, np.int64), np.array(amount)
    )


def weekly_ties(values: Floats) -> Floats:
    """Probability that two observations of a week are equal, shape (n_weeks, n_series).

    ``values`` has shape (168 n_weeks, n_series). A value that repeats the hour before it in the week counts once, so that a stuck value
    is not taken for a coarser resolution. NaN with fewer than 84 observations.
    """
    by_week = values.reshape(-1, WEEK_HOURS, values.shape[1]).transpose(0, 2, 1)
    fresh = by_week.copy()
    fresh[:, :, 1:][by_week[:, :, 1:] == by_week[:, :, :-1]] = np.nan
    weeks = np.sort(fresh, axis=2)
    count = np.isfinite(weeks).sum(axis=2)
    same = weeks[:, :, 1:] == weeks[:, :, :-1]
    place = np.arange(1, WEEK_HOURS)
    group_start = np.maximum.accumulate(np.where(same, 0, place), axis=2)
    pairs = np.where(same, place - group_start, 0).sum(axis=2)  # each value with the equal ones before it
    enough = count >= FEWEST_IN_WEEK
    return np.where(enough, pairs / np.maximum(count * (count - 1) / 2, 1), np.nan)


def ties_raised(ties: Floats) -> tuple[Rows, Rows, Floats]:
    """Weeks in which ties begin to be much more frequent: week, series, and ties of the weeks before.

    A week counts when its ties (:func:`weekly_ties`) are 5 times the median of the four weeks before and at least 0.02,
    and no earlier one of those four did.
    """
    n_weeks, n_series = ties.shape
    before = np.full((n_weeks, n_series), np.nan)
    if n_weeks > USUAL_WEEKS:
        past = np.lib.stride_tricks.sliding_window_view(ties[:-1], USUAL_WEEKS, axis=0)
        in_order = np.sort(past, axis=2)
        whole = np.isfinite(in_order).all(axis=2)
        before[USUAL_WEEKS:] = np.where(whole, in_order[:, :, 1:3].mean(axis=2), np.nan)
    with np.errstate(invalid="ignore"):
        raised = (ties >= TIES_RAISED * before) & (ties >= SMALLEST_TIES)
    earlier = np.zeros_like(raised)
    for k in range(1, USUAL_WEEKS + 1):
        earlier[k:] |= raised[:-k]
    week, series = np.nonzero(raised & ~earlier)
    return week, series, before[week, series]

"""Taking the daily cycle out of a series, so that a shared cycle does not pass for a relationship.

Done on the score scale: a cycle that multiplies a skewed quantity becomes nearly additive there, and the
result depends on the order of the readings only.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri

from rhovane.stats.arguments import Floats, Integers, as_series, whole_number
from rhovane.stats.compiled import compiled
from rhovane.stats.rank_kernels import Ranks, dense_ranks

RANK_DAYS = 30  # days, the row itself included, among which it is ranked
MIN_RANKED_DAYS = 2  # days' worth of observations in them, below which there is no score
CYCLE_DAYS = 28  # days before the row whose mean at that hour stands for the cycle: four whole weeks
MIN_CYCLE_DAYS = 4  # days of the same kind among them with a score at that hour
SCORE_TAIL = 1e-4  # shares are kept this far from 0 and 1 before they become normal quantiles


def remove_cycle(
    x: ArrayLike, hour_of_day: ArrayLike, working_day: ArrayLike, *, steps_per_day: int = 24
) -> Floats:
    """Return normal scores of x less their usual value at that hour of such a day; uses nothing later than a row.

    Parameters
    ----------
    x : array-like of float, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one.
    hour_of_day : array-like of int, shape (n_rows,)
        Local hour (or other slot of the day), 0 or more; at clock changes one may repeat or be absent.
    working_day : array-like of bool, shape (n_rows,)
        Whether the row lies in a working day; both kinds of day have their own cycle.
    steps_per_day : int
        Rows a day, 1 to 1440.

    Returns
    -------
    ndarray of float64, shape (n_rows,)
        Standard-normal units. NaN where x is, where fewer than two days of observations lie in the last 30 days,
        and where fewer than four earlier days of that kind in the last 28 have a score at that hour.

    Raises
    ------
    ValueError
        Unequal lengths, infinite values, negative or fractional hours, ``steps_per_day`` out of range.

    Notes
    -----
    Score: the midrank among the rows of the last 30 days, itself included, as share (less + half of equal) and
    then normal quantile. Cycle: mean score over the last 28 days, the row's own day not included. Give 58 days
    before the rows that matter.
    """
    values = as_series(x, "x")
    per_day = checked_steps_per_day(steps_per_day)
    slots = _slots(hour_of_day, working_day, len(values))
    score = trailing_scores(values, per_day)
    usual = np.full(len(values), np.nan)
    _trailing_slot_mean(score, slots, CYCLE_DAYS * per_day, MIN_CYCLE_DAYS, usual)
    detrended: Floats = score - usual
    return detrended


def checked_steps_per_day(steps_per_day: int) -> int:
    """Return the rows a day, 1 to 1440."""
    per_day = whole_number(steps_per_day, "steps_per_day")
    if not 1 <= per_day <= 1440:
        raise ValueError(f"steps_per_day={per_day} is out of range; choose from 1 to 1440.")
    return per_day


def trailing_scores(values: Floats, steps_per_day: int) -> Floats:
    """Return normal scores of each row among the last 30 days, itself included; NaN with under two days of values."""
    ranks, _ = dense_ranks(values)
    share = np.full(len(values), np.nan)
    fill_trailing_share(ranks, RANK_DAYS * steps_per_day, MIN_RANKED_DAYS * steps_per_day, share)
    score: Floats = ndtri(np.clip(share, SCORE_TAIL, 1.0 - SCORE_TAIL))
    return score


def _slots(hour_of_day: ArrayLike, working_day: ArrayLike, n_rows: int) -> Integers:
    """Return one number for each hour of each kind of day."""
    hours, working = np.asarray(hour_of_day), np.asarray(working_day)
    for name, found in (("hour_of_day", hours), ("working_day", working)):
        if found.shape != (n_rows,):
            raise ValueError(
                f"{name} has shape {found.shape}; ({n_rows},) is allowed; give one entry a row of x."
            )
    if hours.dtype.kind not in "iu" or (n_rows and hours.min() < 0):
        raise ValueError(f"hour_of_day has type {hours.dtype}; whole numbers from 0 up are allowed.")
    if working.dtype.kind != "b":
        raise ValueError(f"working_day has type {working.dtype}; bool is allowed; compare or convert first.")
    slots: Integers = 2 * hours.astype(np.int64) + working
    return slots


@compiled
def fill_trailing_share(ranks: Ranks, rows: int, fewest: int, share: Floats) -> None:
    """Fill (number below + half the equal) / number over the last ``rows`` rows, each row itself included."""
    for t in range(len(ranks)):
        here = ranks[t]
        if here < 0:
            continue
        past = ranks[max(0, t - rows + 1) : t + 1]
        # Twice the number below plus the number equal.
        doubled = np.int32(0)
        count = np.int32(0)
        for i in range(len(past)):
            doubled += np.int32((past[i] >= 0) & (past[i] < here)) + np.int32(
                (past[i] >= 0) & (past[i] <= here)
            )
            count += np.int32(past[i] >= 0)
        if count >= fewest:
            share[t] = doubled / (2.0 * count)


@compiled
def _trailing_slot_mean(
    score: Floats, slots: NDArray[np.int64], rows: int, fewest: int, mean: Floats
) -> None:
    """Fill the mean score over earlier rows of the same slot, at most ``rows`` back."""
    n = len(score)
    if n == 0:
        return
    last = np.full(slots.max() + 1, -1, np.int64)
    previous = np.full(n, -1, np.int64)
    for t in range(n):
        slot = slots[t]
        total = 0.0
        count = 0
        s = last[slot]
        while s >= 0 and s >= t - rows:
            total += score[s]
            count += 1
            s = previous[s]
        if count >= fewest:
            mean[t] = total / count
        if score[t] == score[t]:
            previous[t] = last[slot]
            last[slot] = t

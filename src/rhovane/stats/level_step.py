"""Sudden steps in the level of a series: a unit switch, a shifted zero, a swapped or failing instrument.

A step is judged on daily medians, against the series' own day-to-day variation and against its neighbours
of the same quantity: what the weather does to all of them together is no step of one.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

BEFORE_DAYS = 28  # days before a step that its level is compared with: four whole weeks
AFTER_DAYS = 7  # days from a step on, its own day included: one whole week
APART_DAYS = 6  # of several candidates this near each other the strongest is the step
FEWEST_BEFORE, FEWEST_AFTER = 14, 5  # days with a level on either side
FEWEST_HOURS = 12  # observations of a day whose median is a level
STRENGTH = 2.5  # step over the spread of the days within both sides
STRENGTH_ALONE = 6.0  # the same for a series without neighbours, which the weather moves alone
SEPARATION = 0.985  # share of (before, after) day pairs in the order of the step
SMALLEST_FACTOR = 1.2
OWN_SHARE = 0.5  # of the step against neighbours that the series itself must have made
SMALLEST_LEVEL = 0.05  # of the level before; lower levels count as this, so that a zero has a logarithm
LOOKBACK_DAYS = BEFORE_DAYS + AFTER_DAYS + 2 * APART_DAYS  # a day's steps depend on no earlier day
CHUNK_DAYS = 64  # candidate days judged at once: bounds the memory


@dataclass(frozen=True)
class LevelSteps:
    """Steps found, one entry each, in order of day and series.

    Attributes
    ----------
    day, series : ndarray of int64
        Row and column of ``levels`` at which the new level begins.
    size : ndarray of float64
        Step relative to neighbours: logarithm of the factor where ``ratio``, else in the series' unit.
    error : ndarray of float64
        Standard error of ``size``.
    strength : ndarray of float64
        ``size`` over the spread of the days within both sides.
    """

    day: NDArray[np.int64]
    series: NDArray[np.int64]
    size: Floats
    error: Floats
    strength: Floats


def daily_levels(values: Floats) -> Floats:
    """Median of every day's observations, shape (n_days, n_series); NaN with fewer than 12 hours.

    ``values`` has shape (24 n_days, n_series), NaN where there is no observation.
    """
    n_days = len(values) // 24
    hours = np.sort(values.reshape(n_days, 24, -1).transpose(0, 2, 1), axis=2)
    return _median_of_sorted(hours, FEWEST_HOURS)


def level_steps(
    levels: Floats,
    groups: Sequence[Sequence[int]],
    ratio: Sequence[bool],
    *,
    strength: float = STRENGTH,
    first: int = 0,
) -> LevelSteps:
    """Steps in the level of single series.

    Parameters
    ----------
    levels : ndarray of float64, shape (n_days, n_series)
        Daily levels, NaN for a day without one.
    groups : sequence of sequences of int
        Series of one quantity; each series in at most one group, series in none are not judged.
    ratio : sequence of bool, shape (n_series,)
        Whether a series is compared by ratios (concentrations, counts) or by differences (temperatures).
    strength : float
        Least step over the spread of the days within both sides.
    first : int
        First day looked at; a step on day *d* uses the days from ``d - LOOKBACK_DAYS`` on.

    Returns
    -------
    LevelSteps
        A step on day *d* is known at the end of day ``d + AFTER_DAYS - 1`` and may be moved by at most
        ``APART_DAYS`` days by what comes later.

    Notes
    -----
    Every series is centred on its median of the 28 days before; what is judged is the difference from the median
    of its neighbours so centred (a difference in differences). A step needs (i) ``strength`` times the spread of
    the days on both sides, (ii) nearly all pairs of a day before and a day after in its order (the
    probability of Mann & Whitney 1947), (iii) a factor of 1.2 or, for differences, nothing more, and (iv) that at
    least half of it is the series' own. A series without a neighbour that can be compared needs 6 times the spread.
    """
    n_days, n_series = levels.shape
    is_ratio = np.asarray(ratio, dtype=bool)
    size, error, power = (np.full(levels.shape, np.nan) for _ in range(3))
    begin = max(first - APART_DAYS, FEWEST_BEFORE)
    for start in range(begin, n_days - FEWEST_AFTER + 1, CHUNK_DAYS):
        days = np.arange(start, min(start + CHUNK_DAYS, n_days - AFTER_DAYS + 1))
        if len(days):
            for group in groups:
                columns = np.asarray(group)
                found = _judge(levels[:, columns], days, is_ratio[columns], strength)
                for whole, part in zip((size, error, power), found, strict=True):
                    whole[days[0] : days[-1] + 1, columns] = part
    strongest = _strongest_nearby(np.nan_to_num(np.abs(power)))
    day, series = np.nonzero(strongest)
    keep = day >= first
    day, series = day[keep], series[keep]
    return LevelSteps(day, series, size[day, series], error[day, series], power[day, series])


def _judge(
    levels: Floats, days: NDArray[np.int64], ratio: NDArray[np.bool_], strength: float
) -> tuple[Floats, Floats, Floats]:
    """Size, error and strength of the step on each of ``days`` for each series; NaN where there is none."""
    rows = days[:, None] + np.arange(-BEFORE_DAYS, AFTER_DAYS)
    block = np.where((rows >= 0)[:, :, None], levels[np.maximum(rows, 0)], np.nan)
    middle = _median(block[:, :BEFORE_DAYS], FEWEST_BEFORE)[:, None, :]
    with np.errstate(invalid="ignore", divide="ignore"):
        logs = np.log(np.maximum(block, SMALLEST_LEVEL * middle) / middle)
        centred = np.where(ratio, np.where(middle > 0, logs, np.nan), block - middle)
    others = _median_of_others(centred)
    alone = ~np.isfinite(others).any(axis=1)
    against = np.where(alone[:, None, :], centred, centred - others)
    before, after = against[:, :BEFORE_DAYS], against[:, BEFORE_DAYS:]
    mid_before, mid_after = _median(before, FEWEST_BEFORE), _median(after, FEWEST_AFTER)
    size = mid_after - mid_before
    own = _median(centred[:, BEFORE_DAYS:], FEWEST_AFTER)
    spread, error = _spread_and_error(before, after)
    with np.errstate(invalid="ignore", divide="ignore"):
        power = size / spread
        least = np.where(alone, max(strength, STRENGTH_ALONE), strength)
        found = (np.abs(power) >= least) & (own * np.sign(size) >= OWN_SHARE * np.abs(size))
        found &= ~ratio | (np.abs(size) >= np.log(SMALLEST_FACTOR))
    at, column = np.nonzero(found)
    order = _order(before[at, :, column], after[at, :, column])
    found[at, column] = np.maximum(order, 1 - order) >= SEPARATION
    return tuple(np.where(found, table, np.nan) for table in (size, error, power))  # type: ignore[return-value]


def _median_of_others(values: Floats) -> Floats:
    """For each entry of the last axis the median of the other entries; NaN without any."""
    order = np.argsort(values, axis=2)  # NaN last
    rank = np.empty_like(order)
    np.put_along_axis(rank, order, np.broadcast_to(np.arange(values.shape[2]), values.shape), axis=2)
    in_order = np.take_along_axis(values, order, axis=2)
    n_others = np.isfinite(values).sum(axis=2, keepdims=True) - np.isfinite(values)
    lower, upper = np.maximum(n_others - 1, 0) // 2, n_others // 2
    last = values.shape[2] - 1
    low = np.take_along_axis(in_order, np.minimum(lower + (lower >= rank), last), axis=2)
    high = np.take_along_axis(in_order, np.minimum(upper + (upper >= rank), last), axis=2)
    return np.where(n_others > 0, (low + high) / 2, np.nan)


def _median(values: Floats, fewest: int) -> Floats:
    """Median along axis 1 of what is there; NaN with fewer than ``fewest`` values."""
    return _median_of_sorted(np.sort(values, axis=1).swapaxes(1, -1), fewest)


def _median_of_sorted(in_order: Floats, fewest: int) -> Floats:
    """Median along the last axis, sorted with NaN last."""
    count = np.isfinite(in_order).sum(axis=-1, keepdims=True)
    low = np.take_along_axis(in_order, np.maximum(count - 1, 0) // 2, axis=-1)
    high = np.take_along_axis(in_order, np.minimum(count // 2, in_order.shape[-1] - 1), axis=-1)
    return np.where(count >= fewest, (low + high) / 2, np.nan)[..., 0]


def _spread_and_error(before: Floats, after: Floats) -> tuple[Floats, Floats]:
    """Pooled standard deviation within both sides, and the standard error of the difference of their medians."""
    squares, counts = 0.0, []
    for side in (before, after):
        known = np.isfinite(side)
        count = known.sum(axis=1)
        filled = np.where(known, side, 0.0)
        mean = filled.sum(axis=1) / np.maximum(count, 1)
        squares = squares + np.where(known, (side - mean[:, None, :]) ** 2, 0.0).sum(axis=1)
        counts.append(count)
    spread = np.sqrt(squares / np.maximum(counts[0] + counts[1] - 2, 1))
    inverse = 1 / np.maximum(counts[0], 1) + 1 / np.maximum(counts[1], 1)
    return spread, spread * np.sqrt(MEDIAN_VARIANCE * inverse)


MEDIAN_VARIANCE = np.pi / 2  # variance of a median over that of a mean, normal days


def _order(before: Floats, after: Floats) -> Floats:
    """Share of pairs of a day before and a day after with the later one larger, ties half; shape (n,)."""
    a, b = after[:, :, None], before[:, None, :]
    pairs = np.isfinite(a) & np.isfinite(b)
    larger = (pairs & (a > b)).sum(axis=(1, 2)) + 0.5 * (pairs & (a == b)).sum(axis=(1, 2))
    share: Floats = larger / np.maximum(pairs.sum(axis=(1, 2)), 1)
    return share


def _strongest_nearby(power: Floats) -> NDArray[np.bool_]:
    """Where an entry above zero is the largest within ``APART_DAYS`` rows; of equals the earliest."""
    edge = np.zeros((APART_DAYS, power.shape[1]))
    padded = np.concatenate((edge, power, edge))
    shifted = np.lib.stride_tricks.sliding_window_view(padded, 2 * APART_DAYS + 1, axis=0)
    earlier = shifted[:, :, :APART_DAYS].max(axis=2)
    later = shifted[:, :, APART_DAYS + 1 :].max(axis=2)
    strongest: NDArray[np.bool_] = (power > 0) & (power > earlier) & (power >= later)
    return strongest

"""Signs in fresh readings that a feed is not what it is declared to be: arrays in, findings with numbers out.

Each is a screen for a person to look at, with fixed and documented bounds; none is a test with an error rate.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.arguments import Floats

FLAT_HOURS = (
    24  # equal values in a row that call for a look; a day, as hourly means never stand still so long
)
EQUAL_SHARE = 0.98  # of the joint hours in which two series must be equal to count as one feed
LEAST_JOINT = 48  # joint hours below which two series are not compared
LEAST_DISTINCT = 6  # distinct values below which equality says nothing
FAR_OUT = 3.0  # spans of the others, by which a repeated value must stand apart to be no reading
SLIP_MARGIN = 0.15  # in rank correlation, by which the other lag must win in the block and lose before it
LEAST_RELATION = 0.3  # rank correlation that a neighbour must reach for a lag to mean anything
LEAST_DAYS = 5  # days with a ratio, in the block and before it
SHIFT_IN_ERRORS = 6.0  # standard errors of its daily medians by which a ratio must have moved
SAME_FACTOR = 0.04  # relative distance at which a factor counts as a known one


@dataclass(frozen=True)
class Flat:
    """A run of equal values: first row, length in rows, and the value."""

    first: int
    n_rows: int
    value: float


@dataclass(frozen=True)
class Slip:
    """The lag at which a relation was strongest before and is now, in rows, with both correlations now."""

    lag_before: int
    lag_now: int
    rho_now: float
    rho_now_at_old_lag: float


@dataclass(frozen=True)
class Shift:
    """The factor by which the ratio of two series moved, and how many of its standard errors that is."""

    factor: float
    errors: float


def repeated_outliers(values: Floats) -> list[tuple[float, int]]:
    """Values far outside the others that come again and again, with their counts, commonest first.

    Parameters
    ----------
    values : ndarray of float64, shape (n,)
        NaN marks a missing reading.

    Notes
    -----
    A value counts when it comes three times or more and lies ``FAR_OUT`` spans away from every other value; or
    is written with nines only (-99, -999.9, 9999), comes twice, and lies one span away. The span is that from the
    0.5th to the 99.5th percentile of the values that do not stand apart.
    """
    known = values[np.isfinite(values)]
    distinct, counts = np.unique(known, return_counts=True)
    if len(distinct) <= LEAST_DISTINCT:
        return []
    gap = np.diff(distinct)
    below, above = np.append(np.inf, gap), np.append(gap, np.inf)
    alone = np.minimum(below, above)
    found: list[tuple[float, int]] = []
    # A code stands apart: nothing nearer to its neighbour than a tenth of the middle half can be one.
    lower, upper = np.percentile(known, [25, 75])
    candidate = (counts >= 2) & (alone > 0.1 * (upper - lower))
    others = known[~np.isin(known, distinct[candidate])]
    if len(others) <= LEAST_DISTINCT:
        return []
    low, high = np.percentile(others, [0.5, 99.5])
    for i in np.flatnonzero(candidate).tolist():
        value = float(distinct[i])
        far = 1.0 if _nines(value) else FAR_OUT
        if (counts[i] >= 3 or _nines(value)) and alone[i] > far * max(high - low, 1e-9):
            found.append((value, int(counts[i])))
    return sorted(found, key=lambda one: -one[1])


def _nines(value: float) -> bool:
    digits = f"{abs(value):.10g}".replace(".", "")
    return len(digits) >= (2 if value < 0 else 3) and set(digits) == {"9"}


def longest_flat(values: Floats) -> Flat | None:
    """The longest run of equal values other than zero, if it has ``FLAT_HOURS`` rows; NaN ends a run."""
    if not len(values):
        return None
    begins = np.flatnonzero(np.concatenate(([True], ~(values[1:] == values[:-1]))))
    lengths = np.diff(np.append(begins, len(values)))
    lengths[(values[begins] == 0) | ~np.isfinite(values[begins])] = 0
    at = int(np.argmax(lengths))
    if lengths[at] < FLAT_HOURS:
        return None
    return Flat(int(begins[at]), int(lengths[at]), float(values[begins[at]]))


def equal_hours(x: Floats, y: Floats) -> tuple[int, int] | None:
    """Joint rows and equal rows of two series that look like one feed delivered twice; None for others."""
    joint = np.isfinite(x) & np.isfinite(y)
    n = int(joint.sum())
    if n < LEAST_JOINT:
        return None
    equal = int((x[joint] == y[joint]).sum())
    if equal < EQUAL_SHARE * n or len(np.unique(x[joint])) < LEAST_DISTINCT:
        return None
    return n, equal


def slipped(block: tuple[Floats, Floats], before: tuple[Floats, Floats], *, max_lag: int = 3) -> Slip | None:
    """Whether the lag between two series is another one in a block than before it.

    Parameters
    ----------
    block, before : pairs of ndarray of float64
        The two series in the block, and in the stretch before it; NaN marks a missing reading.
    max_lag : int
        Rows; lags from ``-max_lag`` to ``max_lag`` are looked at. Positive: the first series leads.

    Notes
    -----
    Rank correlations of hour-to-hour changes, which see a lag more sharply than levels do.
    """
    lags = range(-max_lag, max_lag + 1)
    now = _by_lag(*block, lags)
    then = _by_lag(*before, lags)
    if now is None or then is None:
        return None
    new, old = int(np.argmax(now)), int(np.argmax(then))
    clear = now[new] - now[old] >= SLIP_MARGIN and then[old] - then[new] >= SLIP_MARGIN
    if new == old or not clear or min(now[new], then[old]) < LEAST_RELATION:
        return None
    return Slip(lags[old], lags[new], float(now[new]), float(now[old]))


def _by_lag(x: Floats, y: Floats, lags: range) -> Floats | None:
    dx, dy = np.diff(x), np.diff(y)
    found = np.empty(len(lags))
    for i, lag in enumerate(lags):
        a = dx[max(0, -lag) : len(dx) - max(0, lag)]
        b = dy[max(0, lag) : len(dy) - max(0, -lag)]
        both = np.isfinite(a) & np.isfinite(b)
        if both.sum() < LEAST_JOINT:
            return None
        ranks_a, ranks_b = _centred_ranks(a[both]), _centred_ranks(b[both])
        spread = float(np.sqrt((ranks_a @ ranks_a) * (ranks_b @ ranks_b)))
        if spread == 0:
            return None
        found[i] = float(ranks_a @ ranks_b) / spread
    return found


def _centred_ranks(values: Floats) -> Floats:
    _, index, counts = np.unique(values, return_inverse=True, return_counts=True)
    midrank = np.cumsum(counts) - (counts - 1) / 2
    ranks: Floats = midrank[index] - (len(values) + 1) / 2
    return ranks


def shifted_ratio(
    block: tuple[Floats, Floats], before: tuple[Floats, Floats], *, rows_per_day: int = 24
) -> Shift | None:
    """The factor by which the ratio of two positive series moved from before a block to the block.

    Parameters
    ----------
    block, before : pairs of ndarray of float64
        The two series; rows where either is not above zero are left out.
    rows_per_day : int
        Rows that make a day.

    Returns
    -------
    Shift or None
        None where it moved by less than ``SHIFT_IN_ERRORS`` standard errors, or there are too few days.

    Notes
    -----
    The logarithm of the ratio, by its daily medians; the error from their spread around the median of each part
    (1.4826 times the median absolute deviation).
    """
    now, then = _daily_log_ratio(*block, rows_per_day), _daily_log_ratio(*before, rows_per_day)
    if min(len(now), len(then)) < LEAST_DAYS:
        return None
    moved = float(np.median(now) - np.median(then))
    rest = np.concatenate((now - np.median(now), then - np.median(then)))
    spread = max(1.4826 * float(np.median(np.abs(rest))), 1e-3)
    # The median of n days has about 1.25 times the error of their mean.
    errors = abs(moved) / (1.2533 * spread * np.sqrt(1 / len(now) + 1 / len(then)))
    return Shift(float(np.exp(moved)), float(errors)) if errors >= SHIFT_IN_ERRORS else None


def _daily_log_ratio(x: Floats, y: Floats, rows_per_day: int) -> Floats:
    usable = (x > 0) & (y > 0)
    ratio = np.full(len(x), np.nan)
    ratio[usable] = np.log(x[usable] / y[usable])
    days = len(ratio) // rows_per_day
    by_day = ratio[: days * rows_per_day].reshape(days, rows_per_day)
    enough = np.isfinite(by_day).sum(axis=1) >= rows_per_day // 2
    medians: Floats = np.nanmedian(by_day[enough], axis=1) if enough.any() else np.empty(0)
    return medians


def nearest_factor(factor: float, known: Sequence[float]) -> int | None:
    """Position of the known factor that a factor, or its reciprocal, agrees with; None for none."""
    apart: NDArray[np.float64] = np.abs(np.abs(np.log(factor)) - np.log(np.asarray(known, dtype=float)))
    at = int(np.argmin(apart))
    return at if apart[at] <= np.log1p(SAME_FACTOR) else None

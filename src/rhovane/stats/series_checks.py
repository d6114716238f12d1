"""Quality checks of one series, hour by hour: each returns a flag for every hour and alters no value.

The checks and the alphabet of flags are those of the QARTOD manuals: 1 pass, 2 not evaluated, 3 suspect, 4 fail,
9 missing. A check looks back over a bounded stretch and never ahead of the day it judges, so that flags do not
change when later readings arrive. Limits are in the unit of the series; NaN or None switches a limit off.

References
----------
U.S. Integrated Ocean Observing System (2020), Manual for Real-Time Oceanographic Data Quality Control Flags;
the tests named gap, gross range, spike, rate of change, flat line, climatology and neighbour (attenuation and
location tests are left out).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Flags = NDArray[np.int8]

PASS, NOT_EVALUATED, SUSPECT, FAIL, MISSING = 1, 2, 3, 4, 9
DAY_HOURS = 24
CLIMATOLOGY_DAYS = (
    60  # days before, from which the range of an hour of the day is taken: it moves with the season
)
FEWEST_DAYS = 20  # observations of the same hour of the day that make a range
NEIGHBOUR_HOURS = 672  # hours before, from which the usual difference from a neighbour is taken
FEWEST_DIFFERENCES = 168
MAD_TO_SD = 1.4826  # standard deviation over median absolute deviation, normal data
LOOKBACK_HOURS = CLIMATOLOGY_DAYS * DAY_HOURS  # the longest stretch any check looks back

_SEVERITY = np.zeros(10, dtype=np.int8)
_SEVERITY[[PASS, NOT_EVALUATED, SUSPECT, FAIL, MISSING]] = [1, 0, 2, 3, 4]


def gap_check(values: Floats, *, longest_hours: float) -> Flags:
    """9 for an hour without observation, 4 once that has lasted more than ``longest_hours``, else 1."""
    missing = ~np.isfinite(values)
    row = np.arange(len(values))
    since = row - np.maximum.accumulate(np.where(missing, -1, row))
    flags = np.where(missing, MISSING, PASS).astype(np.int8)
    flags[missing & (since > longest_hours)] = FAIL
    return flags


def gross_range_check(
    values: Floats,
    *,
    low: float = np.nan,
    high: float = np.nan,
    suspect_low: float = np.nan,
    suspect_high: float = np.nan,
) -> Flags:
    """4 outside ``low`` to ``high`` (what the instrument can say), 3 outside the suspect range, else 1."""
    suspect = (values < suspect_low) | (values > suspect_high)
    return _judged(values, suspect, (values < low) | (values > high))


def rate_of_change_check(values: Floats, *, suspect: float = np.nan, fail: float = np.nan) -> Flags:
    """Flags by the absolute change from the hour before; 2 where that hour is missing."""
    change = np.full(len(values), np.nan)
    change[1:] = np.abs(np.diff(values))
    return _judged(values, change > suspect, change > fail, known=np.isfinite(change))


def spike_check(values: Floats, *, suspect: float = np.nan, fail: float = np.nan) -> Flags:
    """Flags by the distance from the mean of the hours before and after; 2 where either is missing.

    ``values`` begins with a day. The last hour of a day is not evaluated: the night that judges the day does not
    know the hour after it, and a later night must find the same.
    """
    distance = np.full(len(values), np.nan)
    distance[1:-1] = np.abs(values[1:-1] - (values[:-2] + values[2:]) / 2)
    distance[DAY_HOURS - 1 :: DAY_HOURS] = np.nan
    return _judged(values, distance > suspect, distance > fail, known=np.isfinite(distance))


def flat_line_check(
    values: Floats, *, suspect_hours: float = np.nan, fail_hours: float = np.nan, resolution: float = 0.0
) -> Flags:
    """Flags by how many hours up to this one stayed within ``resolution`` of it, this one included.

    The first hours of a flat stretch pass: when they were judged nothing was wrong yet.
    """
    length = np.zeros(len(values), dtype=np.int64)
    longest = int(np.nanmax([suspect_hours, fail_hours, 1.0]))
    same = np.isfinite(values)
    for back in range(longest + 1):
        shifted = np.full(len(values), np.nan)
        shifted[back:] = values[: len(values) - back]
        same &= np.abs(shifted - values) <= resolution
        length += same
    return _judged(values, length > suspect_hours, length > fail_hours)


def climatology_check(values: Floats, *, suspect: float = np.nan, fail: float = np.nan) -> Flags:
    """Flags by the distance from the usual value of the hour of the day, in robust standard deviations.

    The usual value and its spread are median and median absolute deviation of the same hour of the 60 days before;
    2 with fewer than 20 of them, or where they do not vary. ``values`` begins with a day and holds whole days.
    """
    by_hour = values.reshape(-1, DAY_HOURS)
    distance = np.full(by_hour.shape, np.nan)
    for day in range(FEWEST_DAYS, len(by_hour)):
        past = by_hour[max(0, day - CLIMATOLOGY_DAYS) : day]
        distance[day] = _robust_distance(by_hour[day], past, FEWEST_DAYS)
    flat = distance.ravel()
    return _judged(values, flat > suspect, flat > fail, known=np.isfinite(flat))


def neighbour_check(
    values: Floats, neighbour: Floats, *, suspect: float = np.nan, fail: float = np.nan
) -> Flags:
    """Flags by how unusual the difference from another series of the same quantity is.

    In robust standard deviations of that difference over the 28 days before the day; 2 with fewer than 168 hours of
    both, or where the neighbour is missing. ``values`` begins with a day and holds whole days.
    """
    difference = values - neighbour
    distance = np.full(len(values), np.nan)
    for start in range(DAY_HOURS, len(values), DAY_HOURS):
        past = difference[max(0, start - NEIGHBOUR_HOURS) : start, None]
        today = difference[start : start + DAY_HOURS]
        distance[start : start + DAY_HOURS] = _robust_distance(today, past, FEWEST_DIFFERENCES)
    return _judged(values, distance > suspect, distance > fail, known=np.isfinite(distance))


def worse_flag(one: Flags, other: Flags) -> Flags:
    """The worse of two flags, hour by hour: 9, then 4, 3, 1; 2 (not evaluated) only where neither says more."""
    worse: Flags = np.where(_SEVERITY[other] > _SEVERITY[one], other, one).astype(np.int8)
    return worse


def _judged(
    values: Floats,
    suspect: NDArray[np.bool_],
    fail: NDArray[np.bool_],
    known: NDArray[np.bool_] | None = None,
) -> Flags:
    flags = np.full(len(values), PASS, dtype=np.int8)
    if known is not None:
        flags[~known] = NOT_EVALUATED
    flags[suspect] = SUSPECT
    flags[fail] = FAIL
    flags[~np.isfinite(values)] = MISSING
    return flags


def _robust_distance(today: Floats, past: Floats, fewest: int) -> Floats:
    """Distance of values from the median of their column of ``past``, in robust standard deviations."""
    count = np.isfinite(past).sum(axis=0)
    enough = count >= fewest
    middle, spread = np.full(past.shape[1], np.nan), np.full(past.shape[1], np.nan)
    if enough.any():
        middle[enough] = np.nanmedian(past[:, enough], axis=0)
        spread[enough] = MAD_TO_SD * np.nanmedian(np.abs(past[:, enough] - middle[enough]), axis=0)
    spread[spread == 0] = np.nan
    distance: Floats = np.abs(today - middle) / spread
    return distance

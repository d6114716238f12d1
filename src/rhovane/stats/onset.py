"""When a change began: the days that could be its first, and how sure that is."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.incident import LONGEST_ONSET_DAYS

Floats = NDArray[np.float64]

SHARE = 0.9
"""Probability that the range of days holds."""


def onset_probability(z: Floats, day: int, first: int) -> Floats:
    """Probability of each day of having been the first of a shift that lasts to ``day``.

    Parameters
    ----------
    z : ndarray of float64, shape (n_days,)
        Standardised daily deviations, NaN where not judged.
    day, first : int
        The day seen from, and the first day judged; at most 42 days back are considered.

    Returns
    -------
    ndarray of float64, shape (n,)
        Adds up to 1; the last entry belongs to ``day``, the first to the earliest day considered. A day without a
        deviation is as likely as the next one that has one.

    Notes
    -----
    Deviations are taken as independent and standard normal before the onset, and shifted by an unknown constant
    from it on. With a flat prior over the days and the likeliest shift for each, a day's weight is exp(S²/2k): S
    the sum of the k deviations from it on. Its largest entry is at :func:`rhovane.stats.incident.onset_day`.
    References: Hinkley (1970), Biometrika 57, 1-17 (inference about a change point; cited from memory).
    """
    begin = max(first, day - LONGEST_ONSET_DAYS + 1)
    recent = z[begin : day + 1][::-1]
    known = np.isfinite(recent)
    total, count = np.cumsum(np.where(known, recent, 0.0)), np.cumsum(known)
    weight = np.where(count > 0, total**2 / (2.0 * np.maximum(count, 1)), 0.0)[::-1]
    weight = np.exp(weight - weight.max())
    return np.asarray(weight / weight.sum(), dtype=np.float64)


def onset_range(z: Floats, day: int, first: int, share: float = SHARE) -> tuple[int, int]:
    """First and last day of the shortest run of days that holds the onset with probability ``share``.

    Arguments as for :func:`onset_probability`; of several shortest runs the likeliest.
    """
    probability = onset_probability(z, day, first)
    n = len(probability)
    upto = np.concatenate(([0.0], np.cumsum(probability)))
    for length in range(1, n + 1):
        held = upto[length:] - upto[:-length]
        if held.max() >= share - 1e-12:
            begin = day - n + 1 + int(held.argmax())
            return begin, begin + length - 1
    return day - n + 1, day

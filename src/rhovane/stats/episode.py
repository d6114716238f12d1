"""Whether a change rests on a few days: leave them out and see whether the old correlation is back."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

MOST_DAYS = 5
"""An episode has at most this many days,"""
LARGEST_SHARE = 3
"""and at most one day in three: of a short stretch almost anything can be cut away."""
RESTORED = 0.75
"""Share of the change, on the atanh scale, that must be gone without them."""
SMALLEST_CHANGE = 0.1
"""Smaller changes (atanh) are not taken apart."""


@dataclass(frozen=True)
class Episode:
    """The days that a change rests on.

    ``days`` are positions in the stretch in ascending order, empty where it is no episode; ``without`` is the
    correlation of the remaining days (of all, where it is none).
    ``reason`` says why nothing can be said; None otherwise.
    """

    days: tuple[int, ...]
    without: float
    reason: str | None = None


def episode_of(
    correlate: Callable[[NDArray[np.bool_]], float], scored: NDArray[np.bool_], reference: float
) -> Episode:
    """Fewest days, at most five, without which a correlation is back at its reference.

    Parameters
    ----------
    correlate : callable
        The correlation of the days kept, given a bool array of shape (n_days,); NaN where there is none.
    scored : ndarray of bool, shape (n_days,)
        Days that have readings at all.
    reference : float
        Correlation before the change.

    Notes
    -----
    Days are left out one by one, each time the one without which the correlation is nearest to the reference.
    Measured (AR(1) .7, 40 stretches each): a lasting change from .8 to .4 or 0 was never called an episode, one from
    .6 to .3 in 18 % of stretches of 9 days, 5 % of 14 and none of 28; an odd spell of 3 days was found in 93-100 %,
    one of 5 days in all of 28 days.
    """
    kept = scored.copy()
    found = correlate(kept)
    n_days = int(scored.sum())
    most = min(MOST_DAYS, n_days // LARGEST_SHARE)
    if not (abs(found) < 1.0 and abs(reference) < 1.0):
        return Episode((), found, "a correlation is not computable, or perfect")
    if most == 0:
        return Episode((), found, f"{n_days} days with readings, at least {LARGEST_SHARE} needed")
    aim = float(np.arctanh(reference))
    change = abs(float(np.arctanh(found)) - aim)
    if change < SMALLEST_CHANGE:
        return Episode((), found, "the correlation has hardly changed")
    left: list[int] = []
    while len(left) < most:
        distance = np.full(len(scored), np.inf)
        for day in np.flatnonzero(kept):
            kept[day] = False
            without = correlate(kept)
            kept[day] = True
            if abs(without) < 1.0:
                distance[day] = abs(np.arctanh(without) - aim)
        best = int(distance.argmin())
        if not np.isfinite(distance[best]):
            break
        kept[best] = False
        left.append(best)
        if distance[best] <= (1.0 - RESTORED) * change:
            return Episode(tuple(sorted(left)), correlate(kept))
    return Episode((), found)

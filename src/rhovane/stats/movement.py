"""Which pairs moved since a day, and which held: the counter-evidence of an alert."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.chart import MAX_DEVIATION
from rhovane.stats.incident import weighted_mean

Floats = NDArray[np.float64]

MOVED = 2.5
"""Standard deviations from which a pair counts as moved. In the demo's world, 7 days from an arbitrary day on, 4 %
of the pairs reach it: planted changes, weather and season, which move pairs too."""
HELD = 1.5
"""Standard deviations below which a pair counts as held; between the two nothing is said."""
HISTORY_DAYS = 180
"""Days before the onset from which it is learnt how far such sums stray without a change."""
FEWEST_SUMS = 60
"""With fewer sums in the history they are taken to stray as independent days do."""
FEWEST_DAYS = 2
"""Scored days below which nothing is said of a pair."""


@dataclass(frozen=True)
class Movement:
    """How one pair's daily correlation moved from a day on.

    ``before`` is its reference on that day, ``after`` the mean since (daily correlations, back from atanh); ``z`` the
    mean deviation in standard deviations of such a mean; ``moved`` None where that is unclear: 1.5 to 2.5
    of them, fewer than two scored days, or no reference (then the numbers may be NaN).
    """

    before: float
    after: float
    z: float
    n_days: int
    moved: bool | None


def movements_since(
    score: Floats, weight: Floats, mean: Floats, sd: Floats, onset: int, last: int
) -> tuple[Movement, ...]:
    """How every pair moved from day ``onset`` to day ``last``, both included, against its reference on the onset.

    Parameters
    ----------
    score, weight : ndarray of float64, shape (n_days, n_pairs)
        Daily scores (atanh of a correlation, NaN: not scored) and their weights.
    mean, sd : ndarray of float64, shape (n_days, n_pairs)
        The references they were judged against; ``sd`` per unit of weight. NaN while learning.

    Notes
    -----
    No network control enters here: a pair that weather has moved counts as moved, which is what speaks against
    an instrument. Each day counts for at most 3.5 standard deviations, as in the charts. The sum of the n days is
    divided by the root mean square of the sums of n days in a row over the 180 days before, never by less than
    that of independent days: daily correlations follow weather that lasts.
    """
    begin = max(0, onset - HISTORY_DAYS)
    recent = slice(onset, last + 1)
    own = _deviations(score[begin:onset], weight[begin:onset], mean[begin:onset], sd[begin:onset])
    since = _deviations(score[recent], weight[recent], mean[onset], sd[onset])
    out = []
    for p in range(score.shape[1]):
        n = int(np.isfinite(since[:, p]).sum())
        before = float(np.tanh(mean[onset, p]))
        after = float(np.tanh(weighted_mean(score[recent, p], weight[recent, p])))
        if n < FEWEST_DAYS:
            out.append(Movement(before, after, float("nan"), n, None))
            continue
        z = float(np.nansum(since[:, p])) / _usual_sum(own[:, p], n)
        moved = None if HELD <= abs(z) < MOVED else abs(z) >= MOVED
        out.append(Movement(before, after, z, n, moved))
    return tuple(out)


def _deviations(score: Floats, weight: Floats, mean: Floats, sd: Floats) -> Floats:
    return np.clip((score - mean) / sd * np.sqrt(weight), -MAX_DEVIATION, MAX_DEVIATION)


def _usual_sum(own: Floats, n: int) -> float:
    """Root mean square of the sums of n scored days in a row; at least that of independent days."""
    known = own[np.isfinite(own)]
    upto = np.concatenate(([0.0], np.cumsum(known)))
    sums = upto[n:] - upto[:-n]
    usual = float(np.mean(sums**2)) if len(sums) >= FEWEST_SUMS else 0.0
    return float(np.sqrt(max(usual, n)))

"""The rank correlation of one pair at many lags, and what the best of them signifies."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from rhovane.stats.arguments import Floats, Integers, as_pair, checked_lags, checked_method
from rhovane.stats.dependence import (
    MIN_EFFECTIVE,
    Autocorrelation,
    JointRanks,
    TauSums,
    autocorrelation,
    effective_pairs,
    inflation,
    joint_ranks,
    kendall_p_value,
    spearman_p_value,
    tau_of,
)
from rhovane.stats.family import best_of_lags_p_value
from rhovane.stats.rank_kernels import Ranks, dense_ranks
from rhovane.stats.rank_test import SMALLEST_TEST, no_statistic_reason, too_little_reason

DEFAULT_SEED = 20260


@dataclass(frozen=True)
class LagScan:
    """Rank correlation at each lag over all rows, with the significance of each lag and of the best.

    Attributes
    ----------
    lags : ndarray of int64, shape (n_lags,)
        Rows by which x leads y, in the order asked for.
    statistic : ndarray of float64, shape (n_lags,)
        Spearman's rho or Kendall's tau-b; NaN where not computable.
    n_pairs : ndarray of int64, shape (n_lags,)
        Rows with both values.
    n_effective : ndarray of float64, shape (n_lags,)
        Independent pairs worth the same information; NaN where there is no statistic.
    p_value : ndarray of float64, shape (n_lags,)
        Two-sided, each lag taken alone; NaN where not assessable.
    reason : tuple of str or None, length n_lags
        Why a lag has no p-value.
    best_lag : int or None
        Lag with the smallest p-value (the largest statistic among equals, or where no lag is assessable).
    best_p_value : float
        Of the best lag, corrected for having looked at all of them.
    """

    lags: Integers
    statistic: Floats
    n_pairs: Integers
    n_effective: Floats
    p_value: Floats
    reason: tuple[str | None, ...]
    best_lag: int | None
    best_p_value: float


@dataclass(frozen=True)
class Scan:
    """A lag scan with the ranks, autocorrelations and (Kendall) sums behind it, for those that go on from there."""

    result: LagScan
    ranks: tuple[JointRanks, ...]
    base: int | None
    acf: Autocorrelation | None
    factor: float
    sums: dict[int, TauSums]


def lag_scan(x: ArrayLike, y: ArrayLike, *, lags: Iterable[int], method: str = "spearman") -> LagScan:
    """Return the rank correlation at each lag, each lag's p-value, and the corrected p-value of the best.

    Parameters
    ----------
    x, y : array-like of float or int, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one.
    lags : iterable of int
        Rows by which x leads y.
    method
        "spearman" or "kendall".

    Raises
    ------
    ValueError
        As for :func:`rolling_rank_correlation`.

    Notes
    -----
    The variance inflation of the lag with most pairs (lag 0 if it is among them) serves all lags. The best of
    many lags is judged against the maximum of a multivariate normal vector with the lags' own correlation;
    the draws are seeded, so that equal input gives equal output.

    Examples
    --------
    >>> import numpy as np
    >>> x = np.random.default_rng(1).normal(size=300)
    >>> scan = lag_scan(x, np.roll(x, 2), lags=range(-3, 4))
    >>> scan.best_lag
    2
    """
    first, second = as_pair(x, y)
    leads = checked_lags(lags, len(first))
    chosen = checked_method(method)
    ranks_x, n_x = dense_ranks(first)
    ranks_y, n_y = dense_ranks(second)
    n = len(first)

    def overlap(lag: int) -> tuple[Ranks, Ranks]:
        rows = n - abs(lag)
        return (ranks_x[:rows], ranks_y[n - rows :]) if lag >= 0 else (ranks_x[n - rows :], ranks_y[:rows])

    return scan_lags(overlap, (n_x, n_y), leads, chosen, SMALLEST_TEST, MIN_EFFECTIVE, DEFAULT_SEED).result


def scan_lags(
    aligned: Callable[[int], tuple[Ranks, Ranks]],
    n_distinct: tuple[int, int],
    lags: Integers,
    method: str,
    min_pairs: int,
    min_effective: float,
    seed: int,
) -> Scan:
    """Return the scan over ``lags``; ``aligned`` gives the dense ranks of both sides, side by side, at a lag.

    All dense ranks lie below ``n_distinct`` of their side.
    """
    n_lags = len(lags)
    statistic = np.full(n_lags, np.nan)
    n_effective = np.full(n_lags, np.nan)
    p_value = np.full(n_lags, np.nan)
    sides = [aligned(int(lag)) for lag in lags]
    ranks = tuple(joint_ranks(*pair, *n_distinct) for pair in sides)
    reason = [no_statistic_reason(here, min_pairs) for here in ranks]
    n_pairs = np.array([here.n_pairs for here in ranks], dtype=np.int64)
    usable = [i for i in range(n_lags) if reason[i] is None]
    if not usable:
        result = LagScan(lags, statistic, n_pairs, n_effective, p_value, tuple(reason), None, float("nan"))
        return Scan(result, ranks, None, None, float("nan"), {})
    tau: dict[int, TauSums] = {i: tau_of(*sides[i]) for i in usable} if method == "kendall" else {}
    # Lag 0 where it is computable; else the lag with most pairs, the smallest of them.
    base = min(usable, key=lambda i: (lags[i] != 0, -n_pairs[i], abs(lags[i]), lags[i]))
    acf = autocorrelation(ranks[base])
    factor = inflation(acf)
    for i in usable:
        statistic[i] = tau[i].tau if tau else ranks[i].rho
        n_effective[i] = effective_pairs(n_pairs[i], factor)
        reason[i] = too_little_reason(n_effective[i], min_effective)
    tested = [i for i in usable if reason[i] is None]
    if tau:
        for i in tested:
            p_value[i] = kendall_p_value(tau[i], int(n_pairs[i]), float(n_effective[i]))
    elif tested:
        p_value[tested] = spearman_p_value(statistic[tested], n_effective[tested])
    among = tested or usable
    best = min(
        among, key=lambda i: (p_value[i] if tested else 0.0, -abs(statistic[i]), abs(lags[i]), lags[i])
    )
    best_p_value = best_of_lags_p_value(p_value[tested], lags[tested], acf, seed) if tested else float("nan")
    result = LagScan(
        lags, statistic, n_pairs, n_effective, p_value, tuple(reason), int(lags[best]), best_p_value
    )
    return Scan(result, ranks, base, acf, factor, tau)

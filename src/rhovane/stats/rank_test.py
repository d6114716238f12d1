"""Test and interval for the rank correlation of one pair at one lag."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import ndtr

from rhovane.stats.arguments import as_pair, checked_lags, checked_method
from rhovane.stats.dependence import (
    MIN_EFFECTIVE,
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
from rhovane.stats.exact_null import (
    LARGEST_EXACT_KENDALL,
    LARGEST_EXACT_SPEARMAN,
    exact_kendall_p_value,
    exact_spearman_p_value,
)
from rhovane.stats.interval import PERFECT, Interval, no_interval, rank_interval
from rhovane.stats.rank_kernels import dense_ranks

NORMAL_QUANTILE = 1.959963984540054  # of (1 + 0.95) / 2
FIELLER_KENDALL = 0.437  # Fieller, Hartley & Pearson (1957): var atanh(tau) = .437 / (n - 4); from memory
SMALLEST_TEST = 2  # pairs


@dataclass(frozen=True)
class RankCorrelationTest:
    """Rank correlation of one pair, its significance and its 95 % interval.

    Attributes
    ----------
    statistic : float
        Spearman's rho or Kendall's tau-b; NaN where a side is constant or there are fewer than 2 pairs.
    n_pairs : int
        Rows with both values.
    n_effective : float
        Independent pairs worth the same information when the series are unrelated; ``n_pairs`` without
        adjustment; NaN where there is no statistic.
    p_value : float
        Two-sided p-value of "unrelated"; NaN where not assessable, never 0 instead.
    low, high : float
        Bounds of the 95 % interval; NaN where not assessable.
    reason : str or None
        Why there is no p-value.
    interval_reason : str or None
        Why there is no interval.
    tie_share : float
        Largest share of the pairs that one value takes; above one half, read the result with care.
    """

    statistic: float
    n_pairs: int
    n_effective: float
    p_value: float
    low: float
    high: float
    reason: str | None
    interval_reason: str | None
    tie_share: float


def rank_correlation_test(
    x: ArrayLike, y: ArrayLike, *, method: str = "spearman", lag: int = 0, adjust: str = "autocorrelation"
) -> RankCorrelationTest:
    """Return the rank correlation of x and y with its p-value and interval under serial dependence.

    Parameters
    ----------
    x, y : array-like of float or int, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one.
    method
        "spearman" (rho) or "kendall" (tau-b).
    lag : int
        Rows by which x leads y, as in :func:`rolling_rank_correlation`.
    adjust
        "autocorrelation" allows for serial dependence; "none" takes the pairs as independent: the exact
        distribution without ties (Spearman to 12, Kendall to 60 pairs), else t (Spearman) or the tie-corrected
        normal distribution without continuity correction (Kendall).

    Returns
    -------
    RankCorrelationTest
        Fewer than 10 effective pairs are not assessable: a NaN p-value with its reason.

    Raises
    ------
    ValueError
        As for :func:`rolling_rank_correlation`; an unknown ``adjust``.

    Notes
    -----
    A daily or yearly cycle that both series share makes unrelated series look related, and no adjustment
    here repairs that: remove the cycle first (:func:`remove_cycle`).

    With ``adjust="none"`` the interval is Bonett & Wright's for rho and Fieller's for tau. Otherwise it is the
    rotated-rank interval of :mod:`rhovane.stats.interval`.

    References
    ----------
    Bayley & Hammersley (1946); Pyper & Peterman (1998, from memory); Bonett & Wright (2000), Psychometrika 65;
    Fieller, Hartley & Pearson (1957), Biometrika 44; Kendall (1970), Rank Correlation Methods.

    Examples
    --------
    >>> found = rank_correlation_test([1, 2, 3, 4], [1, 3, 2, 4], adjust="none")
    >>> round(found.statistic, 2), found.n_pairs, round(found.p_value, 3)
    (0.8, 4, 0.333)
    """
    first, second = as_pair(x, y)
    chosen = checked_method(method)
    lead = int(checked_lags((lag,), len(first))[0])
    if adjust not in ("autocorrelation", "none"):
        raise ValueError(f'adjust={adjust!r} is not known; choose "autocorrelation" or "none".')
    rows = len(first) - abs(lead)
    ranks_x, _ = dense_ranks(first[:rows] if lead >= 0 else first[-rows:])
    ranks_y, _ = dense_ranks(second[-rows:] if lead >= 0 else second[:rows])
    ranks = joint_ranks(ranks_x, ranks_y)
    reason = no_statistic_reason(ranks, SMALLEST_TEST)
    nan = float("nan")
    if reason is not None:
        return RankCorrelationTest(nan, ranks.n_pairs, nan, nan, nan, nan, reason, reason, ranks.tie_share)
    sums = tau_of(ranks_x, ranks_y) if chosen == "kendall" else None
    statistic = ranks.rho if sums is None else sums.tau
    if adjust == "none":
        n_effective = float(ranks.n_pairs)
        p_value = independent_p_value(ranks, sums)
        interval = independent_interval(statistic, ranks.n_pairs, chosen)
        reason = None
    else:
        acf = autocorrelation(ranks)
        factor = inflation(acf)
        n_effective = effective_pairs(ranks.n_pairs, factor)
        reason = too_little_reason(n_effective, MIN_EFFECTIVE)
        p_value = nan if reason else dependent_p_value(ranks, sums, n_effective)
        interval = rank_interval(ranks, acf, factor, sums)
    return RankCorrelationTest(
        statistic=statistic,
        n_pairs=ranks.n_pairs,
        n_effective=n_effective,
        p_value=p_value,
        low=interval.low,
        high=interval.high,
        reason=reason,
        interval_reason=interval.reason,
        tie_share=ranks.tie_share,
    )


def no_statistic_reason(ranks: JointRanks, min_pairs: int) -> str | None:
    """Why there is no correlation over these rows; None if there is one."""
    if ranks.n_pairs < min_pairs:
        return f"too few pairs: {ranks.n_pairs}, at least {min_pairs} needed"
    if ranks.sum_xx == 0:
        return "the first series is constant over these pairs"
    if ranks.sum_yy == 0:
        return "the second series is constant over these pairs"
    return None


def too_little_reason(n_effective: float, min_effective: float) -> str | None:
    """Why there is no p-value; None if there are enough effective pairs."""
    if n_effective < min_effective:
        return f"not assessable: {n_effective:.1f} effective pairs, at least {min_effective:g} needed"
    return None


def dependent_p_value(ranks: JointRanks, sums: TauSums | None, n_effective: float) -> float:
    """Return the p-value under serial dependence, of rho or (with its sums) of tau."""
    if sums is None:
        return float(spearman_p_value(ranks.rho, n_effective))
    return kendall_p_value(sums, ranks.n_pairs, n_effective)


def independent_p_value(ranks: JointRanks, sums: TauSums | None) -> float:
    """Return the p-value for independent rows: exact for short untied samples, else t or normal."""
    n = ranks.n_pairs
    most = (n**3 - n) // 3
    untied = ranks.sum_xx == most and ranks.sum_yy == most
    if sums is None:
        if untied and n <= LARGEST_EXACT_SPEARMAN:
            return exact_spearman_p_value(ranks.sum_xy, n)
        return float(spearman_p_value(ranks.rho, n))
    if untied and n <= LARGEST_EXACT_KENDALL:
        return exact_kendall_p_value(sums.score, n)
    return float(2.0 * ndtr(-abs(sums.score) / np.sqrt(sums.score_variance)))


def independent_interval(statistic: float, n_pairs: int, method: str) -> Interval:
    """Return the 95 % interval for independent rows (Bonett & Wright for rho, Fieller for tau)."""
    lost = 3 if method == "spearman" else 4
    if n_pairs <= lost:
        return no_interval(f"interval not assessable: {n_pairs} pairs, at least {lost + 1} needed")
    if abs(statistic) >= 1.0:
        return no_interval(PERFECT)
    share = 1.0 + statistic**2 / 2.0 if method == "spearman" else FIELLER_KENDALL
    half = NORMAL_QUANTILE * np.sqrt(share / (n_pairs - lost))
    centre = np.arctanh(statistic)
    return Interval(float(np.tanh(centre - half)), float(np.tanh(centre + half)), float(n_pairs), None)

"""The level companion: what a rank correlation cannot see.

Ranks stay as they are when a series is multiplied by a constant, so a steady scale change (a drifting span, a
cleaner fleet) leaves rho alone. Medians and the slope of one series on the other do not.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import stdtrit

from rhovane.stats.arguments import as_pair
from rhovane.stats.dependence import (
    autocorrelation,
    effective_pairs,
    inflation,
    joint_ranks,
)
from rhovane.stats.difference import Estimate, difference, not_assessable
from rhovane.stats.rank_kernels import dense_ranks

LEAST_EFFECTIVE = 8.0  # independent hours; with fewer the interval of a slope is not assessable
HOURS_A_TERM, FEWEST_TERMS, MOST_TERMS = (
    24,
    2,
    8,
)  # of the cosine long-run variance; waves slower than a day only
NORMAL_QUANTILE = 1.959963984540054  # of (1 + 0.95) / 2
UPPER = 0.975
MOST_ROWS = 4096  # the longest window that settings allow; 8 million slopes

Floats = NDArray[np.float64]


def median_interval(values: ArrayLike) -> Estimate:
    """Return the median of one series with a distribution-free 95 % interval.

    Parameters
    ----------
    values : array-like of float, shape (n_rows,)
        Observations on a regular grid; NaN marks a row without one.

    Returns
    -------
    Estimate
        In the unit of the series; not assessable where the interval would reach beyond the values.

    Notes
    -----
    The bounds are the order statistics at ranks n/2 ± t √(n V)/2: nothing is assumed of the distribution, and the
    series only has to be stationary within the stretch. V is the long-run variance of "above or below the median"
    by an equal-weighted cosine transform of B terms (one for each day, 2 to 8), never below 1, its value for
    independent rows; t has B degrees of freedom. Measured coverage at n = 336, 400 series: 98.5,
    96.5, 93.5 and 93.8 % of AR(1) with .0, .8, .9 and .95.

    References
    ----------
    Woodruff (1952), Journal of the American Statistical Association 47, 635-646 (order statistics at the bounds of a
    share); Lazarus, Lewis, Stock & Watson (2018), Journal of Business & Economic Statistics 36, 541-559 (the long-run
    variance); both cited from memory.
    """
    series = np.asarray(values, dtype=np.float64)
    known = np.isfinite(series)
    ordered = np.sort(series[known])
    n = len(ordered)
    if n == 0:
        return not_assessable(float("nan"), "no observations")
    middle = float(np.median(ordered))
    terms = min(max(len(series) // HOURS_A_TERM, FEWEST_TERMS), MOST_TERMS)
    half = float(stdtrit(terms, UPPER)) * np.sqrt(n * _sign_variance(series, known, middle, terms)) / 2.0
    low, high = int(np.floor(n / 2.0 - half)) - 1, int(np.ceil(n / 2.0 + half))
    if low < 0 or high >= n:
        return not_assessable(middle, "too few independent hours")
    return Estimate(middle, float(ordered[low]), float(ordered[high]))


def _sign_variance(series: Floats, known: NDArray[np.bool_], middle: float, terms: int) -> float:
    """Long-run variance of the signs of the deviations from the median; at least 1."""
    side = np.where(known, np.sign(series - middle), 0.0)
    side[known] -= side[known].mean()
    row = np.arange(len(side)) + 0.5
    wave = np.cos(np.pi * np.outer(np.arange(1, terms + 1), row) / len(side))
    return max(1.0, float(np.mean((wave @ side) ** 2) * 2.0 / known.sum()))


def median_ratio(before: ArrayLike, after: ArrayLike) -> Estimate:
    """Return the median after over the median before, with a 95 % interval.

    The two medians' intervals are put together on the logarithmic scale (:func:`difference`). Not assessable
    where a median or a bound is not above zero: a ratio of such levels means nothing.
    """
    earlier, later = median_interval(before), median_interval(after)
    reason = later.reason or earlier.reason
    if not (earlier.value > 0.0 and later.value > 0.0):
        return not_assessable(float("nan"), reason or "a median is not above zero")
    ratio = later.value / earlier.value
    if reason is not None:
        return not_assessable(ratio, reason)
    if min(earlier.low, later.low) <= 0.0:
        return not_assessable(ratio, "the interval of a median reaches zero")
    apart = difference(_on_log(later), _on_log(earlier))
    return Estimate(ratio, float(np.exp(apart.low)), float(np.exp(apart.high)))


def _on_log(one: Estimate) -> Estimate:
    return Estimate(float(np.log(one.value)), float(np.log(one.low)), float(np.log(one.high)))


def spread_ratio(before: ArrayLike, after: ArrayLike) -> float:
    """Return the interquartile range after over that before; NaN where either is not above zero."""
    sizes = []
    for values in (before, after):
        series = np.asarray(values, dtype=np.float64)
        known = series[np.isfinite(series)]
        sizes.append(float(np.subtract(*np.quantile(known, (0.75, 0.25)))) if len(known) else 0.0)
    return sizes[1] / sizes[0] if min(sizes) > 0.0 else float("nan")


def theil_sen_slope(x: ArrayLike, y: ArrayLike, *, adjust: str = "autocorrelation") -> Estimate:
    """Return the Theil-Sen slope of y on x, the median of all slopes between two rows, with a 95 % interval.

    Parameters
    ----------
    x, y : array-like of float, shape (n_rows,), at most 4,096 rows
        Observations on one regular grid; NaN marks a row without one.
    adjust
        "autocorrelation" allows for serial dependence; "none" takes the rows as independent.

    Returns
    -------
    Estimate
        In units of y per unit of x; NaN where x never differs.

    Raises
    ------
    ValueError
        When lengths differ, there are more rows, or ``adjust`` is not known.

    Notes
    -----
    The bounds are the slopes at ranks (N ± 1.96 s)/2, s² the variance of Kendall's score with its ties (Sen
    1968). Dependence inflates s² by the factor of :func:`rhovane.stats.dependence.inflation`, taken between
    the ranks of x and of the residuals: those are unrelated by construction, as the factor supposes.
    Measured coverage at n = 336, 150 pairs: 94, 93, 89 and 87 % where both are AR(1) with .0, .8, .9 and .95.

    References
    ----------
    Theil (1950), Proceedings of the Royal Netherlands Academy of Sciences 53; Sen (1968), Journal of the American
    Statistical Association 63, 1379-1389.
    """
    if adjust not in ("autocorrelation", "none"):
        raise ValueError(f'adjust={adjust!r} is not known; choose "autocorrelation" or "none".')
    first, second = as_pair(x, y)
    if len(first) > MOST_ROWS:
        raise ValueError(f"{len(first)} rows make too many slopes; give at most {MOST_ROWS}.")
    joint = np.isfinite(first) & np.isfinite(second)
    inner, outer = first[joint], second[joint]
    n = len(inner)
    earlier, later = np.triu_indices(n, 1)
    run, rise = inner[later] - inner[earlier], outer[later] - outer[earlier]
    slopes = np.sort(rise[run != 0.0] / run[run != 0.0])
    if len(slopes) == 0:
        return not_assessable(float("nan"), "the first series never differs")
    slope = float(np.median(slopes))
    variance = _score_variance(inner, outer)
    if adjust == "autocorrelation":
        # Rounded to a billionth of the range: what is left of an exact relation is no noise to rank.
        residual = np.full(len(first), np.nan)
        residual[joint] = np.round((outer - slope * inner) / (np.ptp(outer) or 1.0), 9)
        ranks = joint_ranks(dense_ranks(np.where(joint, first, np.nan))[0], dense_ranks(residual)[0])
        if ranks.sum_yy == 0:
            return not_assessable(slope, "the second series follows the first exactly")
        n_effective = effective_pairs(n, inflation(autocorrelation(ranks)))
        if n_effective < LEAST_EFFECTIVE:
            return not_assessable(slope, f"{n_effective:.1f} independent hours, at least 8 needed")
        variance *= n / n_effective
    reach = NORMAL_QUANTILE * np.sqrt(variance)
    low = max(int(np.round((len(slopes) - reach) / 2.0)) - 1, 0)
    high = min(int(np.round((len(slopes) + reach) / 2.0)), len(slopes) - 1)
    return Estimate(slope, float(slopes[low]), float(slopes[high]))


def _score_variance(x: Floats, y: Floats) -> float:
    """Variance of Kendall's score of independent rows, less what ties take away (Sen 1968)."""
    n = float(len(x))
    fives = n * (n - 1.0) * (2.0 * n + 5.0)
    for side in (x, y):
        t = np.unique(side, return_counts=True)[1].astype(np.float64)
        fives -= float(np.sum(t * (t - 1.0) * (2.0 * t + 5.0)))
    return max(fives, 0.0) / 18.0

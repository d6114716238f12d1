"""Significance of every correlation of a network at little cost.

The autocorrelations of a series' midranks are computed once a window and serve all its pairs and lags; per pair
and window one sum gives the variance inflation; per correlation remains one tail of the t distribution.
"""

from __future__ import annotations

from math import exp, log1p, pi, sqrt

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.arguments import Floats
from rhovane.stats.compiled import compiled
from rhovane.stats.dependence import SMALLEST_EFFECTIVE, SMALLEST_INFLATION, SMALLEST_UNEXPLAINED
from rhovane.stats.narrow import BLOCK
from rhovane.stats.rank_kernels import exact_dot
from rhovane.stats.sliding_ranks import Counts, Narrow, slide_base

SMALLEST_DIFFERENCE = 1e-17  # of a series or continued fraction, relative: below double precision
ASYMPTOTIC_FROM = 20.0  # argument from which the expansion of the gamma ratio is right to 1e-12
TINY = 1e-300  # keeps the continued fraction from dividing by zero


@compiled
def gamma_ratio(a: float) -> float:
    """Return Γ(a + 1/2) / Γ(a), a > 0, right to 1e-12: recurrence up to 20, then the expansion in 1/a."""
    factor = 1.0
    while a < ASYMPTOTIC_FROM:
        factor *= a / (a + 0.5)
        a += 1.0
    x = 1.0 / a
    series = 1.0 + x * (
        -1 / 8
        + x
        * (
            1 / 128
            + x
            * (
                5 / 1024
                + x * (-21 / 32768 + x * (-399 / 262144 + x * (869 / 4194304 + x * 39325 / 33554432)))
            )
        )
    )
    return factor * sqrt(a) * series


@compiled
def correlation_tail(rho: float, freedom: float) -> float:
    """Return the two-sided p-value of a correlation by t with ``freedom`` degrees of freedom (2 or more).

    It is the regularised incomplete beta function I(1 - rho²; freedom/2, 1/2): near rho = 0 from the series of
    its complement, elsewhere from the continued fraction (Lentz's method).

    References
    ----------
    Abramowitz & Stegun (1964), Handbook of Mathematical Functions, 26.5.
    """
    a = 0.5 * freedom
    explained = rho * rho
    rest = max(1.0 - explained, SMALLEST_UNEXPLAINED)
    scale = gamma_ratio(a) / sqrt(pi) * exp(a * log1p(rest - 1.0))
    if explained * (a + 2.5) < 1.5:
        # 1 - 2 |rho| rest^a / B(1/2, a) Σ (a + 1/2)_n / (3/2)_n rho^2n
        term = 1.0
        total = 1.0
        n = 0.0
        while term > SMALLEST_DIFFERENCE * total:
            term *= explained * (a + 0.5 + n) / (1.5 + n)
            total += term
            n += 1.0
        return max(0.0, 1.0 - 2.0 * abs(rho) * scale * total)
    b = 0.5
    c = 1.0
    d = 1.0 - (a + b) * rest / (a + 1.0)
    d = 1.0 / (d if abs(d) > TINY else TINY)
    fraction = d
    m = 1.0
    change = 2.0
    while abs(change - 1.0) > 1e-15 and m < 1000.0:
        even = m * (b - m) * rest / ((a + 2 * m - 1.0) * (a + 2 * m))
        d = 1.0 + even * d
        c = 1.0 + even / c
        d = 1.0 / (d if abs(d) > TINY else TINY)
        fraction *= d * c
        odd = -(a + m) * (a + b + m) * rest / ((a + 2 * m) * (a + 2 * m + 1.0))
        d = 1.0 + odd * d
        c = 1.0 + odd / c
        d = 1.0 / (d if abs(d) > TINY else TINY)
        change = d * c
        fraction *= change
        m += 1.0
    return min(1.0, scale * sqrt(max(explained, 0.0)) / a * fraction)


@compiled
def series_autocorrelation(
    ranks: Narrow, seen: Narrow, window: int, step: int, chunk: int, result: NDArray[np.float64]
) -> None:
    """Fill the autocorrelation at lag 1, 2, … of the midranks of one series, for each window.

    ``ranks`` and ``seen`` begin with one empty window and end with 16 spare rows; the first window ends at row
    2·window - 1. NaN for a constant window and for lags without a product.
    """
    n_windows, n_lags = result.shape
    slot = window + BLOCK
    base = np.zeros(2 * slot + BLOCK, np.int16)
    centred = np.zeros(window + n_lags + 2 * BLOCK, np.int16)
    n_rows = 2 * window + (n_windows - 1) * step
    counts = np.zeros(n_lags, np.int32)
    observed = np.zeros(n_rows + 2 * n_lags, np.int32)
    for t in range(n_rows):
        observed[n_lags + t] = seen[t] & 1
    mirrored = observed[::-1].copy()
    slid = window - 1
    place = 0
    for row in range(n_windows):
        end = 2 * window - 1 + row * step
        start = end - window + 1
        while slid < end:
            slid += 1
            slide_base(ranks, seen, slid, window, base, place, slot - place)
            place = slot - place
            follow_counts(counts, observed, mirrored, slid, window)
        n_seen = 0
        for i in range(window):
            centred[i] = base[place + i] & seen[start + i]
            n_seen += seen[start + i] & 1
        square = exact_dot(centred, 0, centred, 0, window, chunk)
        for k in range(1, n_lags + 1):
            count = counts[n_lags - k]
            if square > 0 and count > 0:
                result[row, k - 1] = (
                    exact_dot(centred, 0, centred, k, window - k, chunk) / float(square) * n_seen / count
                )
            else:
                result[row, k - 1] = np.nan


@compiled
def follow_counts(counts: Counts, joint: Counts, mirrored: Counts, t: int, window: int) -> None:
    """Bring the counts of rows observed k apart from the window that ends at row t - 1 to that at t.

    The count of lag k is at ``len(counts) - k``. ``joint`` is 1 in observed rows, else 0, with one empty stretch of
    the longest lag in front of row 0 and one behind the last; ``mirrored`` is the same back to front.
    """
    n_lags = len(counts)
    if joint[n_lags + t] != 0:
        past = joint[t : t + n_lags]
        for i in range(n_lags):
            counts[i] += past[i]
    gone = t - window
    if joint[n_lags + gone] != 0:
        start = len(joint) - 1 - (n_lags + gone + n_lags)
        future = mirrored[start : start + n_lags]
        for i in range(n_lags):
            counts[i] -= future[i]


@compiled
def fill_inflation(
    seen_x: Narrow, seen_y: Narrow, acf_x: Floats, acf_y: Floats, window: int, step: int, factor: Floats
) -> None:
    """Fill the variance inflation 1 + 2 Σ (c_k/N) r_xx(k) r_yy(k) of one pair, for each window.

    c_k counts rows t with t and t + k jointly observed; rows are numbered as in :func:`series_autocorrelation`.
    """
    n_windows, n_lags = acf_x.shape
    n_rows = 2 * window + (n_windows - 1) * step
    counts = np.zeros(n_lags, np.int32)
    joint = np.zeros(n_rows + 2 * n_lags, np.int32)
    for t in range(n_rows):
        joint[n_lags + t] = seen_x[t] & seen_y[t] & 1
    mirrored = joint[::-1].copy()
    n_joint = 0
    row = 0
    due = 2 * window - 1
    for t in range(window, n_rows):
        n_joint += joint[n_lags + t] - joint[n_lags + t - window]
        follow_counts(counts, joint, mirrored, t, window)
        if t == due:
            total = 0.0
            for k in range(1, n_lags + 1):
                c = counts[n_lags - k]
                if c > 0:
                    total += c * acf_x[row, k - 1] * acf_y[row, k - 1]
            factor[row] = max(SMALLEST_INFLATION, 1.0 + 2.0 * total / n_joint) if n_joint > 0 else np.nan
            due += step
            row += 1


@compiled
def fill_significance(
    statistic: Floats, n_pairs: Counts, factor: Floats, min_effective: float, p_value: Floats
) -> None:
    """Fill the p-values of one pair, by lag and window; NaN where there is no statistic or too little information."""
    n_lags, n_windows = statistic.shape
    for k in range(n_lags):
        for row in range(n_windows):
            n = float(n_pairs[k, row])
            effective = min(n, max(SMALLEST_EFFECTIVE, n / factor[row]))
            if statistic[k, row] == statistic[k, row] and effective >= min_effective:
                p_value[k, row] = correlation_tail(statistic[k, row], effective - 2.0)
            else:
                p_value[k, row] = np.nan

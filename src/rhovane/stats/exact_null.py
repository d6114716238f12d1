"""Exact distributions of rank correlations of short, untied samples in which every order is equally likely."""

from __future__ import annotations

from functools import lru_cache
from math import factorial

import numpy as np

from rhovane.stats.arguments import Floats

LARGEST_EXACT_SPEARMAN = 12  # pairs; the subsets to go through double with each pair
LARGEST_EXACT_KENDALL = 60  # pairs; beyond, the normal distribution is right to three digits


@lru_cache(maxsize=LARGEST_EXACT_SPEARMAN)
def squared_difference_counts(n: int) -> tuple[int, ...]:
    """Return how many of the n! orders have sum of squared rank differences 0, 1, 2, …, (n³ - n)/3.

    Ranks are placed one after another; only the set of ranks already used matters, so n! orders become 2ⁿ
    subsets.
    """
    size = (n**3 - n) // 3 + 1
    counts = np.zeros((1 << n, size), dtype=np.int64)
    counts[0, 0] = 1
    for used in range(1, 1 << n):
        place = used.bit_count() - 1
        for rank in range(n):
            if used >> rank & 1:
                square = (rank - place) ** 2
                counts[used, square:] += counts[used ^ (1 << rank), : size - square]
    return tuple(int(count) for count in counts[-1])


def exact_spearman_p_value(sum_xy: int, n: int) -> float:
    """Return the two-sided p-value of rho from Σ of products of centred doubled ranks, n ≤ 12, no ties.

    The share of all orders whose |rho| is at least as large; a whole-number comparison, without rounding.
    """
    counts = squared_difference_counts(n)
    largest = (n**3 - n) // 3
    # Doubled centred ranks: Σ c_x c_y = (n³ - n)/3 - 2 Σd².
    extreme = sum(count for d2, count in enumerate(counts) if abs(largest - 2 * d2) >= abs(sum_xy))
    return extreme / factorial(n)


@lru_cache(maxsize=LARGEST_EXACT_KENDALL)
def inversion_shares(n: int) -> Floats:
    """Return the share of the n! orders with 0, 1, …, n(n-1)/2 discordant pairs.

    Inserting the k-th element adds 0 to k-1 inversions, each equally often: a convolution with k equal parts.
    """
    shares: Floats = np.ones(1)
    for k in range(2, n + 1):
        shares = np.convolve(shares, np.full(k, 1.0 / k))
    return shares


def exact_kendall_p_value(score: int, n: int) -> float:
    """Return the two-sided p-value of Kendall's score (concordant minus discordant), n ≤ 60, no ties."""
    shares = inversion_shares(n)
    scores = n * (n - 1) // 2 - 2 * np.arange(len(shares))
    return min(1.0, float(shares[np.abs(scores) >= abs(score)].sum()))

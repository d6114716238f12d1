"""Compiled kernels on the ranks of one window: midranks, sums of products, tau, lag products.

Ranks are doubled and centred: the midrank r of a value among N becomes 2r - (N + 1), which equals the
number of values below it minus the number above. These are whole numbers with mean zero, so sums of
products are exact, ties are recognised exactly and a constant side has a sum of squares of exactly 0.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.arguments import Floats, Integers, Whole
from rhovane.stats.compiled import compiled
from rhovane.stats.narrow import BLOCK, dot16

ABSENT = -1  # dense rank of a row without an observation
Ranks = NDArray[np.int32]
Centred = NDArray[np.int16]


def dense_ranks(values: Floats) -> tuple[Ranks, int]:
    """Return each value's rank among the distinct values (0, 1, …), -1 where NaN, and their number."""
    ranks = np.full(values.shape, ABSENT, dtype=np.int32)
    present = np.flatnonzero(values == values)
    if not present.size:
        return ranks, 0
    order = present[np.argsort(values[present])]
    ordered = values[order]
    step_up = np.empty(len(ordered), dtype=np.int32)
    step_up[0] = 0
    step_up[1:] = ordered[1:] > ordered[:-1]
    ranks[order] = np.cumsum(step_up, dtype=np.int32)
    return ranks, int(ranks[order[-1]]) + 1


@compiled
def centre_joint_ranks(
    x: Ranks,
    y: Ranks,
    n_x: int,
    n_y: int,
    centred_x: NDArray[Any],
    centred_y: NDArray[Any],
    joint: NDArray[Any],
) -> tuple[Whole, Whole, Whole, Whole, Whole]:
    """Fill the centred doubled midranks over the rows where both are present (0 elsewhere), and the mask of these.

    ``x`` and ``y`` are dense ranks below ``n_x`` and ``n_y``; only their order within the rows counts. Returns the
    number of pairs, the most pairs that share a value, and the exact sums of x·x, y·y and x·y.
    """
    n = len(x)
    counts_x = np.zeros(n_x + 1, np.int64)
    counts_y = np.zeros(n_y + 1, np.int64)
    n_pairs = 0
    for i in range(n):
        joint[i] = 0
        if x[i] >= 0 and y[i] >= 0:
            joint[i] = 1
            counts_x[x[i]] += 1
            counts_y[y[i]] += 1
            n_pairs += 1
    most_tied = np.int64(0)
    # Turn counts into centred doubled midranks of each distinct value: below - above.
    for counts in (counts_x, counts_y):
        below = 0
        for value in range(len(counts)):
            tied = counts[value]
            most_tied = max(most_tied, tied)
            counts[value] = 2 * below + tied - n_pairs
            below += tied
    xx = np.int64(0)
    yy = np.int64(0)
    xy = np.int64(0)
    for i in range(n):
        centred_x[i] = 0
        centred_y[i] = 0
        if joint[i] != 0:
            a = counts_x[x[i]]
            b = counts_y[y[i]]
            centred_x[i] = a
            centred_y[i] = b
            xx += a * a
            yy += b * b
            xy += a * b
    return n_pairs, most_tied, xx, yy, xy


@compiled
def tau_sums(x: Ranks, y: Ranks) -> tuple[Whole, Whole, Whole]:
    """Return concordant minus discordant pairs, pairs untied in x, pairs untied in y (dense joint ranks)."""
    score = np.int64(0)
    untied_x = np.int64(0)
    untied_y = np.int64(0)
    n = len(x)
    for i in range(1, n):
        earlier_x = x[:i]
        earlier_y = y[:i]
        here_x = x[i]
        here_y = y[i]
        row_score = np.int32(0)
        row_x = np.int32(0)
        row_y = np.int32(0)
        for j in range(i):
            sign_x = np.int32(np.int32(here_x > earlier_x[j]) - np.int32(here_x < earlier_x[j]))
            sign_y = np.int32(np.int32(here_y > earlier_y[j]) - np.int32(here_y < earlier_y[j]))
            row_score = np.int32(row_score + np.int32(sign_x * sign_y))
            row_x = np.int32(row_x + np.int32(sign_x * sign_x))
            row_y = np.int32(row_y + np.int32(sign_y * sign_y))
        score += row_score
        untied_x += row_x
        untied_y += row_y
    return score, untied_x, untied_y


@compiled
def exact_dot(a: Centred, a_at: int, b: Centred, b_at: int, n_rows: int, chunk: int) -> Whole:
    """Return Σ a·b over ``n_rows`` rows exactly, in steps of ``chunk`` rows that surely fit 32 bits."""
    total = np.int64(0)
    done = 0
    while done < n_rows:
        total += dot16(a, a_at + done, b, b_at + done, min(chunk, n_rows - done))
        done += chunk
    return total


@compiled
def lag_products(
    centred_x: Centred, centred_y: Centred, joint: Centred, own_lags: int, cross_lags: int, chunk: int
) -> tuple[Integers, Integers, Integers, Integers, Integers]:
    """Return Σ x_t x_{t+k}, Σ y_t y_{t+k}, counts (k ≤ own_lags), Σ x_t y_{t+k}, Σ y_t x_{t+k} (k ≤ cross_lags).

    ``chunk`` is :func:`rhovane.stats.narrow.rows_in_32_bits` of the number of rows.
    """
    n = len(centred_x)
    x = np.zeros(n + BLOCK, np.int16)
    y = np.zeros(n + BLOCK, np.int16)
    seen = np.zeros(n + BLOCK, np.int16)
    for t in range(n):  # a slice assignment would take seconds to compile
        x[t] = centred_x[t]
        y[t] = centred_y[t]
        seen[t] = joint[t]
    xx = np.zeros(own_lags + 1, np.int64)
    yy = np.zeros(own_lags + 1, np.int64)
    count = np.zeros(own_lags + 1, np.int64)
    xy = np.zeros(cross_lags + 1, np.int64)
    yx = np.zeros(cross_lags + 1, np.int64)
    for k in range(own_lags + 1):
        xx[k] = exact_dot(x, 0, x, k, n - k, chunk)
        yy[k] = exact_dot(y, 0, y, k, n - k, chunk)
        count[k] = exact_dot(seen, 0, seen, k, n - k, chunk)
    for k in range(cross_lags + 1):
        xy[k] = exact_dot(x, 0, y, k, n - k, chunk)
        yx[k] = exact_dot(y, 0, x, k, n - k, chunk)
    return xx, yy, count, xy, yx


@compiled
def fill_influence(
    centred_x: NDArray[Any],
    centred_y: NDArray[Any],
    joint: NDArray[Any],
    n_pairs: int,
    rho: float,
    influence: Floats,
) -> None:
    """Fill the influence of each joint row on Spearman's rho, tie-corrected, mean removed; 0 elsewhere.

    With standardised midranks u, v the statistic is the correlation of F(x) and G(y); besides the product
    u·v each row also moves the distribution functions F and G themselves, and the spread of the midranks.
    """
    n = len(centred_x)
    square_x = 0.0
    square_y = 0.0
    for i in range(n):
        square_x += float(centred_x[i]) * centred_x[i]
        square_y += float(centred_y[i]) * centred_y[i]
    spread_x = np.sqrt(square_x / n_pairs)
    spread_y = np.sqrt(square_y / n_pairs)
    size = 2 * n_pairs + 1
    # Sums by centred rank (tied rows share one), later turned into: sum above + half of the tied.
    own_x = np.zeros(size)
    other_x = np.zeros(size)
    own_y = np.zeros(size)
    other_y = np.zeros(size)
    for i in range(n):
        if joint[i]:
            u = centred_x[i] / spread_x
            v = centred_y[i] / spread_y
            at_x = centred_x[i] + n_pairs
            at_y = centred_y[i] + n_pairs
            own_x[at_x] += u
            other_x[at_x] += v
            own_y[at_y] += v
            other_y[at_y] += u
    for sums in (own_x, other_x, own_y, other_y):
        above = 0.0
        for place in range(size - 1, -1, -1):
            here = sums[place]
            sums[place] = above + 0.5 * here
            above += here
    # One unit of midrank is two of the doubled rank.
    unit_x = 2.0 / spread_x
    unit_y = 2.0 / spread_y
    mean = 0.0
    for i in range(n):
        influence[i] = 0.0
        if joint[i]:
            u = centred_x[i] / spread_x
            v = centred_y[i] / spread_y
            at_x = centred_x[i] + n_pairs
            at_y = centred_y[i] + n_pairs
            moved = other_x[at_x] * unit_x + other_y[at_y] * unit_y - 2.0 * rho
            spread = u * u + 2.0 * own_x[at_x] * unit_x - 3.0 + v * v + 2.0 * own_y[at_y] * unit_y - 3.0
            influence[i] = u * v - rho + moved - 0.5 * rho * spread
            mean += influence[i]
    mean /= n_pairs
    for i in range(n):
        if joint[i]:
            influence[i] -= mean

"""Rank correlation of one pair at many lags in sliding windows, exactly and fast.

The centred doubled midrank of a row is the sum of the signs of its differences to the rows of the window.
So it can follow the window: an entering row adds one sign to every row, a leaving row takes one away.

For a pair, only rows observed on both sides count. Each side first keeps its *base* ranks, among all its
own observations of the window; these serve every lag. At one lag, the few *lone* rows, seen on this side but
missing on the other, must not count; the sum of signs against them is kept beside, and follows the window too.
Base less lone is the centred rank among the joint rows, and three sums of products give the correlation.

All numbers are whole. Rows are numbered within a stretch of time (:class:`Stretch`) that begins with one
empty window, so that sliding in from nothing needs no case of its own. Both sides of the pair lie one behind
the other in the same arrays, x first; ``room`` is the distance from a row of x to the same row of y.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.arguments import Floats, Integers
from rhovane.stats.compiled import compiled
from rhovane.stats.narrow import BLOCK, product_sums16, set_signs, shift_signs, sum_signs, tau_sums16
from rhovane.stats.rank_kernels import Ranks, dense_ranks
from rhovane.stats.rolling_reasons import Codes, judge

Narrow = NDArray[np.int16]
Counts = NDArray[np.int32]

SEEN = -1  # all bits of a mask
LARGEST_NARROW = 2**15 - 1
# Numbers of 16 bits of base ranks held for one side: 128 kB, so that both sides fit the second-level cache.
BASE_NUMBERS = 65_536
LARGEST_BATCH = 16  # windows


@dataclass(frozen=True)
class Stretch:
    """Both series of a pair over a stretch of rows, prepared for sliding.

    Attributes
    ----------
    room : int
        Rows of the stretch and 16 more: what each side takes in the arrays.
    ranks : ndarray of int16, shape (2 * room,)
        Dense rank of each side within the stretch; 0 where missing.
    seen : ndarray of int16, shape (2 * room,)
        -1 (all bits) where observed, else 0.
    missing : ndarray of int32
        Rows of x without an observation, in order, then those of y.
    missing_before : ndarray of int32, shape (2 * room,)
        Place in ``missing`` of the first missing row of that side from each row on.
    """

    room: int
    ranks: Narrow
    seen: Narrow
    missing: Counts
    missing_before: Counts


def stretch_of(x: Ranks, y: Ranks, first_x: int, first_y: int, n_rows: int, window: int) -> Stretch:
    """Return ``n_rows`` rows of x and y from ``first_x`` and ``first_y`` on, behind one empty window.

    ``x`` and ``y`` are dense ranks over the whole series (-1 missing). Rows before a series (negative) are missing.
    """
    room = window + n_rows + BLOCK
    ranks = np.zeros(2 * room, dtype=np.int16)
    seen = np.zeros(2 * room, dtype=np.int16)
    before = np.zeros(2 * room, dtype=np.int32)
    missing: list[Counts] = []
    for side, (values, first) in enumerate(((x, first_x), (y, first_y))):
        absent = min(max(-first, 0), n_rows)
        start = side * room + window + absent
        stop = side * room + window + n_rows
        dense = values[first + absent : max(first, -n_rows) + n_rows]
        if dense.max(initial=0) > LARGEST_NARROW:
            # More distinct values than 16 bits hold: rank afresh within the stretch.
            dense, _ = dense_ranks(np.where(dense < 0, np.nan, dense))
        present = dense >= 0
        ranks[start:stop][present] = dense[present]
        seen[start:stop][present] = SEEN
        absent_row = seen[side * room : (side + 1) * room] == 0
        absent_row[-BLOCK:] = False
        gaps_so_far = 0 if side == 0 else len(missing[0])
        before[side * room + 1 : (side + 1) * room] = np.cumsum(absent_row[:-1])
        before[side * room : (side + 1) * room] += gaps_so_far
        missing.append(np.flatnonzero(absent_row).astype(np.int32))
    return Stretch(room, ranks, seen, np.concatenate(missing), before)


@compiled
def slide_base(
    ranks: Narrow, seen: Narrow, end: int, window: int, base: Narrow, before: int, after: int
) -> None:
    """Fill the base ranks of the window that ends at ``end`` from those of the window one row earlier.

    They lie in ``base`` from the places ``before`` and ``after`` on. Entries of missing rows hold the rank that
    a value there would have; they are masked where they matter.
    """
    start = end - window + 1
    kept = window - 1
    entering = ranks[end]
    leaving = ranks[start - 1]
    shift_signs(
        base, after, base, before + 1, ranks, start, kept, entering, seen[end], leaving, seen[start - 1]
    )
    base[after + kept] = sum_signs(ranks, start, seen, start, kept, entering)


@compiled
def slide_spearman(
    ranks: Narrow,
    seen: Narrow,
    missing: Counts,
    missing_before: Counts,
    room: int,
    lags: Integers,
    window: int,
    step: int,
    min_pairs: int,
    chunk: int,
    statistic: Floats,
    n_pairs: Counts,
    code: Codes,
) -> None:
    """Fill Spearman's rho, by lag and window, for windows that end at row 2·window - 1 + reach, and every step on.

    ``reach`` is the largest |lag|; the arrays are those of a :class:`Stretch`; ``chunk`` is
    :func:`rhovane.stats.narrow.rows_in_32_bits` of the window.

    Lags are taken in turn over a few windows at a time (a batch), so that what one lag needs stays in the
    processor's nearest cache. Divisions are slow there: no remainders and no ranges with a step inside.
    """
    n_lags, n_windows = statistic.shape
    reach = 0
    for lag in lags:
        reach = max(reach, abs(lag))
    slot = window + BLOCK
    batch = max(1, min(n_windows, LARGEST_BATCH, (BASE_NUMBERS // slot - reach) // step))
    # Base ranks of all windows that a batch looks at, a slot each, by the end of the window.
    slots = (batch - 1) * step + reach + 1
    base_room = slots * slot + BLOCK
    base = np.zeros(2 * base_room, np.int16)
    signs = np.zeros(2 * n_lags * room, np.int16)
    # The ranks of the lone rows, by side and lag; where those of the last window begin and end; the end of the
    # window that the signs belong to (-1: none).
    queue_room = len(missing) + 1
    queue = np.zeros(2 * n_lags * queue_room, np.int16)
    first_lone = np.arange(2 * n_lags) * queue_room
    last_lone = np.arange(2 * n_lags) * queue_room
    signs_end = np.full(n_lags, -1, np.int64)
    late = np.zeros(2, np.int64)
    base_at = np.zeros(2, np.int64)
    first_end = 2 * window - 1 + reach
    slid = window - 1
    newest = 0  # slot of the window that ends at row ``slid``
    for first_row in range(0, n_windows, batch):
        last_row = min(first_row + batch, n_windows)
        last_end = first_end + (last_row - 1) * step
        while slid < last_end:
            slid += 1
            before = newest * slot
            newest = newest + 1 if newest + 1 < slots else 0
            for side in range(2):
                move = side * base_room
                slide_base(
                    ranks[side * room :],
                    seen[side * room :],
                    slid,
                    window,
                    base,
                    move + before,
                    move + newest * slot,
                )
        for k in range(n_lags):
            late[0] = max(lags[k], 0)
            late[1] = max(-lags[k], 0)
            for row in range(first_row, last_row):
                end = first_end + row * step
                start = end - window + 1
                # Pairs from ``oldest`` to before ``gone`` left since the last window; those from ``fresh`` on entered.
                oldest = start if row == 0 else start - step
                fresh = start if row == 0 else max(start, end - step + 1)
                gone = min(start, oldest + window)
                enough = True
                for side in range(2):
                    other = 1 - side
                    own_row = side * room - late[side]
                    other_row = other * room - late[other]
                    apart = late[other] - late[side] + side * room
                    place = side * n_lags + k
                    old_first = first_lone[place]
                    old_last = last_lone[place]
                    first = old_first
                    for gap in range(missing_before[other_row + oldest], missing_before[other_row + gone]):
                        first += seen[missing[gap] + apart] & 1
                    last = old_last
                    for gap in range(missing_before[other_row + fresh], missing_before[other_row + end + 1]):
                        if seen[missing[gap] + apart] != 0:
                            queue[last] = ranks[missing[gap] + apart]
                            last += 1
                    first_lone[place] = first
                    last_lone[place] = last
                    if side == 0:
                        gaps = missing_before[own_row + end + 1] - missing_before[own_row + start]
                        count = window - gaps - (last - first)
                        n_pairs[k, row] = count
                        enough = count >= min_pairs
                    if not enough:
                        continue
                    sign_row = place * room
                    entered = start
                    if signs_end[k] >= start:
                        entered = end - step + 1
                        entering = last - old_last
                        leaving = first - old_first
                        for j in range(max(entering, leaving)):
                            shift_signs(
                                signs,
                                sign_row + start,
                                signs,
                                sign_row + start,
                                ranks,
                                own_row + start,
                                entered - start,
                                queue[min(old_last + j, last)],
                                np.int16(-1) if j < entering else np.int16(0),
                                queue[min(old_first + j, first)],
                                np.int16(-1) if j < leaving else np.int16(0),
                            )
                    # The last block may reach past the window; those rows are set again when they enter.
                    set_signs(
                        signs,
                        sign_row + entered,
                        ranks,
                        own_row + entered,
                        queue,
                        first,
                        end + 1 - entered,
                        last - first,
                    )
                if not enough:
                    # The signs stay behind; they start afresh at the next window that counts.
                    signs_end[k] = -1
                    statistic[k, row], code[k, row] = judge(0, 0, 0, n_pairs[k, row], min_pairs)
                    continue
                signs_end[k] = end
                for side in range(2):
                    here = newest - (last_row - 1 - row) * step - late[side]
                    base_at[side] = side * base_room + (here if here >= 0 else here + slots) * slot
                xx = np.int64(0)
                yy = np.int64(0)
                xy = np.int64(0)
                part = 0
                while part < window:
                    sums = product_sums16(
                        base,
                        base_at[0] + part,
                        signs,
                        k * room + start + part,
                        seen,
                        start - late[0] + part,
                        base,
                        base_at[1] + part,
                        signs,
                        (n_lags + k) * room + start + part,
                        seen,
                        room + start - late[1] + part,
                        min(chunk, window - part),
                    )
                    xx += sums[0]
                    yy += sums[1]
                    xy += sums[2]
                    part += chunk
                statistic[k, row], code[k, row] = judge(xy, xx, yy, n_pairs[k, row], min_pairs)


@compiled
def slide_kendall(
    ranks: Narrow,
    seen: Narrow,
    room: int,
    lags: Integers,
    window: int,
    step: int,
    min_pairs: int,
    statistic: Floats,
    n_pairs: Counts,
    code: Codes,
) -> None:
    """Fill Kendall's tau-b, by lag and window, for the same windows as :func:`slide_spearman`."""
    n_lags, n_windows = statistic.shape
    reach = 0
    for lag in lags:
        reach = max(reach, abs(lag))
    first_end = 2 * window - 1 + reach
    first_pair = first_end - window + 1
    for k in range(n_lags):
        row_x = -max(lags[k], 0)
        row_y = room - max(-lags[k], 0)
        score = np.int64(0)
        untied_x = np.int64(0)
        untied_y = np.int64(0)
        count = 0
        row = 0
        due = first_end
        for end in range(first_pair, first_end + (n_windows - 1) * step + 1):
            # The first window fills from nothing: no pair before it counts.
            start = max(end - window + 1, first_pair)
            gone = end - window
            if gone >= first_pair and seen[row_x + gone] != 0 and seen[row_y + gone] != 0:
                sums = tau_sums16(
                    ranks,
                    seen,
                    row_x + start,
                    row_y + start,
                    end - start,
                    ranks[row_x + gone],
                    ranks[row_y + gone],
                )
                count -= 1
                score -= sums[0]
                untied_x -= sums[1]
                untied_y -= sums[2]
            if seen[row_x + end] != 0 and seen[row_y + end] != 0:
                sums = tau_sums16(
                    ranks,
                    seen,
                    row_x + start,
                    row_y + start,
                    end - start,
                    ranks[row_x + end],
                    ranks[row_y + end],
                )
                count += 1
                score += sums[0]
                untied_x += sums[1]
                untied_y += sums[2]
            if end == due:
                n_pairs[k, row] = count
                statistic[k, row], code[k, row] = judge(score, untied_x, untied_y, count, min_pairs)
                due += step
                row += 1

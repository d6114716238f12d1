"""Definitions of the alert sheet's statistics, written out slowly; imports nothing from the package."""

from __future__ import annotations

import math
from collections.abc import Sequence


def slopes_between(x: Sequence[float], y: Sequence[float]) -> list[float]:
    """All slopes between two rows that have both values and differ in x, ascending."""
    rows = [(a, b) for a, b in zip(x, y, strict=True) if not (math.isnan(a) or math.isnan(b))]
    return sorted(
        (rows[j][1] - rows[i][1]) / (rows[j][0] - rows[i][0])
        for i in range(len(rows))
        for j in range(i + 1, len(rows))
        if rows[i][0] != rows[j][0]
    )


def middle(values: Sequence[float]) -> float:
    """The median."""
    ordered = sorted(v for v in values if not math.isnan(v))
    n = len(ordered)
    return ordered[n // 2] if n % 2 else (ordered[n // 2 - 1] + ordered[n // 2]) / 2


def onset_weights(z: Sequence[float], day: int, first: int, longest: int = 42) -> list[float]:
    """exp of half the squared sum over the count of the deviations from each day on, adding up to 1."""
    logs = []
    for start in range(max(first, day - longest + 1), day + 1):
        known = [v for v in z[start : day + 1] if not math.isnan(v)]
        logs.append(sum(known) ** 2 / (2 * len(known)) if known else 0.0)
    weights = [math.exp(v - max(logs)) for v in logs]
    return [w / sum(weights) for w in weights]


def shortest_run(weights: Sequence[float], share: float) -> int:
    """Length of the shortest run of days that holds the share."""
    n = len(weights)
    return min(j - i for i in range(n) for j in range(i + 1, n + 1) if sum(weights[i:j]) >= share - 1e-12)


def sum_scale(daily: Sequence[float], n: int, fewest: int) -> float:
    """Root mean square of the sums of n days in a row, at least the square root of n."""
    known = [v for v in daily if not math.isnan(v)]
    sums = [sum(known[i : i + n]) for i in range(len(known) - n + 1)]
    usual = sum(s * s for s in sums) / len(sums) if len(sums) >= fewest else 0.0
    return math.sqrt(max(usual, n))

"""Data faults and quality checks hour by hour, straight from their definitions."""

from __future__ import annotations

import math
import statistics


def missing(value: float) -> bool:
    return value != value


def stretches(condition: list[bool]) -> list[tuple[int, int]]:
    """First and last index of every run of True."""
    found, begin = [], None
    for i, holds in enumerate([*condition, False]):
        if holds and begin is None:
            begin = i
        if not holds and begin is not None:
            found.append((begin, i - 1))
            begin = None
    return found


def naive_gaps(values: list[float], first: int, longest: int) -> list[tuple[int, int]]:
    empty = [missing(v) and i >= first for i, v in enumerate(values)]
    return [(a, b) for a, b in stretches(empty) if b - a + 1 > longest]


def naive_stuck(values: list[float], accumulates: bool, stuck_hours: int) -> list[tuple[int, int]]:
    def repeats(i: int) -> bool:
        return i > 0 and values[i] == values[i - 1] and not (accumulates and values[i] == 0)

    found = []
    for a, b in stretches([repeats(i) for i in range(len(values))]):
        begin = a - 1
        usual = range(max(1, begin - 672 + 1), begin + 1)
        pairs = sum(not missing(values[i]) and not missing(values[i - 1]) for i in usual)
        share = sum(repeats(i) for i in usual) / max(pairs, 168)
        needed = math.log(1e-6) / math.log(share) if 0 < share < 1 else 0
        if b - begin + 1 >= max(stuck_hours, min(needed, 336)):
            found.append((begin, b))
    return found


def naive_low_coverage(
    per_day: list[int], first_day: int, window: int, least: float
) -> list[tuple[int, int]]:
    low = []
    for d in range(len(per_day)):
        whole = d >= first_day + window - 1 and d >= window - 1
        low.append(whole and sum(per_day[d - window + 1 : d + 1]) / (24 * window) < least)
    return stretches(low)


def naive_dry(
    gauge: list[float], other: list[float], wet_hours: int, back: int = 1440
) -> list[tuple[int, int]]:
    """Runs of a gauge that is dry against one neighbour."""
    contrary = [g == 0 and o > 0 for g, o in zip(gauge, other, strict=True)]
    found, t = [], 0
    while t < len(gauge):
        begin = max([i + 1 for i in range(t + 1) if gauge[i] > 0] + [max(0, t - back + 1)])
        hours = [i for i in range(begin, t + 1) if contrary[i]]
        if len(hours) < wet_hours:
            t += 1
            continue
        wet_again = [i for i in range(t + 1, len(gauge)) if gauge[i] > 0]
        end = wet_again[0] - 1 if wet_again else len(gauge) - 1
        found.append((hours[0], end))
        t = end + 1
    return found


def naive_ties(week: list[float]) -> float:
    """Probability that two observations of a week are equal, repeats of the hour before left out."""
    kept = [v for i, v in enumerate(week) if not missing(v) and (i == 0 or v != week[i - 1])]
    if len(kept) < 84:
        return math.nan
    equal = sum(kept[i] == kept[j] for i in range(len(kept)) for j in range(i))
    return equal / (len(kept) * (len(kept) - 1) / 2)


def naive_step(levels: list[list[float]], own: int, day: int) -> tuple[float, float] | None:
    """Logarithm of the factor and strength of a step of one series against the others, without thresholds of size."""
    days = range(day - 28, day + 7)

    def median(values: list[float]) -> float:
        known = [v for v in values if not missing(v)]
        return statistics.median(known) if known else math.nan

    def centred(series: list[float]) -> list[float]:
        middle = median(series[day - 28 : day])
        return [
            math.log(max(series[d], 0.05 * middle) / middle) if not missing(series[d]) else math.nan
            for d in days
        ]

    mine = centred(levels[own])
    others = [centred(s) for i, s in enumerate(levels) if i != own]
    against = [m - median([o[k] for o in others]) for k, m in enumerate(mine)]
    before = [v for v in against[:28] if not missing(v)]
    after = [v for v in against[28:] if not missing(v)]
    if len(before) < 14 or len(after) < 5:
        return None
    size = statistics.median(after) - statistics.median(before)
    squares = sum((v - statistics.fmean(side)) ** 2 for side in (before, after) for v in side)
    return size, size / math.sqrt(squares / (len(before) + len(after) - 2))

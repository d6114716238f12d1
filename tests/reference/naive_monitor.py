"""Hourly and daily scores and the change chart from their definitions, slowly; imports nothing from src."""

from __future__ import annotations

import math

import numpy as np
from scipy.special import ndtri


def naive_midrank(values: np.ndarray, t: int, *, days: int = 30, steps: int = 24, fewest: int = 48) -> float:
    """Midrank of hour t among the last ``days`` whole days that end with its own day."""
    end = (t // steps + 1) * steps
    stretch = [v for v in values[max(0, end - days * steps) : end] if not math.isnan(v)]
    if math.isnan(values[t]) or len(stretch) < fewest:
        return math.nan
    less = sum(v < values[t] for v in stretch)
    equal = sum(v == values[t] for v in stretch)
    return (less + 0.5 * equal) / len(stretch)


def naive_levels(values: np.ndarray, *, steps: int = 24) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Midranks, normal scores and scores without their trailing 28-day mean at that hour, all hours."""
    rank = np.array([naive_midrank(values, t, steps=steps, fewest=2 * steps) for t in range(len(values))])
    score = ndtri(np.clip(rank, 1e-4, 1 - 1e-4))
    level = np.full(len(values), np.nan)
    for t in range(len(values)):
        same_hour = [score[t - k * steps] for k in range(28) if t - k * steps >= 0]
        known = [s for s in same_hour if not math.isnan(s)]
        if known:
            level[t] = score[t] - sum(known) / len(known)
    return rank, score, level


def naive_ar2(level: np.ndarray) -> tuple[float, float]:
    """Yule-Walker coefficients of order two from the pairs that exist, as the solution of the equations.

    A lag at which there are no pairs counts as uncorrelated.
    """
    centred = level - np.nanmean(level)
    products = [centred[k:] * centred[: len(level) - k] for k in range(3)]
    c = [np.nanmean(p) if np.isfinite(p).any() else 0.0 for p in products]
    a = np.linalg.solve([[c[0], c[1]], [c[1], c[0]]], [c[1], c[2]])
    return float(a[0]), float(a[1])


def naive_filter(level: np.ndarray, a1: float, a2: float) -> np.ndarray:
    """Scaled forecast errors of an AR(2) process by the general Kalman recursions with matrices."""
    move = np.array([[a1, a2], [1.0, 0.0]])
    noise = np.array([[1.0, 0.0], [0.0, 0.0]])
    state, cov = np.zeros(2), np.eye(2) * 1e4
    out = np.full(len(level), np.nan)
    for t, value in enumerate(level):
        state, cov = move @ state, move @ cov @ move.T + noise
        if math.isnan(value):
            continue
        error, variance = value - state[0], cov[0, 0]
        if variance <= 2.5:
            out[t] = error / math.sqrt(variance)
        gain = cov[:, 0] / variance
        state = state + gain * error
        cov = cov - np.outer(gain, cov[0])
    return out


def naive_innovations(level: np.ndarray, day: int, *, steps: int = 24) -> tuple[np.ndarray, float]:
    """Innovations of one day, and the within-day standard deviation of the 90 days before it."""
    begin = max(0, day - 90) * steps
    past = level[begin : day * steps]
    if np.isfinite(past).sum() < 14 * steps:
        return np.full(steps, np.nan), math.nan
    errors = naive_filter(level[begin : (day + 1) * steps], *naive_ar2(past))
    in_a_row = [t for t in range(2, len(past)) if np.isfinite(past[t - 2 : t + 1]).all()]
    enough = len(in_a_row) >= 0.3 * np.isfinite(past).sum()
    sd = np.std([errors[t] for t in in_a_row]) if enough else np.nanstd(errors[: len(past)])
    by_day = past.reshape(-1, steps)
    known = by_day[np.isfinite(by_day).any(axis=1)]
    within = known - np.nanmean(known, axis=1, keepdims=True)
    return np.clip(errors[len(past) :] / sd, -3.5, 3.5), math.sqrt(np.nanmean(within**2))


def naive_day_correlation(
    a: np.ndarray, b: np.ndarray, *, centred: bool, scale: tuple[float, float]
) -> float:
    """atanh of the correlation of one day's joint values; NaN where a side has next to no variance."""
    if centred:
        a, b = (np.clip((v - v.mean()) / s, -3.5, 3.5) for v, s in zip((a, b), scale, strict=True))
    least = 0.02 if centred else 0.2
    if (a**2).sum() <= least or (b**2).sum() <= least:
        return math.nan
    return math.atanh(np.clip((a * b).sum() / math.sqrt((a**2).sum() * (b**2).sum()), -0.98, 0.98))


def naive_reference(score: np.ndarray, weight: np.ndarray, day: int, *, length: int = 90, guard: int = 14):
    """Weighted mean, standard deviation per unit weight, total weight and number of the last valid days."""
    days = [d for d in range(max(0, day - guard)) if not math.isnan(score[d])][-length:]
    if len(days) < 20:
        return math.nan, math.nan, math.nan, len(days)
    z, w = score[days], weight[days]
    mean = float((w * z).sum() / w.sum())
    return mean, math.sqrt(float((w * (z - mean) ** 2).sum()) / (len(days) - 1)), float(w.sum()), len(days)


def naive_scale(history: list[np.ndarray], own: int, judged: list[np.ndarray] | None = None) -> float:
    """Out-of-sample standard deviation of one pair's deviations, shrunk to all pairs'.

    ``judged`` holds for each pair the part of its history that was judged; all of it if left out.
    """

    def products(z: np.ndarray, lag: int) -> np.ndarray:
        both = z[lag:] * z[: len(z) - lag] if lag < len(z) else np.empty(0)
        return both[np.isfinite(both)]

    def variance(parts: list[np.ndarray]) -> tuple[float, float]:
        everything = np.concatenate([products(z, 0) for z in parts])
        pooled = (everything.sum() + 300.0) / (len(everything) + 300.0)
        mine = products(parts[own], 0)
        return pooled, (mine.sum() + 75.0 * pooled) / (len(mine) + 75.0)

    pooled, whole = variance(history)
    sums = [0.0]
    for lag in (1, 2, 3, 4, 5, 6):
        shared = np.concatenate([products(z, lag) for z in history])
        common = shared.sum() / max(len(shared), 1) / pooled
        mine = products(history[own], lag)
        sums.append(sums[-1] + (mine.sum() / whole + 200.0 * common) / (len(mine) + 200.0))
    out_of_sample = variance(judged or history)[1]
    return math.sqrt(out_of_sample * (1.0 + 2.0 * min(max(sums), 4.0)))


def naive_evidence(z: np.ndarray, mean: float) -> np.ndarray:
    """Log Shiryaev-Roberts mixture after each day, from the sum over possible first days of a change."""
    out = np.empty(len(z))
    for n in range(1, len(z) + 1):
        sides = []
        for sign in (1.0, -1.0):
            total = 0.0
            for shift in (1.5, 2.5, 4.0):
                total += sum(math.exp(sum(sign * shift * v - shift**2 / 2 for v in z[k:n])) for k in range(n))
            sides.append(total / 3)
        up, down = sides if mean >= 0 else sides[::-1]
        share = 0.65 if abs(math.tanh(mean)) >= 0.1 else 0.5
        out[n - 1] = math.log(share * down + (1 - share) * up)
    return out

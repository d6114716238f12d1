"""The evidence of a small network night by night from its definition, slowly; imports nothing from src.

Covers what leads up to an alarm: references, network control, out-of-sample scale, unrest, evidence and days
set aside, for a history in which nothing has alarmed yet.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from reference.naive_monitor import naive_reference, naive_scale


def station(key: str) -> str:
    return key.split(".")[0]


def naive_charts(members: list[tuple[str, str]]) -> list[tuple[str, object, list[int]]]:
    """(kind, name, pairs): every pair, series with two partners, stations whose series share other stations."""
    charts: list[tuple[str, object, list[int]]] = [("pair", i, [i]) for i in range(len(members))]
    for key in sorted({k for m in members for k in m}):
        at = [i for i, m in enumerate(members) if key in m]
        if len({k for i in at for k in members[i] if k != key}) > 1:
            charts.append(("series", key, at))
    for place in sorted({station(k) for m in members for k in m}):
        at = [i for i, m in enumerate(members) if [station(k) for k in m].count(place) == 1]
        own = {k for i in at for k in members[i] if station(k) == place}
        if len(at) > 1 and len(own) > 1:
            charts.append(("station", place, at))
    return charts


def naive_correlations(past: np.ndarray, related: np.ndarray) -> np.ndarray:
    """Shrunken correlations of the last 120 reference days; ``past`` is NaN where not known."""
    recent = past[:, -120:]
    n = len(recent)
    out, days = np.eye(n), np.full((n, n), 20.0)
    raw = np.zeros((n, n))
    for i in range(n):
        for j in range(n):
            both = np.isfinite(recent[i]) & np.isfinite(recent[j])
            days[i, j] = max(both.sum(), 20)
            raw[i, j] = (recent[i][both] * recent[j][both]).sum() / days[i, j]
    squares, chance = 0.0, 0.0
    for i in range(n):
        for j in range(n):
            if i != j and related[i, j]:
                out[i, j] = raw[i, j] / math.sqrt(max(raw[i, i], 0.2) * max(raw[j, j], 0.2))
                squares += out[i, j] ** 2
                chance += 1.0 / days[i, j]
    between = (out - np.eye(n)) * (1.0 - min(max(chance / max(squares, 1e-12), 0.3), 1.0))
    while np.linalg.eigvalsh(np.eye(n) + between)[0] <= 0.1:
        between = between * 0.7
    return np.eye(n) + between


def wallace(t: float, df: float) -> float:
    """Normal deviate of a t statistic."""
    return math.copysign((8 * df + 1) / (8 * df + 3) * math.sqrt(df * math.log(1 + t * t / df)), t)


def naive_watch(
    score: np.ndarray,
    hours: np.ndarray,
    members: list[tuple[str, str]],
    *,
    length: int = 90,
    guard: int = 14,
    aside: Sequence[tuple[tuple[int, ...], int, int | None, int, int | None, bool]] = (),
) -> tuple[np.ndarray, np.ndarray]:
    """Deviation and log evidence of every chart and day, shape (n_charts, n_days) both, NaN where not judged.

    ``aside`` holds days set aside: pairs, first and last day, first day that knows and first that has forgotten,
    whether the days are judged.
    """
    n_pairs, n_days = score.shape
    weight = np.maximum(hours - 2.0, 1.0)
    charts = naive_charts(members)
    n = len(charts)
    classes = ["~".join(sorted(k.split(".")[1] for k in m)) for m in members]
    related = np.array(
        [[classes[i] == classes[j] or bool({*members[i]} & {*members[j]}) for j in range(n_pairs)] for i in range(n_pairs)]
    )  # fmt: skip
    touched = [[any(related[p, q] for p in c[2]) for q in range(n_pairs)] for c in charts]
    live = [True] * n
    raw, counted = np.full((n, n_days), np.nan), np.full((n, n_days), np.nan)
    unrest, scaled = np.full((n, n_days), np.nan), np.full((n, n_days), np.nan)
    value = np.full((n, n_days), np.nan)
    begun = [-1] * n
    sr = np.zeros((n, 2, 3))
    correlations = np.eye(n_pairs)
    for day in range(length, n_days):
        barred, mute = np.zeros((2, n_pairs, n_days), dtype=bool)
        for pairs, first, last, known, forgotten, judge in aside:
            if known <= day and (forgotten is None or day < forgotten):
                for p in pairs:
                    end = n_days if last is None else last + 1
                    barred[p, first:end] = True
                    mute[p, first:end] |= not judge
                    for h, chart in enumerate(charts):
                        if day == known > first and p in chart[2]:
                            sr[h] = 0
        valid = np.where(barred, np.nan, score)
        reference = [
            naive_reference(valid[p], weight[p], day, length=length, guard=guard) for p in range(n_pairs)
        ]
        mean, sd = np.array([r[0] for r in reference]), np.array([r[1] for r in reference])
        unit = np.sqrt(weight)
        begin, end = max(0, day - guard - 200), max(0, day - guard)
        past = np.clip((valid[:, begin:end] - mean[:, None]) / sd[:, None] * unit[:, begin:end], -5, 5)
        today = np.where(mute[:, day], np.nan, (score[:, day] - mean) / sd * unit[:, day])
        seen = [p for p in range(n_pairs) if math.isfinite(today[p])]
        r = np.nan_to_num(np.tanh(mean))
        step = np.nan_to_num(unit[:, day] / sd)
        direction = np.zeros((n, n_pairs))
        for h, (kind, _, pairs) in enumerate(charts):
            for p in pairs:
                if kind == "pair":
                    direction[h, p] = 1.0
                elif abs(r[p]) >= 0.1:
                    direction[h, p] = (math.atanh(0.5 * r[p]) - math.atanh(r[p])) * step[p]
        if (day - length) % 7 == 0:
            correlations = naive_correlations(past, related)
        covariance = correlations.copy()
        for name in set(classes):
            mine = [p for p in seen if classes[p] == name]
            g = np.zeros(n_pairs)
            for p in mine:
                g[p] = r[p] / (1 + abs(r[p])) * step[p]
            if len(mine) >= 2:
                covariance += 4.0 * np.outer(g, g) / (g @ g / len(mine) + 1e-9)
        inverse = np.zeros((n_pairs, n_pairs))
        if seen:
            inverse[np.ix_(seen, seen)] = np.linalg.inv(covariance[np.ix_(seen, seen)])
        if (day - length) % 28 == 0 and seen:
            for h, (kind, _, pairs) in enumerate(charts):
                d = direction[h]
                cosines = [
                    abs(d @ inverse[:, p]) / math.sqrt(max(d @ inverse @ d * inverse[p, p], 1e-12))
                    for p in pairs
                ]
                live[h] = kind == "pair" or max(cosines) <= 0.85
        for h in range(n):
            size = np.abs(direction[h])
            if not live[h] or size.sum() == 0 or size[seen].sum() < 0.6 * size.sum():
                continue
            f = direction[h] @ inverse
            outputs, at = [], []
            for t in range(end - begin - 1, -1, -1):
                known = np.isfinite(past[:, t])
                if np.abs(f[known]).sum() / np.abs(f).sum() >= 0.8 and len(outputs) < length:
                    outputs.append(float(f[known] @ past[known, t]))
                    at.append(begin + t)
            k = len(outputs)
            if k < 20:
                continue
            centre, variance = np.mean(outputs), np.var(outputs, ddof=1)
            t_value = (f[seen] @ today[seen] - centre) / math.sqrt(variance * (1 + 1 / k))
            raw[h, day] = wallace(float(t_value), k - 1)
            if begun[h] < 0:
                begun[h] = day
                for t, u in zip(at, outputs, strict=True):
                    counted[h, t] = np.clip((u - centre) / math.sqrt(variance * (1 - 1 / k)), -3.5, 3.5)
            counted[h, day] = np.clip(raw[h, day], -3.5, 3.5)
        clean = np.array(
            [
                np.where(2 * barred[c[2]].sum(axis=0) > len(c[2]), np.nan, counted[h])
                for h, c in enumerate(charts)
            ]
        )
        # Reference days count while fewer than 90 days were judged.
        starts = [max(0, day - 200, min(begun[h], end - 90)) for h in range(n)]
        history = [clean[h, starts[h] : end] for h in range(n)]
        judged = [clean[h, max(0, day - 200, begun[h]) : end] for h in range(n)]
        z = np.array([raw[h, day] / naive_scale(history, h, judged) for h in range(n)])
        for h in range(n):
            others = [abs(z[p]) for p in range(n_pairs) if not touched[h][p] and math.isfinite(z[p])]
            if len(others) >= 6:
                unrest[h, day] = np.median(others) / 0.6745
            recent = [u for u in unrest[h, max(0, day - 4) : day + 1] if math.isfinite(u)]
            if math.isfinite(z[h]):
                calm = max(float(np.mean(recent)), 1.0) ** 2 if recent else 1.0
                scaled[h, day] = np.clip(z[h] / calm, -3.5, 3.5)
                for k, shift in enumerate((1.5, 2.5, 4.0) if h < n_pairs else (1.0, 2.0, 4.0)):
                    for side, sign in enumerate((1, -1)):
                        sr[h, side, k] = (1 + sr[h, side, k]) * math.exp(
                            sign * shift * scaled[h, day] - shift**2 / 2
                        )
                up, down = sr[h].mean(axis=1)
                if h >= n_pairs:
                    value[h, day] = math.log(up)
                else:
                    loss, gain = (down, up) if mean[h] >= 0 else (up, down)
                    share = 0.65 if abs(math.tanh(mean[h])) >= 0.1 else 0.5
                    value[h, day] = math.log(share * loss + (1 - share) * gain)
    return scaled, value

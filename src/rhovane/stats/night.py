"""The nights of a network up to the next one that needs an answer, in one compiled walk.

Each night: a reference for every pair, the deviation of the day, network control by generalised least
squares, out-of-sample scale, evidence. What these are is told in :mod:`rhovane.stats.network` and
:mod:`rhovane.stats.chart`; what is done about a crossing, in :mod:`rhovane.stats.replay`.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.chart import (
    MAX_DEVIATION,
    MIN_REFERENCE_DAYS,
    gather_all,
    normal_from_t,
    scales,
)
from rhovane.stats.compiled import compiled
from rhovane.stats.network import (
    CLASS_VARIANCE,
    HISTORY_DAYS,
    LEAST_HISTORY_SHARE,
    LEAST_OBSERVED_SHARE,
    MAX_HISTORY_DEVIATION,
    add_class_movement,
    directions,
    inverse_among,
    references,
    unrest,
)

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

UNREST_POWER = 2.0
"""Power of the unrest that deviations are divided by; 1 leaves a fifth more false alarms."""
UNREST_DAYS = 5
"""Days over which the unrest elsewhere in the network is averaged."""
MAX_KEPT_DEVIATION = 7.0
"""Deviations that explain an incident are kept inside this."""
LEARNING, WATCHED, CHANGED, NOT_SCORED, NOT_JUDGED = 0, 1, 2, 3, 4


class Links(NamedTuple):
    """How charts and pairs hang together; charts are the hypotheses of a structure, pairs first.

    ``classes`` (n_pairs,); ``belongs`` and ``touches`` (n_charts, n_pairs): pairs of a chart, and pairs that
    share a class or a series with one of them.
    """

    classes: NDArray[np.int64]
    belongs: Flags
    touches: Flags


class Records(NamedTuple):
    """What is known and found of every day; first axis pairs or charts, last axis days.

    Pairs: ``score``, ``weight``, ``usable`` (may enter a reference), ``unjudged`` (set aside, does not alarm),
    ``kept`` (deviation, for explaining an incident), ``mean`` and ``sd`` of the reference, ``state``. Charts:
    ``counted`` and ``counts`` (deviations that make the scale and 1, or 0 and 0), ``spoiled`` (days that must
    not), ``barred`` (days that are not to as long as they are set aside; empty where none are), ``unrest``,
    ``scaled``, ``value``, ``limit``.
    """

    score: Floats
    weight: Floats
    usable: Flags
    unjudged: Flags
    kept: Floats
    mean: Floats
    sd: Floats
    state: NDArray[np.int8]
    counted: Floats
    counts: Floats
    spoiled: Flags
    barred: Flags
    unrest: Floats
    scaled: Floats
    value: Floats
    limit: Floats


class Standing(NamedTuple):
    """What the next night starts from.

    ``frozen`` (3, n_pairs): mean, sd and total weight of a reference that is kept, else NaN; ``held``
    (n_pairs,): pairs not judged; ``ready`` (n_pairs,): first day judged; ``inverse`` (n_pairs, n_pairs): of the
    correlations learnt between them; ``live`` (n_charts,): charts that are judged; ``begun`` (n_charts,): the first day a
    chart was judged, -1 before; ``threshold`` (n_charts,); ``statistic`` (n_charts, 2, n_shifts).
    """

    frozen: Floats
    held: Flags
    ready: NDArray[np.int64]
    inverse: Floats
    live: Flags
    begun: NDArray[np.int64]
    threshold: Floats
    statistic: Floats


class View(NamedTuple):
    """One night's view of the network: reference and deviation (n_pairs,), directions, movement of classes."""

    mean: Floats
    sd: Floats
    total: Floats
    deviation: Floats
    observed: Flags
    direction: Floats
    movement: Floats


def empty_view(n_charts: int, n_pairs: int) -> View:
    """Room for one night's view."""
    mean, sd, total, deviation = np.full((4, n_pairs), np.nan)
    return View(
        mean, sd, total, deviation, np.zeros(n_pairs, dtype=bool), np.zeros((n_charts, n_pairs)), np.zeros(n_pairs)
    )  # fmt: skip


@compiled
def look(
    day: int, guard: int, length: int, links: Links, records: Records, standing: Standing, view: View
) -> None:
    """References and deviations of one day, and the directions of its hypotheses; fills ``view``."""
    found = references(records.score, records.weight, records.usable, day, guard, length, MIN_REFERENCE_DAYS)
    for p in range(len(view.mean)):
        kept = standing.frozen if not np.isnan(standing.frozen[0, p]) else found
        view.mean[p], view.sd[p], view.total[p] = kept[0, p], kept[1, p], kept[2, p]
        # A pair that still learns may yet choose another score: nothing of it may enter today's decisions.
        if day < standing.ready[p]:
            view.mean[p], view.sd[p], view.total[p] = np.nan, np.nan, np.nan
        spread = view.sd[p] * np.sqrt(1.0 / records.weight[p, day] + 1.0 / view.total[p])
        view.deviation[p] = (records.score[p, day] - view.mean[p]) / spread
        if records.unjudged[p, day]:
            view.deviation[p] = np.nan
        view.observed[p] = not np.isnan(view.deviation[p]) and not standing.held[p]
        records.mean[p, day], records.sd[p, day] = view.mean[p], view.sd[p]
        if view.observed[p]:
            records.kept[p, day] = min(max(view.deviation[p], -MAX_KEPT_DEVIATION), MAX_KEPT_DEVIATION)
        if day < standing.ready[p]:
            records.state[p, day] = LEARNING
        elif records.unjudged[p, day]:
            records.state[p, day] = NOT_JUDGED
        else:
            records.state[p, day] = NOT_SCORED if np.isnan(view.deviation[p]) else WATCHED
    directions(links.belongs, view.mean, view.sd, records.weight[:, day], view.direction, view.movement)


@compiled
def standardised_history(day: int, guard: int, records: Records, view: View) -> tuple[Floats, Flags]:
    """Deviations of the reference days from today's references, 0 where not known; (n_pairs, n_days) both."""
    n_pairs = len(view.mean)
    begin, end = max(0, day - guard - HISTORY_DAYS), max(0, day - guard)
    past, known = np.zeros((n_pairs, end - begin)), np.zeros((n_pairs, end - begin), dtype=np.bool_)
    for p in range(n_pairs):
        if np.isnan(view.mean[p]):
            continue
        for t in range(begin, end):
            if records.usable[p, t] and not np.isnan(records.score[p, t]):
                z = (records.score[p, t] - view.mean[p]) / view.sd[p] * np.sqrt(records.weight[p, t])
                past[p, t - begin] = min(max(z, -MAX_HISTORY_DEVIATION), MAX_HISTORY_DEVIATION)
                known[p, t - begin] = True
    return past, known


@compiled
def filters_of(links: Links, view: View, standing: Standing) -> Floats:
    """Weight of each pair's deviation in each chart's evidence, (n_charts, n_pairs), 0 for pairs not seen."""
    n_charts, n_pairs = links.belongs.shape
    inverse = inverse_among(standing.inverse, view.observed)
    scored = np.empty(n_pairs, dtype=np.bool_)
    for p in range(n_pairs):
        scored[p] = not np.isnan(view.deviation[p])
    add_class_movement(inverse, links.classes, scored, view.observed, view.movement, CLASS_VARIANCE)
    out = np.empty((n_charts, n_pairs))
    for i in range(n_pairs):
        for j in range(n_pairs):
            out[i, j] = inverse[i, j]
    if n_charts > n_pairs:
        np.dot(view.direction[n_pairs:], inverse, out[n_pairs:])
    return out


@compiled
def missing_share(filters: Floats, known: Flags) -> Floats:
    """Share of each filter's weight that was missing on each day of the history, shape (n_charts, n_days)."""
    n_charts, n_pairs = filters.shape
    n_days = known.shape[1]
    total, by_day = np.zeros(n_charts), np.zeros((n_days, n_charts))
    size = np.empty(n_charts)
    for p in range(n_pairs):
        for h in range(n_charts):
            size[h] = abs(filters[h, p])
            total[h] += size[h]
        for t in range(n_days):
            if not known[p, t]:
                for h in range(n_charts):
                    by_day[t, h] += size[h]
    out = np.empty((n_charts, n_days))
    for h in range(n_charts):
        for t in range(n_days):
            out[h, t] = by_day[t, h] / max(total[h], 1e-9)
    return out


@compiled
def plain_deviations(day: int, records: Records, view: View) -> Floats:
    """Today's deviations in the units of the history, 0 where not observed; shape (n_pairs,)."""
    out = np.zeros(len(view.mean))
    for p in range(len(out)):
        if view.observed[p]:
            z = (records.score[p, day] - view.mean[p]) / view.sd[p]
            out[p] = z * np.sqrt(records.weight[p, day])
    return out


@compiled
def observed_enough(view: View, live: Flags) -> Flags:
    """Charts that are judged today: live ones of whose direction enough is observed; shape (n_charts,)."""
    out = live.copy()
    for h in range(len(out)):
        if h < len(view.mean):
            out[h] = view.observed[h]
        elif out[h]:
            full, seen = 0.0, 0.0
            for p in range(len(view.mean)):
                size = abs(view.direction[h, p])
                full += size
                if view.observed[p]:
                    seen += size
            out[h] = full > 0.0 and seen >= LEAST_OBSERVED_SHARE * full
    return out


@compiled
def judge_charts(
    day: int, guard: int, length: int, links: Links, records: Records, standing: Standing, view: View
) -> None:
    """Every hypothesis's deviation of the day, after network control, into its chart."""
    n_charts, n_pairs = links.belongs.shape
    past, known = standardised_history(day, guard, records, view)
    filters = filters_of(links, view, standing)
    missing = missing_share(filters, known)
    outputs = np.dot(filters, past)
    begin = day - guard - past.shape[1]
    today = np.dot(filters, plain_deviations(day, records, view))
    judged = observed_enough(view, standing.live)
    raw = np.full(n_charts, np.nan)
    use = np.zeros(past.shape[1], dtype=np.bool_)
    for h in range(n_charts):
        if not judged[h]:
            continue
        n, mean, squares = 0, 0.0, 0.0
        for t in range(past.shape[1] - 1, -1, -1):
            use[t] = n < length and missing[h, t] <= 1.0 - LEAST_HISTORY_SHARE
            if use[t]:
                n += 1
                mean += outputs[h, t]
        if n < MIN_REFERENCE_DAYS:
            continue
        mean /= n
        for t in range(past.shape[1]):
            if use[t]:
                squares += (outputs[h, t] - mean) ** 2
        variance = max(squares / (n - 1), 1e-12)
        raw[h] = normal_from_t((today[h] - mean) / np.sqrt(variance * (1.0 + 1.0 / n)), n - 1.0)
        if standing.begun[h] < 0:
            # Its reference days tell how persistent it is before any day has been judged.
            standing.begun[h] = day
            for t in range(past.shape[1]):
                if use[t] and not records.spoiled[h, begin + t]:
                    z = (outputs[h, t] - mean) / np.sqrt(variance * (1.0 - 1.0 / n))
                    records.counted[h, begin + t] = min(max(z, -MAX_DEVIATION), MAX_DEVIATION)
                    records.counts[h, begin + t] = 1.0
        if not records.spoiled[h, day]:
            records.counted[h, day] = min(max(raw[h], -MAX_DEVIATION), MAX_DEVIATION)
            records.counts[h, day] = 1.0
    scale = scales(records.counted, records.counts, records.barred, standing.begun, day, guard)
    z = np.empty(n_charts)
    for h in range(n_charts):
        z[h] = raw[h] / scale[h]
    restless = unrest(z[:n_pairs], links.touches)
    for h in range(n_charts):
        records.unrest[h, day] = restless[h]
        if not np.isnan(z[h]):
            z[h] /= weather(records.unrest[h, max(0, day - UNREST_DAYS + 1) : day + 1])
            records.scaled[h, day] = min(max(z[h], -MAX_DEVIATION), MAX_DEVIATION)
    gather_all(records.scaled[:, day], view.mean, standing.statistic, records.value[:, day])
    for h in range(n_charts):
        if np.isnan(records.scaled[h, day]):
            records.value[h, day] = np.nan


@compiled
def weather(recent: Floats) -> float:
    """What a chart's deviation is divided by: 1, or the squared unrest elsewhere in the last days."""
    total, n = 0.0, 0
    for value in recent:
        if not np.isnan(value):
            total += value
            n += 1
    return max(total / n, 1.0) ** UNREST_POWER if n > 0 else 1.0


@compiled
def judge_until_crossing(
    day: int,
    stop: int,
    first: int,
    guard: int,
    length: int,
    links: Links,
    records: Records,
    standing: Standing,
    view: View,
) -> int:
    """Judge days from ``day`` on; the last day judged: the first with a crossing, or the one before ``stop``."""  # fmt: skip
    for today in range(day, stop):
        look(today, guard, length, links, records, standing, view)
        if today < first:
            continue
        judge_charts(today, guard, length, links, records, standing, view)
        crossed = False
        for h in range(len(standing.threshold)):
            records.limit[h, today] = standing.threshold[h]
            crossed = crossed or records.value[h, today] > standing.threshold[h]
        if crossed:
            return today
    return stop - 1

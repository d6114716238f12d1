"""Steps "hourly scores" and "evidence": one number a day for every pair that is not up to date.

The hourly scores of the series are compiled work without the interpreter lock: they are begun in threads of
their own before the windows are computed, and collected by the evidence.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor

import numpy as np
from numpy.typing import NDArray

from rhovane.pipeline.context import OUT_OF_TIME, PART_ERRORS, Night, WatchedPair, reason_of
from rhovane.stats.compiled import available_threads
from rhovane.stats.daily_scores import DailyScores, lookback_days, pair_scores
from rhovane.stats.hourly_scores import SCORED_BEFORE_DAYS, SeriesScores, series_scores
from rhovane.store import LATER_COLUMNS

STEP = "evidence"


def begin_hourly_scores(night: Night) -> str:
    """Begin the hourly scores of every series that a stale pair needs, on all cores.

    Once a series for the pairs with controls, which look back further, and once for those without; from
    the earliest day that any of them needs.
    """
    stale = [w for w in night.watched if w.stale_from is not None]
    if not stale:
        return "nothing to begin"
    grid = night.grid()
    first = night.days.day_of(grid.start)
    last = (night.as_of - first).days
    begin = _begin(stale, first)
    needed = {one for w in stale for one in _series_of(w)}
    order = sorted(needed, key=lambda one: (not one[1], one[0]))  # the long ones first
    fresh = (min(w.stale_from for w in stale if w.stale_from) - first).days
    workers = ThreadPoolExecutor(max_workers=max(1, available_threads()))
    for one in order:
        days = range(begin[one[1]], last + 1)
        known = None
        if night.memory is not None:
            days = range(min(days.start, max(0, fresh - SCORED_BEFORE_DAYS)), days.stop)
            known = night.memory.scores(one, first, fresh)
        night.hourly[one] = workers.submit(_hourly_scores, grid.column(one[0]), days, known)
    workers.shutdown(wait=False)
    return f"{len(order)} series begun"


def _begin(stale: Sequence[WatchedPair], first: dt.date) -> dict[bool, int]:
    """The earliest day whose hourly scores pairs need, with controls (True) and without."""
    begin: dict[bool, int] = {}
    for watched in stale:
        assert watched.stale_from is not None
        adjusted = bool(watched.recipe.adjusted_for)
        day = max(0, (watched.stale_from - first).days - lookback_days(0, controls=adjusted))
        begin[adjusted] = min(day, begin.get(adjusted, day))
    return begin


def _hourly_scores(values: NDArray[np.float64], days: range, known: SeriesScores | None) -> SeriesScores:
    """Scores of a series for these days at least; those known already are not computed again."""
    if known is None or known.first_day > days.start:
        return series_scores(values, days)
    fresh = range(known.first_day + known.n_days, days.stop)
    return known.followed_by(series_scores(values, fresh, known=known))


def _series_of(watched: WatchedPair) -> list[tuple[str, bool]]:
    """The series whose hourly scores a pair needs, each with whether the pair has controls."""
    recipe = watched.recipe
    return [(key, bool(recipe.adjusted_for)) for key in (recipe.first, recipe.second, *recipe.adjusted_for)]


def _collected(
    night: Night,
) -> tuple[dict[tuple[str, bool], SeriesScores], dict[tuple[str, bool], str]]:
    """The hourly scores begun before, and the reason for each series that has none."""
    shared, spoilt = {}, {}
    for one, scores in night.hourly.items():
        night.may_go_on()
        try:
            shared[one] = scores.result()
        except PART_ERRORS as error:
            spoilt[one] = f"series {one[0]}: {reason_of(error)}"
    return shared, spoilt


def judge_days(night: Night) -> str:
    """Daily scores of every stale pair and day; written as evidence."""
    summary = score_days(night)
    if night.scored:
        night.store.write_evidence(night.id, night.scored)
    return summary


def score_days(night: Night) -> str:
    """Daily scores of every stale pair and day, kept in ``night.scored``."""
    stale = [w for w in night.watched if w.stale_from is not None]
    if not stale:
        return "nothing to judge"
    first = night.days.day_of(night.grid().start)
    last = (night.as_of - first).days
    shared, spoilt = _collected(night)
    if night.memory is not None:
        night.memory.remember_scores(first, shared)
        begin = _begin(stale, first)
        shared = {one: scores.since(begin[one[1]]) for one, scores in shared.items()}
    columns: dict[str, list[NDArray[np.generic]]] = {}
    n_days = n_scored = 0
    for watched in stale:
        assert watched.stale_from is not None
        days = range((watched.stale_from - first).days, last + 1)
        bad = [spoilt[one] for one in _series_of(watched) if one in spoilt]
        if bad or not night.may_go_on():
            night.pair_failed(STEP, watched, bad[0] if bad else OUT_OF_TIME)
            continue
        try:
            scores = _pair_days(night, watched, shared, days)
        except PART_ERRORS as error:
            night.pair_failed(STEP, watched, reason_of(error))
            continue
        n_days += len(days)
        n_scored += int(np.count_nonzero(scores.innovation_hours + scores.shape_hours))
        for name, values in _columns(watched, scores, first).items():
            columns.setdefault(name, []).append(values)
    if n_days:
        night.scored = {name: np.concatenate(parts) for name, parts in columns.items()}
    return f"{n_days} days of {len(stale)} pairs, {n_days - n_scored} without enough joint hours"


def _pair_days(
    night: Night, watched: WatchedPair, shared: Mapping[tuple[str, bool], SeriesScores], days: range
) -> DailyScores:
    recipe = watched.recipe
    mask = night.arrays(watched).mask
    adjusted = bool(recipe.adjusted_for)
    return pair_scores(
        shared[recipe.first, adjusted],
        shared[recipe.second, adjusted],
        days=days,
        controls=[shared[key, adjusted] for key in recipe.adjusted_for],
        keep=None if mask.everything else mask.kept,
    )


def _columns(watched: WatchedPair, scores: DailyScores, first: dt.date) -> dict[str, NDArray[np.generic]]:
    n = len(scores.day)
    return {
        "pair_key": np.full(n, watched.pair.key, dtype=object),
        "recipe_hash": np.full(n, watched.pair.recipe_hash, dtype=object),
        "day": np.datetime64(first, "D") + scores.day,
        "innovation": scores.innovation,
        "innovation_hours": scores.innovation_hours,
        "shape": scores.shape,
        "shape_hours": scores.shape_hours,
        "course": np.full(n, np.nan) if scores.course is None else scores.course,
        "course_hours": np.zeros(n) if scores.course_hours is None else scores.course_hours,
        **{name: scores.lagged[:, i] for i, name in enumerate(LATER_COLUMNS)},
    }

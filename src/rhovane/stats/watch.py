"""The watch over all pairs: daily scores in, incidents and the evidence behind them out.

A pure function, replayed over the whole daily history each night: the same scores give the same
incidents, and later days never change what was decided on earlier ones.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.chart import WEIGHT_OFFSET
from rhovane.stats.daily_scores import DailyScores
from rhovane.stats.decisions import SetAside, checked_decisions
from rhovane.stats.incident import Incident, Judgement
from rhovane.stats.network import quantity_of, structure_of
from rhovane.stats.replay import Replay, Spans
from rhovane.stats.resume import WatchMemory

__all__ = ["DayState", "Incident", "Judgement", "SetAside", "Watch", "WatchMemory", "watch"]

Floats = NDArray[np.float64]

SHAPE_ADVANTAGE = 1.1
"""The day shape is watched where its signal is this many times that of the innovations."""
COURSE_ADVANTAGE = 1.5
"""The day course is watched where its signal is this many times that of both others,"""
COURSE_SIGNAL = 2.5
"""and at least this: a daily cycle that any two series share is no evidence of a relation."""
MIN_CHOICE_DAYS = 30
"""Fewest scored days of the first baseline for choosing."""
CHOICES = ("auto", "innovation", "day shape", "day course")


class DayState(IntEnum):
    """What a pair was in at the end of a day."""

    LEARNING = 0
    WATCHED = 1
    CHANGED = 2
    NOT_SCORED = 3
    NOT_JUDGED = 4


@dataclass(frozen=True)
class Watch:
    """What the watch saw and decided; arrays have shape (n_days, n_pairs).

    ``score`` and ``weight`` are what was judged (NaN, 0: not scored); ``reference_mean`` and
    ``reference_sd`` what it was judged against (atanh of a daily correlation; per unit of weight), NaN
    while learning; ``deviation`` the pair's standardised deviation after network control and ``evidence``
    its log chart value, both NaN while learning, changed, not scored or not judged; ``threshold`` the limit of the
    evidence; ``state`` a :class:`DayState`. ``recipe`` says for each pair which score was watched:
    "innovation", "day shape" or "day course".
    Charts of series and stations are not among these arrays; an incident they raised carries its own
    evidence and threshold.
    """

    day: NDArray[np.int64]
    incidents: tuple[Incident, ...]
    score: Floats
    weight: Floats
    reference_mean: Floats
    reference_sd: Floats
    deviation: Floats
    evidence: Floats
    threshold: Floats
    state: NDArray[np.int8]
    recipe: tuple[str, ...]


def watch(
    scores: Sequence[DailyScores],
    *,
    false_alarms_per_year: float,
    members: Sequence[tuple[str, str]] | None = None,
    classes: Sequence[str] | None = None,
    choice: Sequence[str] | None = None,
    baseline_days: int = 90,
    guard_days: int = 14,
    rebaseline_days: int = 110,
    set_aside: Sequence[SetAside] = (),
    new_baselines: Sequence[tuple[int, int]] = (),
    memory: WatchMemory | None = None,
) -> Watch:
    """Watch the daily scores of all pairs of a network, day by day.

    Parameters
    ----------
    scores : sequence of DailyScores
        One a pair, all for the same consecutive days; row 0 is the first day of the history.
    false_alarms_per_year : float
        Expected false alarms a year over all pairs together.
    members : sequence of (str, str), optional
        Keys "STATION.quantity" of each pair's two series; without them every pair stands alone. Keys
        without a dot name series of no station.
    classes : sequence of str, optional
        Pairs of one class are moved together by weather and season; default: the two quantities. Give
        another recipe of the same quantities another class.
    choice : sequence of str, optional
        For each pair "auto" (default), "innovation", "day shape" or "day course". "auto" decides on the
        pair's first baseline, and takes the day course for pairs of two different quantities only.
    baseline_days : int
        Length of the moving reference, and days of learning before the first judgement.
    guard_days : int
        Days between the reference and the day judged.
    rebaseline_days : int
        Days after an alarm when a change that has lasted becomes the new reference.
    set_aside : sequence of SetAside, optional
        Days of pairs that never enter a reference and, where said so, do not alarm, each from the day on
        which that was known. A change whose days are set aside does not become the new reference by itself.
    new_baselines : sequence of (pair, day), optional
        The open change of the pair ends on that day with ending "new baseline", by decision.
    memory : WatchMemory, optional
        Where an earlier call stood: judging goes on from there where it can, with the same result.

    Returns
    -------
    Watch
        Incidents in order of their alarm day, and the evidence. A day without a score never alarms.

    Raises
    ------
    ValueError
        When pairs cover different days, a number is out of range, or a decision names no pair of these.
    """
    _check(
        scores, false_alarms_per_year, members, classes, choice, baseline_days, guard_days, rebaseline_days
    )
    n_pairs = len(scores)
    day = scores[0].day if n_pairs else np.empty(0, np.int64)
    judged = [
        _judged(s, choice[i] if choice else "auto", members[i] if members else None, baseline_days)
        for i, s in enumerate(scores)
    ]
    shape = (n_pairs, len(day))
    score = np.array([j[0] for j in judged]).reshape(shape)
    weight = np.array([j[1] for j in judged]).reshape(shape)
    lagged = np.array([s.lagged for s in scores]).reshape(*shape, -1) if n_pairs else np.empty((0, 0, 5))
    alone = [(f"{i}a", f"{i}b") for i in range(n_pairs)]
    stations = members is not None and all("." in key for pair in members for key in pair)
    history = (
        score,
        weight,
        lagged,
        np.array([j[2] for j in judged], dtype=np.int64),
        structure_of(members or alone, classes, stations=stations),
        Spans(baseline_days, guard_days, rebaseline_days),
        false_alarms_per_year,
        checked_decisions(set_aside, new_baselines, n_pairs),
    )
    if memory is None:
        replay = Replay(*history)
        incidents = replay.run()
    else:
        replay = memory.resume(*history)
        incidents = replay.advance(memory)
    days = slice(0, len(day))
    return Watch(
        day,
        incidents,
        score.T,
        np.where(np.isnan(score), 0.0, weight).T,
        replay.means[:, days].T,
        replay.sds[:, days].T,
        replay.scaled[:n_pairs, days].T,
        replay.values[:n_pairs, days].T,
        replay.limits[:n_pairs, days].T,
        replay.state[:, days].T,
        tuple(j[3] for j in judged),
    )


def _check(
    scores: Sequence[DailyScores],
    false_alarms_per_year: float,
    members: Sequence[tuple[str, str]] | None,
    classes: Sequence[str] | None,
    choice: Sequence[str] | None,
    baseline_days: int,
    guard_days: int,
    rebaseline_days: int,
) -> None:
    if not (np.isfinite(false_alarms_per_year) and false_alarms_per_year > 0):
        raise ValueError(f"false_alarms_per_year={false_alarms_per_year} must be a number above 0.")
    for name, value, least in (
        ("baseline_days", baseline_days, 30),
        ("guard_days", guard_days, 1),
        ("rebaseline_days", rebaseline_days, 14),
    ):
        if value < least:
            raise ValueError(f"{name}={value} is too few; choose {least} or more.")
    for i, one in enumerate(scores):
        if not np.array_equal(one.day, scores[0].day):
            raise ValueError(f"pair {i} covers other days than pair 0; pass daily scores for the same days.")
    for name, given in (("members", members), ("classes", classes), ("choice", choice)):
        if given is not None and len(given) != len(scores):
            raise ValueError(f"{name} has {len(given)} entries for {len(scores)} pairs; pass one a pair.")
    for i, word in enumerate(choice or ()):
        if word not in CHOICES:
            raise ValueError(f"choice[{i}]={word!r} is not known; choose one of {', '.join(CHOICES)}.")


def _judged(
    one: DailyScores, choice: str, pair: tuple[str, str] | None, baseline_days: int
) -> tuple[Floats, Floats, int, str]:
    """Score, weight, first day judged and recipe of a pair, decided on its first baseline only."""
    parts = {
        "innovation": (one.innovation, one.innovation_hours),
        "day shape": (one.shape, one.shape_hours),
        "day course": (one.course, one.course_hours),
    }
    scored = np.flatnonzero(np.isfinite(one.innovation) | np.isfinite(one.shape))
    first = int(scored[0]) if len(scored) else len(one.day)
    # Two thirds of a baseline must lie behind a pair that joins late.
    ready = max(baseline_days, first + 2 * baseline_days // 3)
    if choice == "auto":
        choice = "innovation"
        if len(one.day) >= ready:
            strength = {k: 0.0 if v is None else signal(v[:ready]) for k, (v, _) in parts.items()}
            if strength["day shape"] > SHAPE_ADVANTAGE * strength["innovation"]:
                choice = "day shape"
            differ = pair is not None and quantity_of(pair[0]) != quantity_of(pair[1])
            course = strength["day course"]
            if differ and course > max(COURSE_SIGNAL, COURSE_ADVANTAGE * strength[choice]):
                choice = "day course"
    value, hours = parts[choice]
    if value is None or hours is None:
        raise ValueError('"day course" is chosen for a pair whose scores hold none; compute or store it.')
    return value, np.maximum(hours - WEIGHT_OFFSET, 1.0), ready, choice


def signal(score: Floats) -> float:
    """How far the scores of a pair stand from "no relationship", in their own standard deviations.

    The absolute mean over the standard deviation widened for autocorrelation at one day; 0 with fewer
    than 30 scored days.
    """
    value = score[np.isfinite(score)]
    if len(value) < MIN_CHOICE_DAYS:
        return 0.0
    centred = value - value.mean()
    variance = float((centred**2).mean())
    if variance <= 0.0:
        return 0.0
    autocorrelation = max(float((centred[1:] * centred[:-1]).mean()) / variance, 0.0)
    return float(abs(value.mean()) / np.sqrt(variance * (1.0 + 2.0 * autocorrelation)))

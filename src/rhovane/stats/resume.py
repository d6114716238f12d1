"""The watch goes on from where it was: a night judges its new days, not the whole history.

A :class:`WatchMemory` keeps the state of the watch as it stood at the end of some recent days. When the
scores up to one of these days are unchanged, judging goes on from it; the result is that of a full replay
to the last bit (tested). Whatever else differs (pairs, budget, a revised day further back), the history is
replayed from the beginning.
"""

from __future__ import annotations

import copy
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.decisions import Decisions
from rhovane.stats.incident import Incident
from rhovane.stats.network import Structure
from rhovane.stats.replay import SETTLING_DAYS, Replay, Spans

Floats = NDArray[np.float64]

SPARE_DAYS = 120
"""Days of room for new days in a kept state; after them the history is replayed once."""
RECENT = 10
"""The states of this many latest days are kept,"""
WEEKS = 10
"""and those of one day a week for this many weeks: readings arrive or are revised that late."""


class ResumableReplay(Replay):
    """A replay with room for days to come; :meth:`advance` judges those it has not judged yet."""

    def __init__(
        self,
        score: Floats,
        weight: Floats,
        lagged: Floats,
        ready: NDArray[np.int64],
        structure: Structure,
        spans: Spans,
        false_alarms_per_year: float,
        decisions: Decisions,
    ) -> None:
        room = ((0, 0), (0, SPARE_DAYS + SETTLING_DAYS))
        super().__init__(
            np.pad(score, room, constant_values=np.nan),
            np.pad(weight, room, constant_values=1.0),
            np.pad(lagged, (*room, (0, 0)), constant_values=np.nan),
            ready,
            structure,
            spans,
            false_alarms_per_year,
            decisions,
        )
        self.n_judged = 0
        self.n_known = score.shape[1]

    def copied(self) -> ResumableReplay:
        """An independent copy; what never changes is shared."""
        other = copy.copy(self)
        for name, value in vars(self).items():
            if isinstance(value, np.ndarray):
                setattr(other, name, value.copy())
        other.open = copy.deepcopy(self.open)
        other.closed = list(self.closed)
        return other

    def set_ready(self, ready: NDArray[np.int64]) -> None:
        """Take over the first judged days, where those still to come have moved."""
        self.ready = ready
        self.first = int(ready.min(initial=self.score.shape[1]))

    def takes(self, n_days: int) -> bool:
        """Whether there is room for a history of this many days."""
        return n_days <= int(self.score.shape[1]) - SETTLING_DAYS

    def learn(self, score: Floats, weight: Floats, lagged: Floats) -> None:
        """Replace the days that are not judged yet by those of a longer (or revised) history."""
        begin, end = self.n_judged, score.shape[1]
        known = slice(begin, max(end, self.n_known))
        self.score[:, known], self.weight[:, known], self.lagged[:, known] = np.nan, 1.0, np.nan
        fresh = slice(begin, end)
        self.score[:, fresh], self.weight[:, fresh] = score[:, fresh], weight[:, fresh]
        self.lagged[:, fresh] = lagged[:, fresh]
        self.usable[:, known] = np.isfinite(self.score[:, known])
        for incident in self.open:
            if incident.settled:  # days of a change never enter a reference
                self.usable[incident.pairs, known] = False
        self.n_known = end

    def advance(self, memory: WatchMemory) -> tuple[Incident, ...]:
        """Judge the days known but not judged, leaving their states in memory; all incidents so far."""
        memory.forget_after(self.n_judged)
        for day in range(self.n_judged, self.n_known):
            self.judge(day)
            self.n_judged = day + 1
            if _worth_keeping(self.n_judged, self.n_known):
                memory.states.append(self.copied())
        return self.incidents()


@dataclass
class WatchMemory:
    """States of the watch at the ends of recent days, for the nights of one process."""

    states: list[ResumableReplay] = field(default_factory=list)
    key: tuple[object, ...] = ()

    def resume(
        self,
        score: Floats,
        weight: Floats,
        lagged: Floats,
        ready: NDArray[np.int64],
        structure: Structure,
        spans: Spans,
        false_alarms_per_year: float,
        decisions: Decisions,
    ) -> ResumableReplay:
        """A replay of this history, judged as far as a kept state allows, with all its days known."""
        key = (structure.members, tuple(structure.classes.tolist()), spans, false_alarms_per_year)
        if key != self.key:
            self.states, self.key = [], key
        n_days = score.shape[1]
        for state in reversed(self.states):
            n = state.n_judged
            if (
                n <= n_days
                and state.takes(n_days)
                and _decided(ready, n) == _decided(state.ready, n)
                and state.known.decisions.up_to(n) == decisions.up_to(n)
                and _same(state.score[:, :n], score[:, :n])
                and _same(state.weight[:, :n], weight[:, :n])
                and _same(state.lagged[:, :n], lagged[:, :n])
            ):
                going = state.copied()
                going.set_ready(ready)
                going.learn(score, weight, lagged)
                going.known = decisions.known_on(n - 1, going.belongs, going.score.shape[1])
                return going
        return ResumableReplay(
            score, weight, lagged, ready, structure, spans, false_alarms_per_year, decisions
        )

    def forget_after(self, n_judged: int) -> None:
        """Keep the states up to a number of judged days; older ones are thinned out."""
        self.states = [
            s for s in self.states if s.n_judged <= n_judged and _worth_keeping(s.n_judged, n_judged)
        ]


def _worth_keeping(n_judged: int, newest: int) -> bool:
    """Whether a later night may go on from here: the last days, and once a week further back."""
    age = newest - n_judged
    return age < RECENT or (n_judged % 7 == 0 and age < 7 * WEEKS)


def _decided(ready: NDArray[np.int64], n_days: int) -> Sequence[int]:
    """First judged days as far as they concern the first days: later ones only need to stay later."""
    return [min(int(day), n_days) for day in ready]


def _same(ours: Floats, theirs: Floats) -> bool:
    return np.array_equal(ours, theirs, equal_nan=True)

"""What the nights of one process remember of each other, to save reading and judging it again.

Nothing here changes a result: what is remembered is the store's own content up to the first stale day, and
the state of the watch there. A night without memory reads and judges everything, to the same end.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rhovane.pipeline.arrays import load_grid
from rhovane.pipeline.note_changes import KnownNotes
from rhovane.pipeline.step_memory import StepMemory
from rhovane.prepare import Grid, days_of
from rhovane.settings import Settings
from rhovane.stats.hourly_scores import SCORED_BEFORE_DAYS, SeriesScores
from rhovane.stats.watch import WatchMemory
from rhovane.store import Store

REMEMBERED_DAYS = SCORED_BEFORE_DAYS + 60
"""Days of hourly scores that are kept: a revision further back has the night compute them again."""

Columns = dict[str, NDArray[np.generic]]
SeriesUse = tuple[str, bool]  # key, and whether for pairs with controls


@dataclass
class NightMemory:
    """Grid, evidence and data notes as the night before left them, and the states of the watch."""

    watch: WatchMemory = field(default_factory=WatchMemory)
    notes: KnownNotes | None = None
    steps: StepMemory | None = None
    _grid: Grid | None = None
    _evidence: Columns | None = None
    _recipes: tuple[str, ...] = ()
    _findings: object = None
    _scores: dict[SeriesUse, tuple[dt.date, SeriesScores]] = field(default_factory=dict)

    def grid(
        self, settings: Settings, store: Store, first: dt.date, last: dt.date, stale_from: dt.date
    ) -> Grid:
        """Observations of all series from ``first`` to ``last``; only from ``stale_from`` on read anew."""
        keys = sorted(s.key for s in settings.series)
        known = self._grid
        days = days_of(settings.network.standard_offset)
        start, fresh = days.start_of(first), days.start_of(stale_from)
        if known is None or known.keys != tuple(keys) or start < known.start or fresh <= start:
            self._grid = load_grid(settings, store, keys, first, last)
            return self._grid
        kept = known.values[known.row_of(start) : known.row_of(fresh)]
        if len(kept) != (fresh - start) // 3600:  # the night before ended earlier than the first stale day
            self._grid = load_grid(settings, store, keys, first, last)
            return self._grid
        new = load_grid(settings, store, keys, stale_from, last)
        self._grid = Grid(start, tuple(keys), np.concatenate((kept, new.values)))
        return self._grid

    def scores(self, one: SeriesUse, first: dt.date, fresh: int) -> SeriesScores | None:
        """Hourly scores of a series before day ``fresh``, days numbered from ``first``, as the nights before made them.

        None unless they reach right up to that day.
        """
        if one not in self._scores:
            return None
        known_first, known = self._scores[one]
        moved = (first - known_first).days  # a day's number then, less its number now
        end = fresh + moved - known.first_day
        if not 0 < end <= known.n_days:
            return None
        begin = max(0, moved - known.first_day)
        return known.part(begin, end, first_day=known.first_day + begin - moved) if begin < end else None

    def remember_scores(self, first: dt.date, scores: Mapping[SeriesUse, SeriesScores]) -> None:
        """Keep hourly scores for the next night; their days are numbered from ``first``."""
        for one, known in scores.items():
            begin = max(0, known.n_days - REMEMBERED_DAYS)
            kept = known.part(begin, known.n_days, first_day=known.first_day + begin)
            self._scores[one] = (first, kept)

    def forget(self) -> None:
        """Remember nothing: what a failed night computed was not kept by the store."""
        self.watch = WatchMemory()
        self._grid = self._evidence = self._findings = self.notes = self.steps = None
        self._recipes = ()
        self._scores = {}

    def same_findings(self, findings: object) -> bool:
        """Whether the watch found what it found the night before: then the log is in step already."""
        same = findings == self._findings
        self._findings = findings
        return same

    def evidence(self, recipes: Sequence[str]) -> Columns | None:
        """The evidence of these recipes as the night before left it; None when others were asked for."""
        return self._evidence if tuple(recipes) == self._recipes else None

    def remember_evidence(self, recipes: Sequence[str], columns: Columns) -> None:
        """Keep the evidence of a night for the next one."""
        self._recipes, self._evidence = tuple(recipes), columns

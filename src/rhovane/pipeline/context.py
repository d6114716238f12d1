"""What the steps of one night share: settings, the open store, the moment, and what they found so far."""

from __future__ import annotations

import datetime as dt
import math
import time
from collections.abc import Callable, Sequence
from concurrent.futures import Future
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.model import IngestOutcome, Pair
from rhovane.pipeline.arrays import PairArrays, load_grid, pair_arrays
from rhovane.pipeline.memory import NightMemory
from rhovane.pipeline.note_changes import KnownNotes
from rhovane.pipeline.unused import Unused
from rhovane.prepare import Days, Grid, days_of
from rhovane.settings import PairSettings, Settings
from rhovane.stats.daily_scores import HISTORY_DAYS
from rhovane.stats.hourly_scores import SeriesScores
from rhovane.store import NightRecord, Store

HOUR_S = 3600
DAY = dt.timedelta(days=1)
LATEST_STEP_DAYS = 40  # a step in level is noted, or dated anew, at most this many days after it


# What may go wrong with one source, series or pair without stopping the rest.
PART_ERRORS = (ValueError, ArithmeticError, LookupError)
OUT_OF_TIME = "not reached within night.step_limit_minutes; the next night goes on with it"


def reason_of(error: Exception) -> str:
    """What went wrong with a part, in words: a refusal speaks for itself, another error is named."""
    return str(error) if type(error) is ValueError else f"{type(error).__name__}: {error}"


class NightStopped(Exception):
    """The night was asked to stop, and did between two parts of a step; nothing of its results is kept."""


@dataclass(frozen=True)
class WatchedPair:
    """A pair with its recipe and the first days whose evidence and windows are not up to date (None: all are)."""

    recipe: PairSettings
    pair: Pair
    stale_from: dt.date | None = None
    windows_from: dt.date | None = None


@dataclass(frozen=True)
class Trouble:
    """A part of a step that failed while the rest went on."""

    step: str
    part: str
    reason: str


@dataclass(frozen=True)
class StepOutcome:
    """What one step of a night did; ``peak_mb`` is the most memory the process had held by its end."""

    name: str
    seconds: float
    summary: str
    troubles: tuple[Trouble, ...] = ()
    peak_mb: int = 0

    def as_json(self) -> dict[str, Any]:
        """For the night ledger."""
        return {
            "step": self.name,
            "seconds": round(self.seconds, 4),
            "peak_mb": self.peak_mb,
            "summary": self.summary,
            "failed": [{"part": t.part, "reason": t.reason} for t in self.troubles],
        }


@dataclass
class Night:
    """One execution of the steps. Steps read what earlier steps left here and add their own.

    ``as_of`` is the last day the night covers (standard time): nothing later is used. ``now`` is the
    moment it runs (aware, UTC); only entry points read the clock. ``previous`` is the newest night that
    finished before; ``checkpoint_ingest`` whether reading the feed folds the write-ahead log into the
    file by itself (a whole night does so at its end, where ``checkpoint_night`` says so).
    ``memory`` lets a night go on from the one before in the same process; the result is the same.
    ``arrived`` are the feed files to look at; None: whatever the feed folders hold. ``scored`` is the evidence that this night computed.
    ``data_version``: use the readings as they were after this ingest; None: as they are. ``unused``: the readings
    taken out of the statistics; None: those that calendar and site log take out now.
    ``changed`` is the first new or revised hour of each series, ``notes_from`` the first day whose data notes are not up
    to date, ``cuts`` where windows of a series are split (seconds since 1970), ``windows`` the correlations of this night.
    ``stop`` says whether the night is to stop, ``step_ends`` when the step at work runs out of time (``perf_counter``).
    """

    settings: Settings
    store: Store
    as_of: dt.date
    now: dt.datetime
    id: int = 0
    progress: Callable[[str], None] = lambda _text: None
    recompute_from: dt.date | None = None
    previous: NightRecord | None = None
    checkpoint_ingest: bool = True
    checkpoint_night: bool = True
    memory: NightMemory | None = None
    arrived: Sequence[Path] | None = None
    data_version: int | None = None
    unused: Unused | None = None
    stop: Callable[[], bool] = lambda: False
    step_ends: float = math.inf
    troubles: list[Trouble] = field(default_factory=list)
    ingested: list[IngestOutcome] = field(default_factory=list)
    rejections: list[str] = field(default_factory=list)
    watched: list[WatchedPair] = field(default_factory=list)
    counts: dict[str, Any] = field(default_factory=dict)
    scored: dict[str, NDArray[np.generic]] = field(default_factory=dict)
    hourly: dict[tuple[str, bool], Future[SeriesScores]] = field(default_factory=dict)
    changed: dict[str, dt.datetime] = field(default_factory=dict)
    notes: KnownNotes | None = None
    notes_from: dt.date | None = None
    cuts: dict[str, list[int]] = field(default_factory=dict)
    windows: list[dict[str, NDArray[Any]]] = field(default_factory=list)
    _grid: Grid | None = None
    _arrays: dict[str, PairArrays] = field(default_factory=dict)

    @property
    def days(self) -> Days:
        """The network's days."""
        return days_of(self.settings.network.standard_offset)

    def grid(self) -> Grid:
        """Observations from the earliest reading that any result or data note of this night rests on.

        Loaded once a night, for notes, windows and evidence alike.
        """
        if self._grid is None:
            settings = self.settings
            stale = [w for w in self.watched if w.stale_from is not None]
            lags = [abs(lag) for w in self.watched for lag in settings.lags_of(w.recipe)]
            window_days = (settings.correlation.window_hours + max(lags, default=0)) // 24 + 1
            windows_from = [w.windows_from for w in self.watched if w.windows_from]
            fresh = [w.stale_from for w in stale if w.stale_from]
            stale_from = min([*fresh, self.notes_from] if self.notes_from else (fresh or windows_from))
            reach = max(HISTORY_DAYS, window_days + LATEST_STEP_DAYS)
            first = min(stale_from - reach * DAY, min(windows_from, default=stale_from) - window_days * DAY)
            if self.memory is not None:
                self._grid = self.memory.grid(settings, self.store, first, self.as_of, stale_from)
            else:
                noted = [s.key for s in settings.series] if self.notes_from else []
                used = [w for w in self.watched if w.stale_from or w.windows_from]
                keys = {k for w in used for k in settings.series_of(w.recipe)}.union(noted)
                self._grid = load_grid(
                    settings,
                    self.store,
                    keys,
                    first,
                    self.as_of,
                    max_ingest_id=self.data_version,
                    unused=self.unused,
                )
        return self._grid

    def arrays(self, watched: WatchedPair) -> PairArrays:
        """A pair's members and controls on the night's grid, masked by its recipe; made once a night."""
        key = watched.pair.key
        if key not in self._arrays:
            self._arrays[key] = pair_arrays(self.settings, watched.recipe, self.grid())
        return self._arrays[key]

    def may_go_on(self) -> bool:
        """Whether the step at work has time for another part; asked between parts, where a night may end.

        Raises
        ------
        NightStopped
            The night is to stop.
        """
        if self.stop():
            raise NightStopped
        return time.perf_counter() < self.step_ends

    def failed(self, step: str, part: str, reason: str) -> None:
        """Record that one part of a step failed; the rest goes on."""
        self.troubles.append(Trouble(step, part, reason))

    def pair_failed(self, step: str, watched: WatchedPair, reason: str) -> None:
        """Record that a pair failed; the next night takes it up where it was left."""
        self.failed(step, f"pair {watched.pair.key}", reason)
        if watched.stale_from is not None:
            self.counts.setdefault("left", {})[watched.pair.key] = watched.stale_from.isoformat()

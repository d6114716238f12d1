"""What is silent for lack of data: series that are behind, pairs without a correlation, coverage that falls."""

from __future__ import annotations

import datetime as dt
import math
from dataclasses import dataclass

from rhovane.prepare import days_of
from rhovane.settings import Settings
from rhovane.store import Store

STALE_HOURS = 48  # hours a series may be behind the night's last day before it is called silent
FALL = 0.1  # share of the window's hours lost within a week from which coverage is called falling
WEEK = dt.timedelta(days=7)


@dataclass(frozen=True)
class SilentSeries:
    """A series whose last reading (None: there never was one) is too long ago."""

    series: str
    last_reading: str | None
    hours_behind: int | None

    def in_words(self) -> str:
        """One line."""
        behind = "never seen" if self.hours_behind is None else f"{self.hours_behind} h behind"
        return f"{self.series}: {behind}"


@dataclass(frozen=True)
class SilentPair:
    """A pair without a correlation at lag 0 in the newest window."""

    pair: str
    reason: str

    def in_words(self) -> str:
        """One line."""
        return f"{self.pair}: {self.reason}"


@dataclass(frozen=True)
class FallingCoverage:
    """A pair whose windows hold fewer and fewer joint observations: coverage a week ago and now."""

    pair: str
    before: float
    now: float

    def in_words(self) -> str:
        """One line."""
        return f"{self.pair}: coverage {self.before:.0%} a week before, {self.now:.0%} now"


def silent_series(settings: Settings, store: Store, as_of: dt.date) -> list[SilentSeries]:
    """Series whose last reading is more than ``STALE_HOURS`` before the end of a day."""
    days = days_of(settings.network.standard_offset)
    spans = store.span_of([s.key for s in settings.series])
    found = []
    for one in settings.series:
        seen = spans[one.key][1] if one.key in spans else None
        behind = None if seen is None else (days.last_hour_of(as_of) - int(seen.timestamp())) // 3600
        if behind is None or behind > STALE_HOURS:
            found.append(SilentSeries(one.key, None if seen is None else seen.isoformat(), behind))
    return found


def silent_pairs(settings: Settings, store: Store, as_of: dt.date) -> list[SilentPair]:
    """Pairs without a correlation at lag 0 in the window that ends with a day."""
    row_of = _newest_windows(settings, store, as_of)
    found = []
    for pair in settings.pair:
        if pair.key not in row_of:
            found.append(SilentPair(pair.key, "not computed"))
        elif math.isnan(row_of[pair.key][0]):
            found.append(SilentPair(pair.key, row_of[pair.key][2] or "not computable"))
    return found


def falling_coverage(settings: Settings, store: Store, as_of: dt.date) -> list[FallingCoverage]:
    """Pairs whose coverage at lag 0 fell by ``FALL`` or more within the week that ends with a day."""
    now, before = (_newest_windows(settings, store, day) for day in (as_of, as_of - WEEK))
    return [
        FallingCoverage(key, before[key][1], now[key][1])
        for key in (pair.key for pair in settings.pair)
        if key in now and key in before and before[key][1] - now[key][1] >= FALL
    ]


def _newest_windows(
    settings: Settings, store: Store, as_of: dt.date
) -> dict[str, tuple[float, float, str | None]]:
    """Statistic, coverage and reason of each pair in the window that ends with a day, at lag 0."""
    days = days_of(settings.network.standard_offset)
    end = days.moment(days.end_of(as_of))
    found = store.read_windows(start=end - dt.timedelta(hours=1), end=end, lag=0)
    columns = (found[name].tolist() for name in ("pair_key", "statistic", "coverage", "reason"))
    return {
        key: (statistic, coverage, reason) for key, statistic, coverage, reason in zip(*columns, strict=True)
    }

"""What the alert log says about the watch itself: how much it asks of people, and how often it was right."""

from __future__ import annotations

import datetime as dt
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from rhovane.model import Outcome
from rhovane.review.alert_list import AlertEntry

STALE_DAYS = 14
"""Days without review after which an alert counts as stale."""
CHATTERING_ALERTS = 3
"""Alerts on one suspect within 30 days that count as chattering."""
CHATTERING_DAYS = 30
CONFIRMED = (Outcome.INSTRUMENT, Outcome.DATA_HANDLING, Outcome.REAL_CHANGE)
"""Outcomes that say: there was something."""


@dataclass(frozen=True)
class Chattering:
    """A suspect that was alerted on again and again: the most alerts within 30 days, and those days."""

    suspect: str
    alerts: int
    first: dt.date
    last: dt.date


@dataclass(frozen=True)
class LogCounts:
    """Counts over the alert log.

    ``by_week`` counts new alerts by the ISO week of the night that raised them; ``by_suspect`` alerts by what
    was named first to look at; ``stale`` are numbers of alerts that nobody has reviewed for 14 days;
    ``by_outcome`` counts the newest outcome of each alert that has one.
    """

    alerts: int
    by_week: dict[str, int]
    by_suspect: dict[str, int]
    stale: tuple[int, ...]
    chattering: tuple[Chattering, ...]
    by_outcome: dict[str, int]

    @property
    def confirmed_share(self) -> float | None:
        """Share of alerts with something behind them, among those decided; None before the first decision."""
        decided = sum(n for word, n in self.by_outcome.items() if word != Outcome.UNDETERMINED)
        confirmed = sum(self.by_outcome.get(outcome.value, 0) for outcome in CONFIRMED)
        return confirmed / decided if decided else None

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        return {
            "alerts": self.alerts,
            "by_week": self.by_week,
            "by_suspect": self.by_suspect,
            "stale": list(self.stale),
            "chattering": [
                {
                    "suspect": c.suspect,
                    "alerts": c.alerts,
                    "first": c.first.isoformat(),
                    "last": c.last.isoformat(),
                }
                for c in self.chattering
            ],
            "by_outcome": self.by_outcome,
            "confirmed_share": self.confirmed_share,
        }


def log_counts(entries: Sequence[AlertEntry], now: dt.datetime) -> LogCounts:
    """Counts over alerts as they stand at ``now``."""
    weeks = Counter(_iso_week(e.alert.night_as_of) for e in entries)
    suspects = Counter(_suspect(e) for e in entries)
    stale = sorted(
        e.alert.id
        for e in entries
        if e.needs_review and now - e.events[0].at >= dt.timedelta(days=STALE_DAYS)
    )
    chattering = [found for name in suspects if (found := _chattering(name, entries)) is not None]
    outcomes = Counter(e.standing.outcome.value for e in entries if e.standing.outcome is not None)
    return LogCounts(
        len(entries),
        dict(sorted(weeks.items())),
        dict(sorted(suspects.items(), key=lambda item: (-item[1], item[0]))),
        tuple(stale),
        tuple(sorted(chattering, key=lambda c: (-c.alerts, c.suspect))),
        dict(sorted(outcomes.items(), key=lambda item: (-item[1], item[0]))),
    )


def _iso_week(day: dt.date) -> str:
    year, week, _ = day.isocalendar()
    return f"{year}-W{week:02d}"


def _suspect(entry: AlertEntry) -> str:
    return entry.alert.suspect or f"pair {entry.alert.pair_key}"


def _chattering(suspect: str, entries: Sequence[AlertEntry]) -> Chattering | None:
    """The busiest 30 days of a suspect, where they hold enough alerts."""
    days = sorted(e.alert.alarm_day for e in entries if _suspect(e) == suspect)
    best: Chattering | None = None
    for i, first in enumerate(days):
        inside = [d for d in days[i:] if (d - first).days < CHATTERING_DAYS]
        if len(inside) >= CHATTERING_ALERTS and (best is None or len(inside) > best.alerts):
            best = Chattering(suspect, len(inside), first, inside[-1])
    return best

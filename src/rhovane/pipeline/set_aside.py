"""What people know, brought to the night: readings that are not used, days set aside, new baselines.

What is recorded (site log, outcomes) acts on the days that no night had judged when it was recorded; that
day is kept with the record, so that a recompute of the whole history gives what the nights gave. The
calendar belongs to the settings and acts on all days. Readings that are not used act as a revision does.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from rhovane.alerts import standing_of
from rhovane.model import Alert, AlertEvent, EventKind, Outcome, ReadingsUse
from rhovane.pipeline.context import Night, WatchedPair
from rhovane.prepare import Days
from rhovane.review import logged_alerts, logged_events
from rhovane.settings import CalendarEntry
from rhovane.stats.watch import SetAside
from rhovane.store import StoredSiteLogEntry

DAY = dt.timedelta(days=1)
CONFIRMED_BAD = (Outcome.INSTRUMENT, Outcome.DATA_HANDLING)


@dataclass(frozen=True)
class Known:
    """Decisions for the watch, and for each set of days aside the reason in a few words."""

    set_aside: tuple[SetAside, ...]
    reasons: tuple[str, ...]
    new_baselines: tuple[tuple[int, int], ...]

    def not_judged(self, day: int) -> dict[int, str]:
        """Pairs that are not judged on a day, and why."""
        found: dict[int, str] = {}
        for one, reason in zip(self.set_aside, self.reasons, strict=True):
            inside = one.first <= day and (one.last is None or day <= one.last)
            if inside and not one.judged and one.stands(day):
                for pair in one.pairs:
                    found.setdefault(pair, reason)
        return found


def what_is_known(night: Night, watched: Sequence[WatchedPair], first_day: dt.date) -> Known:
    """Calendar, site log and outcomes as decisions for the watch over ``watched``; days count from ``first_day``."""
    place = {w.pair.key: i for i, w in enumerate(watched)}
    series = [night.settings.series_of(w.recipe) for w in watched]
    found = [
        *_from_calendar(night.settings.calendar_entries, series, first_day, night.as_of),
        *_from_site_log(night.store.site_log(), series, first_day, night.days),
    ]
    renewed: list[tuple[int, int]] = []
    if night.store.has_events_of(EventKind.OUTCOME.value):
        alerts, events = logged_alerts(night.store), logged_events(night.store)
    else:
        alerts, events = [], {}
    for alert in alerts:
        pairs = tuple(sorted({place[k] for k in (alert.pair_key, *alert.members) if k in place}))
        if pairs:
            aside, baselines = _from_outcomes(alert, events[alert.id], pairs, first_day, night.now)
            found += aside
            renewed += baselines
    return Known(tuple(a for a, _ in found), tuple(r for _, r in found), tuple(renewed))


def _from_calendar(
    entries: Sequence[CalendarEntry],
    series: Sequence[Sequence[str]],
    first_day: dt.date,
    last_day: dt.date,
) -> Iterable[tuple[SetAside, str]]:
    for entry in entries:
        pairs = tuple(i for i, keys in enumerate(series) if any(entry.concerns(k) for k in keys))
        if entry.kind != "not judged" or not pairs:
            continue
        for begin, end in entry.spans(first_day, last_day):
            yield (
                SetAside(pairs, (begin - first_day).days, (end - first_day).days),
                f"calendar: {entry.title}",
            )


def _from_site_log(
    entries: Sequence[StoredSiteLogEntry], series: Sequence[Sequence[str]], first_day: dt.date, days: Days
) -> Iterable[tuple[SetAside, str]]:
    for stored in entries:
        one = stored.entry
        pairs = tuple(i for i, keys in enumerate(series) if any(one.concerns(k) for k in keys))
        if one.readings is ReadingsUse.AS_USUAL or not pairs:
            continue
        known = _number(stored.acts_from, first_day)
        forgotten = None if stored.stands else _number(stored.withdrawn_from, first_day)
        begin = (days.day_of(int(one.start.timestamp())) - first_day).days
        end = (
            None if one.end is None else (days.day_of(int(one.end.timestamp()) - 1) - first_day).days
        )  # the days that it touches
        if forgotten is None or forgotten > known:
            yield SetAside(pairs, begin, end, known, forgotten), f"site log {stored.number}: {one.what}"


def _from_outcomes(
    alert: Alert,
    events: Sequence[AlertEvent],
    pairs: tuple[int, ...],
    first_day: dt.date,
    now: dt.datetime,
) -> tuple[list[tuple[SetAside, str]], list[tuple[int, int]]]:
    """What the outcomes of one alert set aside, and the new baselines they ask for.

    The newest outcome stands; an earlier one acts until the day from which the next does.
    """
    aside: list[tuple[SetAside, str]] = []
    renewed: list[tuple[int, int]] = []
    outcomes = [e for e in events if e.kind is EventKind.OUTCOME and "acts_from" in e.payload]
    acts = [_number(dt.date.fromisoformat(str(e.payload["acts_from"])), first_day) for e in outcomes]
    for i, event in enumerate(outcomes):
        known, forgotten = acts[i], acts[i + 1] if i + 1 < len(acts) else None
        if forgotten is not None and forgotten <= known:
            continue
        outcome = Outcome(str(event.payload["outcome"]))
        if event.payload.get("new_baseline"):
            renewed += [(pair, known) for pair in pairs]
        if outcome not in CONFIRMED_BAD:
            continue
        until = event.payload.get("until")
        last = dt.date.fromisoformat(str(until)) if until else _end_of(events, now)
        one = SetAside(
            pairs,
            (alert.onset_day - first_day).days,
            None if last is None else max((last - first_day).days, (alert.onset_day - first_day).days),
            known,
            forgotten,
            judged=until is None,  # without an end the days are judged on, to see the return
        )
        aside.append((one, f"alert {alert.id}: {outcome.value}"))
    return aside, renewed


def _end_of(events: Sequence[AlertEvent], now: dt.datetime) -> dt.date | None:
    """The day on which an alert's change ended; None while it lasts."""
    ended = standing_of(events, now).ended
    if ended is None:
        return None
    return dt.date.fromisoformat(str(ended.payload.get("day") or ended.payload["night"]))


def _number(day: dt.date | None, first_day: dt.date) -> int:
    """A day as the watch counts it; what was always known is known on day 0."""
    return 0 if day is None else max(0, (day - first_day).days)

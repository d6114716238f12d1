"""What the site log and the calendar say about the days around an alert's onset."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Any

from rhovane.model import Alert
from rhovane.prepare import days_of
from rhovane.settings import CalendarEntry, Settings
from rhovane.store import Store, StoredSiteLogEntry

NEARBY_DAYS = 14
"""Days before and after the onset that are looked at: an onset is rarely known better than to a week."""


@dataclass(frozen=True)
class CalendarSpan:
    """A calendar entry with one of its spans, both days included."""

    entry: CalendarEntry
    first: dt.date
    last: dt.date


@dataclass(frozen=True)
class Nearby:
    """Site log entries and calendar spans that touch the days around an onset; both in order of their begin."""

    site_log: tuple[StoredSiteLogEntry, ...]
    calendar: tuple[CalendarSpan, ...]

    def as_json(self, standard_offset: dt.timedelta) -> dict[str, Any]:
        """Plain values for ``--json``; times of the site log on standard time."""
        return {
            "site_log": [site_log_json(stored, standard_offset) for stored in self.site_log],
            "calendar": [
                {
                    "title": span.entry.title,
                    "kind": span.entry.kind,
                    "first": span.first.isoformat(),
                    "last": span.last.isoformat(),
                    "hours": list(span.entry.hours),
                }
                for span in self.calendar
            ],
        }


def nearby_entries(settings: Settings, store: Store, alert: Alert) -> Nearby:
    """Entries of site log and calendar within 14 days of the onset, for the alert's series and their stations.

    Withdrawn entries are included: they may have acted when the alert was raised.
    """
    wanted = {alert.pair_key, *alert.members}
    keys = {key for pair in wanted for key in pair.partition("[")[0].split("~")}
    keys |= {key for recipe in settings.pair if recipe.key in wanted for key in settings.series_of(recipe)}
    first = alert.onset_day - dt.timedelta(days=NEARBY_DAYS)
    last = alert.onset_day + dt.timedelta(days=NEARBY_DAYS)
    days = days_of(settings.network.standard_offset)
    begin, end = days.moment(days.start_of(first)), days.moment(days.end_of(last))
    log = [
        stored
        for stored in store.site_log()
        if stored.entry.start < end
        and (stored.entry.end is None or stored.entry.end > begin)
        and any(stored.entry.concerns(key) for key in keys)
    ]
    spans = [
        CalendarSpan(entry, *span)
        for entry in settings.calendar_entries
        if any(entry.concerns(key) for key in keys)
        for span in entry.spans(first, last)
    ]
    return Nearby(
        tuple(sorted(log, key=lambda s: (s.entry.start, s.number))),
        tuple(sorted(spans, key=lambda s: (s.first, s.entry.title))),
    )


def site_log_json(stored: StoredSiteLogEntry, standard_offset: dt.timedelta) -> dict[str, Any]:
    """An entry of the site log as plain values; ``from`` and ``to`` on standard time, ``to`` excluded."""
    one = stored.entry
    zone = dt.timezone(standard_offset)
    return {
        "number": stored.number,
        "subject": one.subject,
        "from": one.start.astimezone(zone).isoformat(),
        "to": None if one.end is None else one.end.astimezone(zone).isoformat(),
        "what": one.what,
        "readings": one.readings.value,
        "who": stored.who,
        "written_at": stored.written_at.isoformat(),
        "acts_from": None if stored.acts_from is None else stored.acts_from.isoformat(),
        "withdrawn_at": None if stored.withdrawn_at is None else stored.withdrawn_at.isoformat(),
        "withdrawn_from": None if stored.withdrawn_from is None else stored.withdrawn_from.isoformat(),
    }

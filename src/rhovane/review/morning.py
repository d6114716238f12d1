"""One morning: how the night went, what arrived, what changed and whose fault it may be, what is silent."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from rhovane.alerts import standing_of
from rhovane.model import AlertEvent, DataNote, NotFound
from rhovane.prepare import days_of
from rhovane.review.alert_list import AlertEntry, alert_entries, counts_by_state
from rhovane.review.notes import current_notes
from rhovane.review.silence import silent_pairs, silent_series
from rhovane.settings import Settings
from rhovane.store import NightRecord, Store

REJECTED_SHOWN = 12


@dataclass(frozen=True)
class Arrival:
    """What one source delivered since the night before: counts of readings, first and last hour."""

    source: str
    files: int
    rows: int
    new: int
    revised: int
    unchanged: int
    rejected: int
    first: dt.datetime | None
    last: dt.datetime | None


@dataclass(frozen=True)
class SuspectGroup:
    """Alerts that name the same suspect, newest first; ``kind`` is "series", "station", "pair" or "network"."""

    kind: str
    name: str
    entries: tuple[AlertEntry, ...]

    @property
    def pairs(self) -> tuple[str, ...]:
        """All pairs concerned, each once."""
        return tuple(dict.fromkeys(p for e in self.entries for p in (e.alert.members or (e.alert.pair_key,))))


@dataclass(frozen=True)
class Silence:
    """Something that says nothing for lack of data, and why."""

    what: str
    why: str


@dataclass(frozen=True)
class Morning:
    """What one night left for the morning after it.

    ``verdict`` is "complete", "incomplete", "failed", "interrupted" (it began and did not end), "missed" (the
    newest night is older than it should be) or "never"; ``missed`` counts the nights that are missing. ``raised``
    are the alerts of this night; ``open_groups`` all earlier ones that last or that nobody has reviewed;
    ``notes`` what is wrong with the data now (only of the newest night); ``held`` the pairs whose open change can hide a second one.
    """

    night: NightRecord | None
    previous: NightRecord | None
    verdict: str
    missed: int
    expected: dt.date
    at: dt.datetime
    is_newest: bool
    arrivals: tuple[Arrival, ...]
    rejected: tuple[dict[str, Any], ...]
    raised: tuple[SuspectGroup, ...]
    open_groups: tuple[SuspectGroup, ...]
    held: tuple[str, ...]
    ended: tuple[AlertEntry, ...]
    silent_pairs: tuple[Silence, ...]
    silent_series: tuple[Silence, ...]
    notes: tuple[DataNote, ...]
    unreviewed: int
    by_state: dict[str, int]

    @property
    def troubles(self) -> list[dict[str, str]]:
        """Parts of the night that failed, with step and reason."""
        steps = [] if self.night is None else self.night.steps
        return [{"step": step["step"], **trouble} for step in steps for trouble in step["failed"]]

    @property
    def n_raised(self) -> int:
        """Number of alerts that this night raised."""
        return sum(len(group.entries) for group in self.raised)


def morning_of(
    settings: Settings,
    store: Store,
    now: dt.datetime,
    *,
    as_of: dt.date | None = None,
    night: dt.date | None = None,
) -> Morning:
    """The morning after the newest night, or after a past one with the alert log as it stood then.

    Parameters
    ----------
    as_of : date, optional
        The day that the newest night should cover; default: the last complete day.
    night : date, optional
        The last day that a past night covered; default: the newest night.

    Raises
    ------
    NotFound
        No night covers up to that day.
    """
    days = days_of(settings.network.standard_offset)
    expected = as_of or days.last_complete(now)
    top = next(iter(store.nights(1)), None)
    chosen = top
    if night is not None:
        chosen = next(iter(store.nights_of(night)), None)
        if chosen is None:
            known = f"the newest is {top.as_of}" if top else "no night has run"
            raise NotFound(f"No night covers up to {night} ({known}). `rhovane status` tells the newest.")
    newest = chosen is top or (chosen is not None and top is not None and chosen.night_id == top.night_id)
    at = now if newest or chosen is None else (chosen.finished or chosen.started)
    entries = alert_entries(store, now)
    if not newest and chosen is not None:
        entries = _as_they_stood(entries, chosen.night_id, at)
    previous = None if chosen is None else store.finished_before(chosen.night_id)
    last = chosen if chosen is not None and chosen.outcome in ("complete", "incomplete") else previous
    missed = 0 if last is None or not newest else max(0, (expected - last.as_of).days)
    raised = [e for e in entries if chosen is not None and e.alert.night_id == chosen.night_id]
    others = [e for e in entries if e not in raised and (e.standing.changed or e.needs_review)]
    reference = expected if last is None else min(expected, last.as_of)
    silent = _silence(settings, store, None if last is None else last.as_of, reference)
    after = 0 if previous is None else previous.data_version
    upto = None if chosen is None or chosen.outcome == "running" else chosen.data_version
    return Morning(
        night=chosen,
        previous=previous,
        verdict=_verdict(chosen, missed),
        missed=missed,
        expected=expected,
        at=at,
        is_newest=newest,
        arrivals=_arrivals(store, after, upto),
        rejected=_rejected(store, after, upto),
        raised=_by_suspect(raised),
        open_groups=_by_suspect(others),
        held=tuple(sorted({p for e in entries if e.standing.changed for p in e.alert.members})),
        ended=tuple(
            e
            for e in entries
            if last and e.standing.ended and e.standing.ended.payload.get("night") == str(last.as_of)
        ),
        silent_pairs=silent[0],
        silent_series=silent[1],
        notes=tuple(current_notes(settings, store)) if newest else (),
        unreviewed=sum(e.needs_review for e in entries),
        by_state=counts_by_state(entries),
    )


def _as_they_stood(entries: Sequence[AlertEntry], night_id: int, at: dt.datetime) -> list[AlertEntry]:
    """The alerts raised up to a night, with the events up to a moment."""
    stood = []
    for entry in entries:
        events: tuple[AlertEvent, ...] = tuple(e for e in entry.events if e.at <= at)
        if entry.alert.night_id <= night_id and events:
            stood.append(AlertEntry(entry.alert, events, standing_of(events, at)))
    return stood


def _verdict(night: NightRecord | None, missed: int) -> str:
    if night is None:
        return "never"
    if night.outcome == "running":
        return "interrupted"
    if night.outcome != "complete":
        return night.outcome
    return "missed" if missed > 0 else "complete"


def _arrivals(store: Store, after: int, upto: int | None) -> tuple[Arrival, ...]:
    """Files taken in after one ingest and up to another, summed by source."""
    found = store.ingests(after=after)
    keep = [i for i, number in enumerate(found["id"]) if upto is None or number <= upto]
    arrivals = []
    for source in sorted({str(found["source"][i]) for i in keep}):
        rows = [i for i in keep if found["source"][i] == source]
        counts = [
            sum(int(found[name][i]) for i in rows)
            for name in ("rows_read", "rows_new", "rows_revised", "rows_unchanged", "rows_rejected")
        ]
        spans = [(found["first_ts"][i], found["last_ts"][i]) for i in rows]
        first = [_moment(a) for a, _ in spans if not _never(a)]
        last = [_moment(b) for _, b in spans if not _never(b)]
        arrivals.append(
            Arrival(source, len(rows), *counts, min(first, default=None), max(last, default=None))
        )
    return tuple(arrivals)


def _never(value: Any) -> bool:
    return value is None or value != value


def _moment(value: Any) -> dt.datetime:
    return dt.datetime.fromtimestamp(int(value.astype("datetime64[s]").astype(int)), dt.UTC)


def _rejected(store: Store, after: int, upto: int | None) -> tuple[dict[str, Any], ...]:
    """The first rows that went into quarantine after one ingest and up to another."""
    found = store.rejected_rows(after=after)
    keep = [i for i, number in enumerate(found["ingest_id"]) if upto is None or number <= upto]
    names = ("path", "line", "column_name", "raw", "reason")
    return tuple({name: found[name][i] for name in names} for i in keep[:REJECTED_SHOWN])


def _by_suspect(entries: Sequence[AlertEntry]) -> tuple[SuspectGroup, ...]:
    """Alerts grouped by what they name as likeliest to have changed; changes that last first, then the newest."""
    groups: dict[tuple[str, str], list[AlertEntry]] = {}
    for entry in entries:
        kind, _, name = (entry.alert.suspect or f"pair {entry.alert.pair_key}").partition(" ")
        groups.setdefault((kind, name), []).append(entry)
    found = [SuspectGroup(kind, name, tuple(members)) for (kind, name), members in groups.items()]
    newest_first = sorted(found, key=lambda g: max(e.alert.alarm_day for e in g.entries), reverse=True)
    return tuple(sorted(newest_first, key=lambda g: not any(e.standing.changed for e in g.entries)))


def _silence(
    settings: Settings, store: Store, last: dt.date | None, reference: dt.date
) -> tuple[tuple[Silence, ...], tuple[Silence, ...]]:
    """Pairs without a correlation after the night of ``last``, and series behind by ``reference``."""
    pairs = [] if last is None else silent_pairs(settings, store, last)
    series = silent_series(settings, store, reference)
    return (
        tuple(Silence(one.pair, one.reason) for one in pairs),
        tuple(
            Silence(
                one.series,
                "no reading has ever arrived"
                if one.hours_behind is None
                else f"no reading for {one.hours_behind} hours",
            )
            for one in series
        ),
    )

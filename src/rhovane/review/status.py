"""Did the night run, what arrived, and what is silent for lack of data."""

from __future__ import annotations

import datetime as dt
import math
from dataclasses import dataclass
from typing import Any

from rhovane.model import ExitCode
from rhovane.prepare import days_of, segment_start
from rhovane.review.alert_list import alert_entries, counts_by_state
from rhovane.settings import Settings
from rhovane.store import Store

STALE_HOURS = 48  # hours a series may be behind the night's last day before it is called silent


@dataclass(frozen=True)
class Status:
    """The state of the watch at one moment.

    ``last_night`` is the newest entry of the night ledger, whatever its outcome ("interrupted": it began
    and did not end); ``nights_missed`` counts days since the newest night that finished, all of them when
    none has. ``not_judged`` are the pairs that site log, calendar or an outcome kept from being judged in that
    night, with the reason. ``segments`` names every series that changed instrument or place, with the segment the newest night
    is in.
    """

    network: str
    last_night: dict[str, Any] | None
    nights_missed: int
    alerts_by_state: dict[str, int]
    unreviewed: int
    silent_series: list[dict[str, Any]]
    silent_pairs: list[dict[str, Any]]
    not_judged: dict[str, str]
    series_watched: int
    notes_open: int
    rejected_rows: int
    segments: list[dict[str, Any]]
    exit_code: ExitCode

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        return {
            "network": self.network,
            "last_night": self.last_night,
            "nights_missed": self.nights_missed,
            "alerts": self.alerts_by_state,
            "unreviewed": self.unreviewed,
            "silent_series": self.silent_series,
            "silent_pairs": self.silent_pairs,
            "not_judged": self.not_judged,
            "series_watched": self.series_watched,
            "notes_open": self.notes_open,
            "rejected_rows": self.rejected_rows,
            "segments": self.segments,
            "exit_code": int(self.exit_code),
        }


def segments_in_force(settings: Settings, day: dt.date) -> list[dict[str, Any]]:
    """The segment that a day belongs to, of every series that has begun another than its first."""
    found = []
    for series in settings.domain_series():
        start = segment_start(series, day)
        found += [
            {"series": series.key, "first_day": start.isoformat(), "what": one.what}
            for one in series.segments
            if start is not None and one.first_day == start
        ]
    return found


def network_status(
    settings: Settings, store: Store, now: dt.datetime, *, as_of: dt.date | None = None
) -> Status:
    """The state of the watch.

    Parameters
    ----------
    as_of : date, optional
        Judge missed nights and silent series as of this day; default: the last complete day.
    """
    days = days_of(settings.network.standard_offset)
    last = store.last_finished_night()
    expected = as_of or days.last_complete(now)
    missed = 0 if last is None else max(0, (expected - last.as_of).days)
    entries = alert_entries(store, now)
    reference = expected if last is None else min(expected, last.as_of)
    spans = store.span_of([s.key for s in settings.series])
    silent_series = []
    for one in settings.series:
        seen = spans[one.key][1] if one.key in spans else None
        behind = None if seen is None else (days.last_hour_of(reference) - int(seen.timestamp())) // 3600
        if behind is None or behind > STALE_HOURS:
            silent_series.append(
                {
                    "series": one.key,
                    "last_reading": None if seen is None else seen.isoformat(),
                    "hours_behind": behind,
                }
            )
    silent_pairs = []
    if last is not None:
        end = days.moment(days.end_of(last.as_of))
        found = store.read_windows(start=end - dt.timedelta(hours=1), end=end, lag=0)
        row_of = {key: i for i, key in enumerate(found["pair_key"])}
        for pair in settings.pair:
            i = row_of.get(pair.key)
            if i is None:
                silent_pairs.append({"pair": pair.key, "reason": "not computed"})
            elif math.isnan(found["statistic"][i]):
                silent_pairs.append({"pair": pair.key, "reason": found["reason"][i]})
    newest = next(iter(store.nights(1)), None)
    code = ExitCode.WELL
    if newest is None or last is None or missed > 1 or newest.outcome != "complete":
        code = ExitCode.NIGHT_INCOMPLETE
    return Status(
        settings.network.name,
        None
        if newest is None
        else {
            "id": newest.night_id,
            "as_of": newest.as_of.isoformat(),
            "outcome": "interrupted" if newest.outcome == "running" else newest.outcome,
            "steps": newest.steps,
            "counts": {
                k: v
                for k, v in newest.counts.items()
                if k not in ("recipes", "left", "first_hours", "not used", "notes")
            },
        },
        missed,
        counts_by_state(entries),
        sum(e.needs_review for e in entries),
        silent_series,
        silent_pairs,
        {} if last is None else dict(last.counts.get("not judged", {})),
        len(settings.series),
        sum(n.is_open for n in store.data_notes()),
        store.count_rejected(),
        segments_in_force(settings, reference),
        code,
    )

"""Did the night run, what arrived, and what is silent for lack of data."""

from __future__ import annotations

import datetime as dt
from dataclasses import asdict, dataclass
from typing import Any

from rhovane.model import ExitCode
from rhovane.prepare import days_of, segment_start
from rhovane.review.alert_list import alert_entries, counts_by_state
from rhovane.review.silence import falling_coverage, silent_pairs, silent_series
from rhovane.review.watch_over import Concern, concerns, service_state
from rhovane.settings import Settings
from rhovane.store import Store

NIGHT_MAY_TAKE = dt.timedelta(
    hours=1
)  # time after its planned begin until a night that is not there counts as missed


@dataclass(frozen=True)
class Status:
    """The state of the watch at one moment.

    ``last_night`` is the newest entry of the night ledger, whatever its outcome ("interrupted": it began
    and did not end); ``nights_missed`` counts days since the newest date whose night finished. ``concerns`` are
    what has to be looked after for the watch to go on, ``service`` the service's last sign of life. ``not_judged`` are
    the pairs that site log, calendar or an outcome kept from being judged in that night, with the reason. ``segments``
    names every series that changed instrument or place, with the segment the newest night is in.
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
    falling_coverage: list[dict[str, Any]]
    concerns: tuple[Concern, ...]
    service: dict[str, Any] | None
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
            "falling_coverage": self.falling_coverage,
            "concerns": [c.as_json() for c in self.concerns],
            "service": self.service,
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
        Judge missed nights and silent series as of this day; default: the newest day whose night should be over.
    """
    days = days_of(settings.network.standard_offset)
    done = store.newest_date()
    expected = as_of or days.last_complete(now - settings.night.after_midnight - NIGHT_MAY_TAKE)
    missed = 0 if done is None else max(0, (expected - done).days)
    entries = alert_entries(store, now)
    reference = expected if done is None else min(expected, done)
    newest = next(iter(store.nights(1)), None)
    last = store.last_finished_night()
    found = concerns(settings, store, now)
    code = ExitCode.WELL
    if newest is None or done is None or missed or newest.outcome != "complete":
        code = ExitCode.NIGHT_INCOMPLETE
    elif found:
        code = ExitCode.NEEDS_ATTENTION
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
        [asdict(one) for one in silent_series(settings, store, reference)],
        [asdict(one) for one in silent_pairs(settings, store, done)] if done is not None else [],
        {} if last is None else dict(last.counts.get("not judged", {})),
        len(settings.series),
        sum(n.is_open for n in store.data_notes()),
        store.count_rejected(),
        segments_in_force(settings, reference),
        [asdict(one) for one in falling_coverage(settings, store, done)] if done is not None else [],
        tuple(found),
        service_state(settings, now),
        code,
    )

"""What the pages ask about readings: how many each day, of which quality, and what was revised."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta

import numpy as np

from rhovane.store.clock import aware_utc, naive_utc
from rhovane.store.session import Session


@dataclass(frozen=True)
class Revision:
    """Values of one series that one file replaced."""

    ingest_id: int
    path: str
    at: datetime
    values: int
    first: datetime
    last: datetime


class Looking(Session):
    """Counts over readings."""

    def readings_by_day(
        self, key: str, offset: timedelta, start: datetime, end: datetime
    ) -> dict[str, np.ndarray]:
        """Readings of a series by day of standard time and flag: ``day`` (datetime64[D]), ``flag``, ``n``.

        ``offset`` is standard time minus UTC; only intervals that begin in ``start <= t < end``. A reading whose
        source said missing is counted under flag 9, whatever its flag.
        """
        found = self.columns(
            """
            select date_trunc('day', r.ts + to_seconds($offset)) as day,
                   case when r.value is null or isnan(r.value) then 9 else r.flag end as flag, count(*) as n
            from reading r join series s on s.id = r.series_id
            where s.key = $key and r.ts >= $start and r.ts < $end group by all order by all
            """,
            {
                "key": key,
                "offset": int(offset.total_seconds()),
                "start": naive_utc(start),
                "end": naive_utc(end),
            },
        )
        return {**found, "day": found["day"].astype("datetime64[D]")}

    def revisions_of(self, key: str, limit: int = 30) -> list[Revision]:
        """The newest files that replaced values of a series, newest first."""
        found = self.rows(
            """
            select h.superseded_by, i.path, i.ingested_at, count(*), min(h.ts), max(h.ts)
            from reading_history h join series s on s.id = h.series_id join ingest i on i.id = h.superseded_by
            where s.key = ? group by all order by h.superseded_by desc limit ?
            """,
            [key, int(limit)],
        )
        return [
            Revision(number, path, aware_utc(at), n, aware_utc(first), aware_utc(last))
            for number, path, at, n, first, last in found
        ]

    def last_hours(self, end: datetime) -> dict[str, datetime]:
        """The last hour before ``end`` of which a reading is stored, for each series that has one."""
        found = self.rows(
            """
            select s.key, max(r.ts) from reading r join series s on s.id = r.series_id
            where r.ts < ? group by s.key
            """,
            [naive_utc(end)],
        )
        return {key: aware_utc(last) for key, last in found}

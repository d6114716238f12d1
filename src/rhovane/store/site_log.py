"""The site log as the store keeps it: entries are added, never changed or deleted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime

from rhovane.model import SiteLogEntry
from rhovane.store.clock import aware_utc, naive_utc
from rhovane.store.session import Session


@dataclass(frozen=True)
class StoredSiteLogEntry:
    """An entry as recorded, with who wrote it and when."""

    number: int
    entry: SiteLogEntry
    who: str
    written_at: datetime


class SiteLog(Session):
    """Writing and reading of the site log."""

    def site_log(self) -> list[StoredSiteLogEntry]:
        """All entries, in the order in which they were written."""
        found = self.rows(
            "select id, subject, from_ts, to_ts, what, who, written_at from site_log order by id"
        )
        return [
            StoredSiteLogEntry(
                number,
                SiteLogEntry(subject, aware_utc(start), None if end is None else aware_utc(end), what),
                who,
                aware_utc(written),
            )
            for number, subject, start, end, what, who, written in found
        ]

    def add_to_site_log(self, entries: Sequence[SiteLogEntry], *, who: str, now: datetime) -> list[int]:
        """Record entries, and return their numbers in the same order."""
        with self.transaction():
            first = self.value("select coalesce(max(id), 0) + 1 from site_log")
            for number, one in enumerate(entries, start=first):
                self.execute(
                    """
                    insert into site_log (id, subject, from_ts, to_ts, what, who, written_at)
                    values (?, ?, ?, ?, ?, ?, ?)
                    """,
                    [
                        number,
                        one.subject,
                        naive_utc(one.start),
                        None if one.end is None else naive_utc(one.end),
                        one.what,
                        who,
                        naive_utc(now),
                    ],
                )
        return list(range(first, first + len(entries)))

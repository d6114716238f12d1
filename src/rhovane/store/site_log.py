"""The site log as the store keeps it: entries are added and withdrawn, never changed or deleted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date, datetime

from rhovane.model import NotFound, ReadingsUse, RhovaneError, SiteLogEntry
from rhovane.store.clock import aware_utc, naive_utc
from rhovane.store.session import Session

SITE_LOG_FILE = "site log file"  # who wrote the entries that come from the file

_ENTRIES = "site log"  # under which the entries are remembered


@dataclass(frozen=True)
class StoredSiteLogEntry:
    """An entry as recorded.

    ``who`` wrote it (a name, or "site log file"). It acts on the judgement of days from ``acts_from`` on
    (None: from the first), once withdrawn only of those before ``withdrawn_from`` (None with
    ``withdrawn_at`` set: of none).
    """

    number: int
    entry: SiteLogEntry
    who: str
    written_at: datetime
    acts_from: date | None
    withdrawn_at: datetime | None = None
    withdrawn_from: date | None = None

    @property
    def stands(self) -> bool:
        """Whether it has not been withdrawn."""
        return self.withdrawn_at is None


class SiteLog(Session):
    """Writing and reading of the site log."""

    def site_log(self) -> list[StoredSiteLogEntry]:
        """All entries there ever were, in the order in which they were written.

        Read once and remembered: an open store has no other writer.
        """
        if _ENTRIES not in self._remembered:
            self._remembered[_ENTRIES] = {stored.number: stored for stored in self._read_site_log()}
        return list(self._remembered[_ENTRIES].values())

    def _read_site_log(self) -> list[StoredSiteLogEntry]:
        found = self.rows(
            """
            select id, subject, from_ts, to_ts, what, readings, who, written_at, acts_from, withdrawn_at,
                   withdrawn_from from site_log order by id
            """
        )
        return [
            StoredSiteLogEntry(
                number,
                SiteLogEntry(
                    subject,
                    aware_utc(start),
                    None if end is None else aware_utc(end),
                    what,
                    ReadingsUse(readings),
                ),
                who,
                aware_utc(written),
                acts_from,
                None if withdrawn is None else aware_utc(withdrawn),
                withdrawn_from,
            )
            for number, subject, start, end, what, readings, who, written, acts_from, withdrawn, withdrawn_from in found
        ]

    def add_to_site_log(
        self, entries: Sequence[SiteLogEntry], *, who: str, now: datetime, acts_from: date | None
    ) -> list[int]:
        """Record entries, and return their numbers in the same order."""
        self._remembered.pop(_ENTRIES, None)
        with self.transaction():
            first = self.value("select coalesce(max(id), 0) + 1 from site_log")
            for number, one in enumerate(entries, start=first):
                self.execute(
                    """
                    insert into site_log (id, subject, from_ts, to_ts, what, who, written_at, readings, acts_from)
                    values (?, ?, ?, ?, ?, ?, ?, ?, ?)
                    """,
                    [
                        number,
                        one.subject,
                        naive_utc(one.start),
                        None if one.end is None else naive_utc(one.end),
                        one.what,
                        who,
                        naive_utc(now),
                        one.readings.value,
                        acts_from,
                    ],
                )
        return list(range(first, first + len(entries)))

    def withdraw_from_site_log(self, number: int, *, now: datetime, from_day: date | None) -> None:
        """Mark an entry as withdrawn; it stays in the store.

        Raises
        ------
        NotFound
            There is no such entry.
        RhovaneError
            It is withdrawn already.
        """
        self._remembered.pop(_ENTRIES, None)
        with self.transaction():
            found = self.rows("select withdrawn_at from site_log where id = ?", [int(number)])
            if not found:
                raise NotFound(
                    f"There is no entry {number} in the site log. `rhovane sitelog` lists those there are."
                )
            if found[0][0] is not None:
                raise RhovaneError(
                    f"Entry {number} of the site log is withdrawn already. Nothing was written."
                )
            self.execute(
                "update site_log set withdrawn_at = ?, withdrawn_from = ? where id = ?",
                [naive_utc(now), from_day, int(number)],
            )

    def next_judged_day(self) -> date | None:
        """The first day that no finished night has judged; None when none has finished: all days are to come.

        What people record now acts on the judgement of days from here on.
        """
        found = self.rows(
            "select max(as_of) + interval 1 day from night where outcome in ('complete', 'incomplete')"
        )
        newest = found[0][0]
        return None if newest is None else newest.date()

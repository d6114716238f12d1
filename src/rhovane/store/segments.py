"""Segments of series: from which day on a series was measured with something else, or somewhere else."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date, datetime

from rhovane.model import Series
from rhovane.store.clock import aware_utc, naive_utc
from rhovane.store.session import Session


@dataclass(frozen=True)
class StoredSegment:
    """A segment as recorded: ``withdrawn_at`` is when the settings no longer named it, None while they do."""

    key: str
    first_day: date
    what: str
    recorded_at: datetime
    withdrawn_at: datetime | None


class Segments(Session):
    """Writing and reading of segments."""

    _segments_kept: Sequence[Series] = ()

    def keep_segments(self, series: Sequence[Series], *, now: datetime) -> None:
        """Make the segments in force those of the given series; what changed stays readable with its times.

        Series that are not given keep theirs. The series must be known to the store.
        """
        if series == self._segments_kept:
            return
        wanted = {(s.key, g.first_day, g.what) for s in series for g in s.segments}
        given = {s.key for s in series}
        held = {
            (g.key, g.first_day, g.what) for g in self.segments() if g.withdrawn_at is None and g.key in given
        }
        if wanted != held:
            of_key = "series_id = (select id from series where key = ?) and first_day = ? and what = ?"
            with self.transaction():
                for gone in sorted(held - wanted):
                    self.execute(
                        f"update segment set withdrawn_at = ? where withdrawn_at is null and {of_key}",
                        [naive_utc(now), *gone],
                    )
                for key, first_day, what in sorted(wanted - held):
                    self.execute(
                        "insert into segment values ((select id from series where key = ?), ?, ?, ?, null)",
                        [key, first_day, what, naive_utc(now)],
                    )
        self._segments_kept = list(series)

    def segments(self, *, at: datetime | None = None) -> list[StoredSegment]:
        """All segments ever recorded, in order of series and day; with ``at`` those that were in force then."""
        found = self.rows(
            """
            select s.key, g.first_day, g.what, g.recorded_at, g.withdrawn_at
            from segment g join series s on s.id = g.series_id
            where $at is null or (g.recorded_at <= $at and (g.withdrawn_at is null or g.withdrawn_at > $at))
            order by s.key, g.first_day, g.recorded_at
            """,
            {"at": None if at is None else naive_utc(at)},
        )
        return [
            StoredSegment(key, day, what, aware_utc(begun), None if ended is None else aware_utc(ended))
            for key, day, what, begun, ended in found
        ]

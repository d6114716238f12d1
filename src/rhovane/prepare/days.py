"""Days of the network: midnight to midnight in its standard time, as whole hours in UTC."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass

HOUR_S = 3600
DAY_S = 86_400
EPOCH = dt.date(1970, 1, 1)


@dataclass(frozen=True)
class Days:
    """Conversions between dates of standard time and seconds since 1970-01-01 UTC.

    ``offset_s`` is standard time minus UTC in seconds. A date names the 24 hours from its midnight in
    standard time.
    """

    offset_s: int

    def start_of(self, day: dt.date) -> int:
        """First second of a day, in seconds since 1970 UTC."""
        return (day - EPOCH).days * DAY_S - self.offset_s

    def end_of(self, day: dt.date) -> int:
        """First second after a day, in seconds since 1970 UTC."""
        return self.start_of(day) + DAY_S

    def last_hour_of(self, day: dt.date) -> int:
        """Start of the last hour of a day, in seconds since 1970 UTC."""
        return self.end_of(day) - HOUR_S

    def day_of(self, second: int) -> dt.date:
        """The day that holds a second."""
        return EPOCH + dt.timedelta(days=(int(second) + self.offset_s) // DAY_S)

    def moment(self, second: int) -> dt.datetime:
        """A second since 1970 UTC as an aware datetime."""
        return dt.datetime.fromtimestamp(second, dt.UTC)

    def last_complete(self, now: dt.datetime) -> dt.date:
        """The newest day that has ended by ``now`` (aware)."""
        return self.day_of(int(now.timestamp())) - dt.timedelta(days=1)


def days_of(standard_offset: dt.timedelta) -> Days:
    """The network's days for a fixed offset of standard time."""
    return Days(int(standard_offset.total_seconds()))

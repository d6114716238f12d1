"""The site log: what happened at a station, and when."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass

WHOLE_NETWORK = "*"


@dataclass(frozen=True)
class SiteLogEntry:
    """One entry: ``subject`` is a series key, a station, or "*" for the whole network.

    ``start`` (included) and ``end`` (excluded; None: it still goes on) are aware, in UTC.
    """

    subject: str
    start: dt.datetime
    end: dt.datetime | None
    what: str

    def concerns(self, series_key: str) -> bool:
        """Whether the entry concerns a series."""
        return self.subject in (WHOLE_NETWORK, series_key, series_key.partition(".")[0])

"""The site log: what happened at a station, when, and what becomes of the readings of that time."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from enum import StrEnum

WHOLE_NETWORK = "*"


class ReadingsUse(StrEnum):
    """What becomes of the readings of a time in the site log."""

    AS_USUAL = "as usual"
    NO_REFERENCE = "no reference"
    NOT_USED = "not used"


@dataclass(frozen=True)
class SiteLogEntry:
    """One entry: ``subject`` is a series key, a station, or "*" for the whole network.

    ``start`` (included) and ``end`` (excluded; None: it still goes on) are aware, in UTC.
    """

    subject: str
    start: dt.datetime
    end: dt.datetime | None
    what: str
    readings: ReadingsUse = ReadingsUse.NO_REFERENCE

    def concerns(self, series_key: str) -> bool:
        """Whether the entry concerns a series."""
        return self.subject in (WHOLE_NETWORK, series_key, series_key.partition(".")[0])

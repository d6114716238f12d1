"""Readings that people took out of the statistics, and since which hour that differs from the night before."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.model import ReadingsUse
from rhovane.prepare import hours_not_used
from rhovane.settings import CalendarEntry, Settings
from rhovane.store import Store, StoredSiteLogEntry

HOUR_S = 3600


@dataclass(frozen=True)
class Unused:
    """Maintenance of the calendar and site log entries whose readings do not enter statistics."""

    maintenance: tuple[CalendarEntry, ...] = ()
    site_log: tuple[StoredSiteLogEntry, ...] = ()

    def __bool__(self) -> bool:
        """Whether there is any."""
        return bool(self.maintenance or self.site_log)

    def hours(self, key: str, hour_start: NDArray[np.int64], civil_zone: str) -> NDArray[np.bool_]:
        """Hours of a series whose readings are not used, shape (n_hours,)."""
        return hours_not_used(
            key,
            hour_start,
            maintenance=self.maintenance,
            site_log=[stored.entry for stored in self.site_log],
            civil_zone=civil_zone,
        )

    def as_counts(self) -> dict[str, Any]:
        """For the night ledger; :func:`unused_then` reads it."""
        return {
            "maintenance": [entry.model_dump(mode="json") for entry in self.maintenance],
            "site log": [stored.number for stored in self.site_log],
        }


def unused_now(settings: Settings, store: Store) -> Unused:
    """As the calendar and the site log stand."""
    return Unused(
        tuple(e for e in settings.calendar_entries if e.kind == "maintenance"),
        tuple(s for s in store.site_log() if s.stands and s.entry.readings is ReadingsUse.NOT_USED),
    )


def unused_then(counts: Mapping[str, Any], store: Store) -> Unused:
    """As they stood in a night, from its ledger."""
    known = counts.get("not used", {})
    numbers = set(known.get("site log", []))
    return Unused(
        tuple(CalendarEntry.model_validate(plain) for plain in known.get("maintenance", [])),
        tuple(s for s in store.site_log() if s.number in numbers),
    )


def first_differences(
    now: Unused, then: Unused, first_hours: Mapping[str, dt.datetime], end: int, civil_zone: str
) -> dict[str, dt.datetime]:
    """For each series the first hour before ``end`` (seconds since 1970 UTC) that is used now and was not, or the reverse."""
    numbers = ({s.number for s in now.site_log}, {s.number for s in then.site_log})
    if now.maintenance == then.maintenance and numbers[0] == numbers[1]:
        return {}
    found = {}
    for key, first in first_hours.items():
        hour_start = np.arange(int(first.timestamp()), end, HOUR_S, dtype=np.int64)
        differs = now.hours(key, hour_start, civil_zone) != then.hours(key, hour_start, civil_zone)
        if differs.any():
            found[key] = dt.datetime.fromtimestamp(int(hour_start[differs.argmax()]), dt.UTC)
    return found

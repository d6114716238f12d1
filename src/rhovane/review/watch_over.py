"""Is the watch itself well: the service, the clock, the disk, and what should have been sent."""

from __future__ import annotations

import datetime as dt
import shutil
from collections import Counter
from dataclasses import dataclass
from typing import Any

from rhovane.settings import Settings
from rhovane.store import Liveness, Store, read_liveness

TOLD_FOR = dt.timedelta(days=1)  # how long what the service noticed is told
CLOCK_REMEDY = "Check the machine's time service. Nights go by date: none is run twice, and none is left out."
# What the service notices and somebody has to look after, with what to do.
REMEDIES = {
    "clock": CLOCK_REMEDY,
    "store": "Keep a copy of the file, and restore the latest copy that is whole.",
    "upkeep failed": "The store was not checked or not copied. Remedy the cause; the next night tries again.",
    "job failed": "This is a fault of the program; the log of the service has more. The job is tried again.",
}
CLOCK_AHEAD = dt.timedelta(minutes=1)  # a ledger entry further in the future than this is no rounding
FAILING_ATTEMPTS = 3  # attempts at a delivery after which it counts as failing
MB = 1_000_000


@dataclass(frozen=True)
class Concern:
    """Something that has to be looked after for the watch to go on: a word, what was found, what to do."""

    kind: str
    found: str
    remedy: str

    def as_json(self) -> dict[str, str]:
        """Plain values."""
        return {"kind": self.kind, "found": self.found, "remedy": self.remedy}


def concerns(settings: Settings, store: Store, now: dt.datetime) -> list[Concern]:
    """Everything about the watch itself that needs looking after, apart from its nights."""
    liveness = read_liveness(settings.store_path)
    return [
        *_service(liveness, now),
        *_noticed(liveness, now),
        *_clock(store, now),
        *_disk(settings),
        *_deliveries(settings, store),
    ]


def service_state(settings: Settings, now: dt.datetime) -> dict[str, Any] | None:
    """The service's last sign of life as plain values; None where there never was one."""
    liveness = read_liveness(settings.store_path)
    return None if liveness is None else {**liveness.as_json(), "alive": liveness.alive(now)}


def _service(liveness: Liveness | None, now: dt.datetime) -> list[Concern]:
    if liveness is None or liveness.state != "running" or liveness.alive(now):
        return []
    return [
        Concern(
            "service",
            f"not alive: last sign of life {liveness.beat:%Y-%m-%d %H:%M} UTC (process {liveness.pid})",
            "Look into its log, then start it again: rhovane service",
        )
    ]


def _noticed(liveness: Liveness | None, now: dt.datetime) -> list[Concern]:
    """What the service noticed within the last day and somebody has to look after."""
    events = () if liveness is None else liveness.events
    return [
        Concern(e.kind, e.text, REMEDIES[e.kind])
        for e in events
        if e.kind in REMEDIES and dt.timedelta(0) <= now - e.at <= TOLD_FOR
    ]


def _clock(store: Store, now: dt.datetime) -> list[Concern]:
    newest = next(iter(store.nights(1)), None)
    if newest is None or newest.started - now <= CLOCK_AHEAD:
        return []
    found = f"it shows {now:%Y-%m-%d %H:%M} UTC, but a night began at {newest.started:%Y-%m-%d %H:%M}"
    return [Concern("clock", found, CLOCK_REMEDY)]


def _disk(settings: Settings) -> list[Concern]:
    folder = settings.store_path.parent
    free_mb = shutil.disk_usage(folder).free // MB
    if free_mb >= settings.service.min_free_mb:
        return []
    return [
        Concern(
            "disk",
            f"{free_mb} MB free in {folder}, service.min_free_mb asks for {settings.service.min_free_mb}",
            "Free space: a full disk stops the night.",
        )
    ]


def _deliveries(settings: Settings, store: Store) -> list[Concern]:
    waiting = store.outbox(waiting=True)
    count = Counter(e.channel for e in waiting)
    found = []
    for channel, n in sorted(count.items()):
        entries = [e for e in waiting if e.channel == channel]
        if channel not in settings.delivery.channels:
            why = "the channel is no longer in the settings"
        elif max(e.attempts for e in entries) < FAILING_ATTEMPTS:
            continue
        else:
            why = next(e.last_error for e in reversed(entries) if e.last_error)
        found.append(
            Concern(
                "delivery",
                f"{channel}: {n} not delivered since {entries[0].created_at:%Y-%m-%d %H:%M} UTC: {why}",
                "Remedy the cause, then: rhovane deliver",
            )
        )
    return found

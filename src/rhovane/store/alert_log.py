"""The alert log: facts that never change, and events that are only ever added.

Each event carries the SHA-256 of its own facts, of the facts of its alert and of the hash before it. A
changed, removed or inserted event breaks the chain at that place; events removed from the end are
missed by the manifest when the store is opened.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date, datetime
from typing import Any

from rhovane.model import NotFound, RhovaneError
from rhovane.store.clock import aware_utc, naive_utc
from rhovane.store.jsontext import json_text
from rhovane.store.session import Session

CHAIN_BEGINS = "0" * 64  # the hash before the first event
_EVENTS_BY_KIND = "select kind, count(*) from alert_event group by kind"


@dataclass(frozen=True)
class NewAlert:
    """An alert to be recorded; ``payload`` holds its facts as JSON can say them."""

    pair_key: str
    day: date
    night_id: int
    payload: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class StoredAlert:
    """An alert as recorded; it never changes, its events tell what became of it."""

    alert_id: int
    pair_key: str
    day: date
    night_id: int
    payload: dict[str, Any]


@dataclass(frozen=True)
class NewAlertEvent:
    """Something that happened to an alert; ``kind`` is a word of the alert lifecycle."""

    alert_id: int
    at: datetime
    kind: str
    who: str = ""
    note: str = ""
    payload: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class StoredAlertEvent:
    """An event as recorded, with its place in the log and its hash."""

    seq: int
    alert_id: int
    at: datetime
    kind: str
    who: str
    note: str
    payload: dict[str, Any]
    previous_hash: str
    hash: str


class AlertLog(Session):
    """Writing and reading of the alert log."""

    def append_alerts(self, alerts: Sequence[NewAlert]) -> list[int]:
        """Record the facts of alerts, and return their numbers in the same order."""
        with self.transaction():
            first = self.value("select coalesce(max(id), 0) + 1 from alert")
            for number, alert in enumerate(alerts, start=first):
                self.execute(
                    "insert into alert values (?, ?, ?, ?, ?)",
                    [number, alert.pair_key, alert.day, int(alert.night_id), json_text(alert.payload)],
                )
                self.expect_after_commit("alerts", number)
        return list(range(first, first + len(alerts)))

    def append_alert_events(self, events: Sequence[NewAlertEvent | Mapping[str, Any]]) -> list[int]:
        """Add events to the log, and return their places in it; a mapping names the fields of NewAlertEvent.

        Raises
        ------
        NotFound
            An event names an alert that is not recorded.
        RhovaneError
            A mapping has a wrong field, or a payload cannot be written as JSON.
        """
        given = [_event(e) for e in events]
        self._remembered.pop(_EVENTS_BY_KIND, None)
        with self.transaction():
            facts = self._alert_facts({int(e.alert_id) for e in given})
            last = self.rows("select seq, hash from alert_event order by seq desc limit 1")
            seq, previous = last[0] if last else (0, CHAIN_BEGINS)
            numbers = []
            for event in given:
                seq += 1
                alert_id, at, payload = int(event.alert_id), naive_utc(event.at), json_text(event.payload)
                digest = _digest(
                    seq, facts[alert_id], alert_id, at, event.kind, event.who, event.note, payload, previous
                )
                self.execute(
                    "insert into alert_event values (?, ?, ?, ?, ?, ?, ?, ?, ?)",
                    [seq, alert_id, at, event.kind, event.who, event.note, payload, previous, digest],
                )
                self.expect_after_commit("alert_events", seq)
                numbers.append(seq)
                previous = digest
        return numbers

    def has_events_of(self, kind: str) -> bool:
        """Whether the log holds any event of a kind; asked once and remembered while the store is open."""
        return kind in self.remembered(_EVENTS_BY_KIND)

    def alerts(self) -> list[StoredAlert]:
        """All recorded alerts in order of their number."""
        found = self.rows("select id, pair_key, day, night_id, payload from alert order by id")
        return [StoredAlert(number, pair, day, night, json.loads(p)) for number, pair, day, night, p in found]

    def alert(self, alert_id: int) -> StoredAlert:
        """One recorded alert.

        Raises
        ------
        NotFound
            There is no alert of this number.
        """
        found = self.rows(
            "select id, pair_key, day, night_id, payload from alert where id = ?", [int(alert_id)]
        )
        if not found:
            raise NotFound(f"There is no alert {alert_id}. `rhovane alerts` lists those there are.")
        number, pair, day, night, payload = found[0]
        return StoredAlert(number, pair, day, night, json.loads(payload))

    def alert_events(self, alert_id: int | None = None) -> list[StoredAlertEvent]:
        """Events of one alert, or of all, in the order in which they were added."""
        found = self.rows(
            """
            select seq, alert_id, happened_at, kind, who, note, payload, previous_hash, hash from alert_event
            where alert_id = coalesce(?, alert_id) order by seq
            """,
            [None if alert_id is None else int(alert_id)],
        )
        return [
            StoredAlertEvent(
                seq, number, aware_utc(at), kind, who, note, json.loads(payload), previous, digest
            )
            for seq, number, at, kind, who, note, payload, previous, digest in found
        ]

    def verify_alert_chain(self) -> int | None:
        """Recompute all hashes: the place of the first event that is not as it was written; None when all are."""
        facts = self._alert_facts(None)
        previous = CHAIN_BEGINS
        rows = self.rows(
            """
            select seq, alert_id, happened_at, kind, who, note, payload, previous_hash, hash from alert_event
            order by seq
            """
        )
        for place, (seq, alert_id, at, kind, who, note, payload, before, digest) in enumerate(rows, start=1):
            recomputed = _digest(
                seq, facts.get(alert_id, ""), alert_id, at, kind, who, note, payload, previous
            )
            if before != previous or digest != recomputed:
                return place
            previous = digest
        return None

    def _alert_facts(self, wanted: set[int] | None) -> dict[int, str]:
        """The facts of alerts as one text each; all alerts when ``wanted`` is None."""
        found = self.rows(
            "select id, pair_key, day, night_id, payload from alert where $all or id in (select unnest($ids))",
            {"all": wanted is None, "ids": sorted(wanted or [])},
        )
        facts = {number: json_text([number, *rest]) for number, *rest in found}
        missing = sorted((wanted or set()) - facts.keys())
        if missing:
            raise NotFound(
                f"There is no alert {', '.join(map(str, missing))}. `rhovane alerts` lists those there are."
            )
        return facts


def _event(given: NewAlertEvent | Mapping[str, Any]) -> NewAlertEvent:
    if isinstance(given, NewAlertEvent):
        return given
    try:
        return NewAlertEvent(**given)
    except TypeError as error:
        raise RhovaneError(
            f"{dict(given)!r:.200} is no alert event ({error}); fields are alert_id, at, kind, who, note, payload."
        ) from error


def _digest(seq: int, alert: str, alert_id: int, at: datetime, *facts: str) -> str:
    text = json_text([seq, alert, alert_id, at.isoformat(timespec="microseconds"), *facts])
    return hashlib.sha256(text.encode()).hexdigest()

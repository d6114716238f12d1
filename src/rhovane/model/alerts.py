"""Alerts and what happened to them: an append-only list of events; the state follows from the list."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Any

from rhovane.model.alert_sheet import AlertSheet, Hint
from rhovane.model.estimates import CorrelationEstimate
from rhovane.model.plain import fact_of, plain_of


class AlertState(StrEnum):
    """Where an alert stands, in the words of ANSI/ISA-18.2 (IEC 62682)."""

    UNACKNOWLEDGED = "unacknowledged"
    ACKNOWLEDGED = "acknowledged"
    RETURNED_UNACKNOWLEDGED = "returned to normal, unacknowledged"
    RETURNED = "returned to normal"
    SHELVED = "shelved"
    OUT_OF_SERVICE = "out of service"


class EventKind(StrEnum):
    """What can happen to an alert after it was raised, and the raising itself."""

    RAISED = "raised"
    ACKNOWLEDGED = "acknowledged"
    SHELVED = "shelved"
    NOTE = "note"
    OUTCOME = "outcome"
    RETURNED = "returned to normal"
    NEW_BASELINE = "new baseline"
    SUPERSEDED = "superseded by revision"
    CONFIRMED = "confirmed after revision"
    OUT_OF_SERVICE = "out of service"


class Outcome(StrEnum):
    """What the analyst found to be behind an alert."""

    INSTRUMENT = "instrument"
    DATA_HANDLING = "data handling"
    REAL_CHANGE = "real change"
    WEATHER_OR_SEASON = "weather or season"
    FALSE = "false"
    UNDETERMINED = "undetermined"


@dataclass(frozen=True)
class AlertEvent:
    """One entry of the alert log. ``payload`` holds what the kind needs (outcome, shelved until, …)."""

    alert_id: int
    kind: EventKind
    at: dt.datetime
    who: str
    note: str = ""
    payload: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class Alert:
    """A recorded change of a relationship, with its evidence; the facts of its raising never change.

    ``alarm_day`` is the day whose evidence crossed the threshold, ``onset_day`` the likeliest first day
    of the change, ``night_as_of`` the night that raised it; ``onset_first`` to ``onset_last`` holds the onset with a
    probability of 90 %. ``pair_key`` is the pair whose evidence crossed,
    ``members`` all pairs concerned, ``suspect`` what is likeliest to have changed. ``before`` and ``after`` are rank correlations
    of the readings on either side of the onset. ``evidence`` and ``threshold`` are the chart's value and
    limit on the alarm day. ``lag_steps`` says by how many steps the suspect seems late (negative: early).
    ``sheet`` holds the companion facts; None for alerts of a program that had none.
    """

    id: int
    pair_key: str
    recipe_hash: str
    kind: str
    direction: str
    alarm_day: dt.date
    onset_day: dt.date
    night_as_of: dt.date
    night_id: int
    data_version: int
    settings_hash: str
    evidence: float
    threshold: float
    before: CorrelationEstimate
    after: CorrelationEstimate
    members: tuple[str, ...] = ()
    suspect: str = ""
    hints: tuple[Hint, ...] = ()
    onset_first: dt.date | None = None
    onset_last: dt.date | None = None
    lag_steps: int = 0
    sheet: AlertSheet | None = None

    def as_json(self) -> dict[str, Any]:
        """Plain values for the store and for ``--json``."""
        plain: dict[str, Any] = plain_of(self)
        return plain

    @classmethod
    def from_json(cls, plain: Mapping[str, Any]) -> Alert:
        """The alert that :meth:`as_json` wrote; hints of earlier programs were sentences."""
        hints = [{"text": hint} if isinstance(hint, str) else hint for hint in plain["hints"]]
        return fact_of(cls, {**plain, "hints": hints})

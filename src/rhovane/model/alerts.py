"""Alerts and what happened to them: an append-only list of events; the state follows from the list."""

from __future__ import annotations

import dataclasses
import datetime as dt
from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Any


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
class CorrelationEstimate:
    """A rank correlation with what it rests on; NaN-free: None where it cannot be assessed, with reason."""

    first_day: dt.date
    last_day: dt.date
    statistic: float | None
    n_pairs: int
    n_effective: float | None
    low: float | None
    high: float | None
    reason: str | None = None

    def as_json(self) -> dict[str, Any]:
        """Plain values for the store and for ``--json``."""
        return {
            **dataclasses.asdict(self),
            "first_day": self.first_day.isoformat(),
            "last_day": self.last_day.isoformat(),
        }

    @classmethod
    def from_json(cls, plain: Mapping[str, Any]) -> CorrelationEstimate:
        """The estimate that :meth:`as_json` wrote."""
        return cls(
            **{
                **plain,
                "first_day": dt.date.fromisoformat(plain["first_day"]),
                "last_day": dt.date.fromisoformat(plain["last_day"]),
            }
        )


DATES = ("alarm_day", "onset_day", "night_as_of")


@dataclass(frozen=True)
class Alert:
    """A recorded change of a relationship, with its evidence; the facts of its raising never change.

    ``alarm_day`` is the day whose evidence crossed the threshold, ``onset_day`` the likeliest first day
    of the change, ``night_as_of`` the night that raised it. ``pair_key`` is the pair whose evidence crossed,
    ``members`` all pairs concerned, ``suspect`` what is likeliest to have changed. ``before`` and ``after`` are rank correlations
    of the readings on either side of the onset. ``evidence`` and ``threshold`` are the chart's value and
    limit on the alarm day.
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
    hints: tuple[str, ...] = ()

    def as_json(self) -> dict[str, Any]:
        """Plain values for the store and for ``--json``."""
        return {
            **dataclasses.asdict(self),
            **{name: getattr(self, name).isoformat() for name in DATES},
            "before": self.before.as_json(),
            "after": self.after.as_json(),
            "members": list(self.members),
            "hints": list(self.hints),
        }

    @classmethod
    def from_json(cls, plain: Mapping[str, Any]) -> Alert:
        """The alert that :meth:`as_json` wrote."""
        return cls(
            **{
                **plain,
                **{name: dt.date.fromisoformat(plain[name]) for name in DATES},
                "before": CorrelationEstimate.from_json(plain["before"]),
                "after": CorrelationEstimate.from_json(plain["after"]),
                "members": tuple(plain["members"]),
                "hints": tuple(plain["hints"]),
            }
        )

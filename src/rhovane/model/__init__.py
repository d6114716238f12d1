"""The words of the domain, in the standard library only."""

from rhovane.model.alerts import Alert, AlertEvent, AlertState, CorrelationEstimate, EventKind, Outcome
from rhovane.model.errors import (
    ExitCode,
    FeedError,
    NotFound,
    RhovaneError,
    SettingsError,
    StoreDamaged,
    StoreLocked,
)
from rhovane.model.messages import Message, MessageKind
from rhovane.model.readings import Flag, IngestOutcome, ParsedFile, RejectedRow, Stage
from rhovane.model.series import Pair, Series, SeriesKind

__all__ = [
    "Alert",
    "AlertEvent",
    "AlertState",
    "CorrelationEstimate",
    "EventKind",
    "ExitCode",
    "FeedError",
    "Flag",
    "IngestOutcome",
    "Message",
    "MessageKind",
    "NotFound",
    "Outcome",
    "Pair",
    "ParsedFile",
    "RejectedRow",
    "RhovaneError",
    "Series",
    "SeriesKind",
    "SettingsError",
    "Stage",
    "StoreDamaged",
    "StoreLocked",
]

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
from rhovane.model.notes import MOMENT_KINDS, STEP_KINDS, DataNote, NoteKind, NoteState
from rhovane.model.readings import Flag, IngestOutcome, ParsedFile, RejectedRow, Stage
from rhovane.model.series import Pair, Series, SeriesKind

__all__ = [
    "MOMENT_KINDS",
    "STEP_KINDS",
    "Alert",
    "AlertEvent",
    "AlertState",
    "CorrelationEstimate",
    "DataNote",
    "EventKind",
    "ExitCode",
    "FeedError",
    "Flag",
    "IngestOutcome",
    "NotFound",
    "NoteKind",
    "NoteState",
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

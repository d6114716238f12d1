"""The words of the domain, in the standard library only."""

from rhovane.model.alert_sheet import AlertSheet, Bounded, EpisodeDays, Hint, SeriesLevel, Witness
from rhovane.model.alerts import Alert, AlertEvent, AlertState, EventKind, Outcome
from rhovane.model.cautions import CAUTION, CAUTIONS, DEMO_CAUTION
from rhovane.model.errors import (
    ExitCode,
    FeedError,
    NotFound,
    RhovaneError,
    SettingsError,
    StoreDamaged,
    StoreLocked,
)
from rhovane.model.estimates import CorrelationEstimate
from rhovane.model.messages import Message, MessageKind
from rhovane.model.notes import MOMENT_KINDS, STEP_KINDS, DataNote, NoteKind, NoteState
from rhovane.model.plain import plain_of
from rhovane.model.readings import Flag, IngestOutcome, ParsedFile, RejectedRow, Stage
from rhovane.model.series import Pair, Segment, Series, SeriesKind
from rhovane.model.site_log import ReadingsUse, SiteLogEntry

__all__ = [
    "CAUTION",
    "CAUTIONS",
    "DEMO_CAUTION",
    "MOMENT_KINDS",
    "STEP_KINDS",
    "Alert",
    "AlertEvent",
    "AlertSheet",
    "AlertState",
    "Bounded",
    "CorrelationEstimate",
    "DataNote",
    "EpisodeDays",
    "EventKind",
    "ExitCode",
    "FeedError",
    "Flag",
    "Hint",
    "IngestOutcome",
    "Message",
    "MessageKind",
    "NotFound",
    "NoteKind",
    "NoteState",
    "Outcome",
    "Pair",
    "ParsedFile",
    "ReadingsUse",
    "RejectedRow",
    "RhovaneError",
    "Segment",
    "Series",
    "SeriesKind",
    "SeriesLevel",
    "SettingsError",
    "SiteLogEntry",
    "Stage",
    "StoreDamaged",
    "StoreLocked",
    "Witness",
    "plain_of",
]

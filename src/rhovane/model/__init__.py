"""The words of the domain, in the standard library only."""

from rhovane.model.alerts import Alert, AlertEvent, AlertState, CorrelationEstimate, EventKind, Outcome
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
from rhovane.model.readings import Flag, IngestOutcome, ParsedFile, RejectedRow, Stage
from rhovane.model.series import Pair, Series, SeriesKind
from rhovane.model.site_log import SiteLogEntry

__all__ = [
    "CAUTION",
    "CAUTIONS",
    "DEMO_CAUTION",
    "Alert",
    "AlertEvent",
    "AlertState",
    "CorrelationEstimate",
    "EventKind",
    "ExitCode",
    "FeedError",
    "Flag",
    "IngestOutcome",
    "NotFound",
    "Outcome",
    "Pair",
    "ParsedFile",
    "RejectedRow",
    "RhovaneError",
    "Series",
    "SeriesKind",
    "SettingsError",
    "SiteLogEntry",
    "Stage",
    "StoreDamaged",
    "StoreLocked",
]

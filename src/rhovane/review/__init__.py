"""What the analyst asks in the morning: the alert list, one alert in full, and what is silent and why."""

from rhovane.review.alert_list import AlertEntry, alert_entries, alert_entry, record_decision
from rhovane.review.exporting import export_table
from rhovane.review.log import log_alerts, log_events, logged_alerts, logged_events
from rhovane.review.log_counts import LogCounts, log_counts
from rhovane.review.morning import Arrival, Morning, Silence, SuspectGroup, morning_of
from rhovane.review.relations import (
    PairNow,
    SeriesSheet,
    WindowTrack,
    pairs_now,
    series_sheet,
    window_track,
)
from rhovane.review.site_log import add_site_log_entry
from rhovane.review.status import Status, network_status

__all__ = [
    "AlertEntry",
    "Arrival",
    "LogCounts",
    "Morning",
    "PairNow",
    "SeriesSheet",
    "Silence",
    "Status",
    "SuspectGroup",
    "WindowTrack",
    "add_site_log_entry",
    "alert_entries",
    "alert_entry",
    "export_table",
    "log_alerts",
    "log_counts",
    "log_events",
    "logged_alerts",
    "logged_events",
    "morning_of",
    "network_status",
    "pairs_now",
    "record_decision",
    "series_sheet",
    "window_track",
]

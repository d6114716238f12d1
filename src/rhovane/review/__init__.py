"""What the analyst asks in the morning: the alert list, one alert in full, and what is silent and why."""

from rhovane.review.alert_list import AlertEntry, alert_entries, alert_entry, record_decision, unreviewed
from rhovane.review.exporting import export_table
from rhovane.review.log import log_alerts, log_events, logged_alerts, logged_events
from rhovane.review.silence import falling_coverage, silent_pairs, silent_series
from rhovane.review.status import Status, network_status
from rhovane.review.watch_over import Concern, concerns

__all__ = [
    "AlertEntry",
    "Concern",
    "Status",
    "alert_entries",
    "alert_entry",
    "concerns",
    "export_table",
    "falling_coverage",
    "log_alerts",
    "log_events",
    "logged_alerts",
    "logged_events",
    "network_status",
    "record_decision",
    "silent_pairs",
    "silent_series",
    "unreviewed",
]

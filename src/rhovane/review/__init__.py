"""What the analyst asks in the morning: the alert list, one alert in full, and what is silent and why."""

from rhovane.review.alert_list import AlertEntry, alert_entries, alert_entry, record_decision
from rhovane.review.exporting import export_table
from rhovane.review.log import log_alerts, log_events, logged_alerts, logged_events
from rhovane.review.notes import all_notes, current_notes, note_state, note_words, notes_as_json
from rhovane.review.status import Status, network_status

__all__ = [
    "AlertEntry",
    "Status",
    "alert_entries",
    "alert_entry",
    "all_notes",
    "current_notes",
    "export_table",
    "log_alerts",
    "log_events",
    "logged_alerts",
    "logged_events",
    "network_status",
    "note_state",
    "note_words",
    "notes_as_json",
    "record_decision",
]

"""What the analyst asks in the morning: the alert list, one alert in full, and what is silent and why."""

from rhovane.review.alert_list import AlertEntry, alert_entries, alert_entry, record_decision, unreviewed
from rhovane.review.exporting import export_table
from rhovane.review.log import log_alerts, log_events, logged_alerts, logged_events
from rhovane.review.log_counts import LogCounts, log_counts
from rhovane.review.morning import Arrival, Morning, Silence, SuspectGroup, morning_of
from rhovane.review.nearby import Nearby, nearby_entries, site_log_json
from rhovane.review.notes import all_notes, current_notes, note_state, note_words, notes_as_json
from rhovane.review.provenance import Provenance, provenance_of
from rhovane.review.relations import PairNow, SeriesSheet, WindowTrack, pairs_now, series_sheet, window_track
from rhovane.review.silence import falling_coverage, silent_pairs, silent_series
from rhovane.review.site_log import add_site_log_entry, withdraw_site_log_entry
from rhovane.review.status import Status, network_status
from rhovane.review.watch_over import Concern, concerns

__all__ = [
    "AlertEntry",
    "Arrival",
    "Concern",
    "LogCounts",
    "Morning",
    "Nearby",
    "PairNow",
    "Provenance",
    "SeriesSheet",
    "Silence",
    "Status",
    "SuspectGroup",
    "WindowTrack",
    "add_site_log_entry",
    "alert_entries",
    "alert_entry",
    "all_notes",
    "concerns",
    "current_notes",
    "export_table",
    "falling_coverage",
    "log_alerts",
    "log_counts",
    "log_events",
    "logged_alerts",
    "logged_events",
    "morning_of",
    "nearby_entries",
    "network_status",
    "note_state",
    "note_words",
    "notes_as_json",
    "pairs_now",
    "provenance_of",
    "record_decision",
    "series_sheet",
    "silent_pairs",
    "silent_series",
    "site_log_json",
    "unreviewed",
    "window_track",
    "withdraw_site_log_entry",
]

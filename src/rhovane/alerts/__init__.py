"""From evidence to alerts, and what an alert's events make of it."""

from rhovane.alerts.hints import hints_for
from rhovane.alerts.lifecycle import Standing, refusal, standing_of
from rhovane.alerts.messages import FAILING_NIGHTS, NightNews, night_messages, night_subject, notice
from rhovane.alerts.reconcile import Found, LogChange, reconcile

__all__ = [
    "FAILING_NIGHTS",
    "Found",
    "LogChange",
    "NightNews",
    "Standing",
    "hints_for",
    "night_messages",
    "night_subject",
    "notice",
    "reconcile",
    "refusal",
    "standing_of",
]

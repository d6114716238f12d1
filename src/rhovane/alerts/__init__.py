"""From evidence to alerts, and what an alert's events make of it."""

from rhovane.alerts.hints import hints_for
from rhovane.alerts.lifecycle import Standing, refusal, standing_of
from rhovane.alerts.reconcile import Found, LogChange, reconcile

__all__ = ["Found", "LogChange", "Standing", "hints_for", "reconcile", "refusal", "standing_of"]

"""Nights that run by themselves: when, in which order, what was missed, and how to end well."""

from rhovane.schedule.clock import Clock, SystemClock
from rhovane.schedule.due import due_nights
from rhovane.schedule.keeper import Keeper
from rhovane.schedule.logs import Log, open_log
from rhovane.schedule.service import run_service

__all__ = ["Clock", "Keeper", "Log", "SystemClock", "due_nights", "open_log", "run_service"]

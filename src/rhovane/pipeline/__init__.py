"""A night as a visible tuple of named steps, and a history walked night by night."""

from rhovane.pipeline.keeping import copy_due, keep_store
from rhovane.pipeline.looking_back import Reproduction, as_seen_now, reproduce
from rhovane.pipeline.nightly import STEPS, NightReport, run_night
from rhovane.pipeline.sending import Sent, post_notices, send_waiting
from rhovane.pipeline.telling import planned_moment
from rhovane.pipeline.walk import nights_between, walk_nights

__all__ = [
    "STEPS",
    "NightReport",
    "Reproduction",
    "Sent",
    "as_seen_now",
    "copy_due",
    "keep_store",
    "nights_between",
    "planned_moment",
    "post_notices",
    "reproduce",
    "run_night",
    "send_waiting",
    "walk_nights",
]

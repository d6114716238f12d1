"""A night as a visible tuple of named steps, and a history walked night by night."""

from rhovane.pipeline.keeping import copy_due, keep_store
from rhovane.pipeline.nightly import STEPS, NightReport, run_night
from rhovane.pipeline.sending import Sent, post_notices, send_waiting
from rhovane.pipeline.telling import planned_moment
from rhovane.pipeline.walk import nights_between, walk_nights

__all__ = [
    "STEPS",
    "NightReport",
    "Sent",
    "copy_due",
    "keep_store",
    "nights_between",
    "planned_moment",
    "post_notices",
    "run_night",
    "send_waiting",
    "walk_nights",
]

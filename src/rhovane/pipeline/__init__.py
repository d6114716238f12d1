"""A night as a visible tuple of named steps, and a history walked night by night."""

from rhovane.pipeline.looking_back import Reproduction, as_seen_now, reproduce
from rhovane.pipeline.nightly import STEPS, NightReport, run_night
from rhovane.pipeline.walk import nights_between, walk_nights

__all__ = [
    "STEPS",
    "NightReport",
    "Reproduction",
    "as_seen_now",
    "nights_between",
    "reproduce",
    "run_night",
    "walk_nights",
]

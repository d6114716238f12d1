"""A night as a visible tuple of named steps, and a history walked night by night."""

from rhovane.pipeline.nightly import STEPS, NightReport, run_night
from rhovane.pipeline.walk import nights_between, walk_nights

__all__ = ["STEPS", "NightReport", "nights_between", "run_night", "walk_nights"]

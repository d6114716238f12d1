"""Readings → a regular UTC grid, and the hours a pair's recipe keeps."""

from rhovane.prepare.days import Days, days_of
from rhovane.prepare.grid import Grid, to_grid
from rhovane.prepare.masks import PairMask, kept_hours
from rhovane.prepare.segments import common_segment_start, segment_start
from rhovane.prepare.set_aside import hours_not_used

__all__ = [
    "Days",
    "Grid",
    "PairMask",
    "common_segment_start",
    "days_of",
    "hours_not_used",
    "kept_hours",
    "segment_start",
    "to_grid",
]

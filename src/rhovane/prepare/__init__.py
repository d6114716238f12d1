"""Readings → a regular UTC grid, and the hours a pair's recipe keeps."""

from rhovane.prepare.days import Days, days_of
from rhovane.prepare.grid import Grid, to_grid
from rhovane.prepare.masks import PairMask, kept_hours

__all__ = ["Days", "Grid", "PairMask", "days_of", "kept_hours", "to_grid"]

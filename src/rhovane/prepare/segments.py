"""Segments: from which day on the readings of a series may be compared with those of a given day."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable

from rhovane.model import Series


def segment_start(series: Series, day: dt.date) -> dt.date | None:
    """First day of the segment that a day belongs to; None in the first segment, which has no known beginning.

    A window that ends on ``day`` uses no reading before it: another instrument, inlet or place may relate
    differently to everything else.
    """
    return max((s.first_day for s in series.segments if s.first_day <= day), default=None)


def common_segment_start(series: Iterable[Series], day: dt.date) -> dt.date | None:
    """The latest :func:`segment_start` of several series: from here on all of them are of one piece."""
    starts = (segment_start(one, day) for one in series)
    return max((start for start in starts if start is not None), default=None)

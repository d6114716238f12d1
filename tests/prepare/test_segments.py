"""Segments: where the readings of a series begin to be comparable with those of a day."""

import datetime as dt

import pytest

from rhovane.model import Segment, Series
from rhovane.prepare import common_segment_start, segment_start

MARCH, JUNE = dt.date(2025, 3, 1), dt.date(2025, 6, 1)
DAY = dt.timedelta(days=1)
MOVED = Series("A.NO2", "ug/m3", segments=(Segment(MARCH, "new analyser"), Segment(JUNE, "moved")))
PLAIN = Series("B.NO2", "ug/m3")
RENEWED = Series("C.NO2", "ug/m3", segments=(Segment(MARCH + 9 * DAY, "new inlet"),))


@pytest.mark.parametrize(
    ("day", "start"),
    [
        (MARCH - DAY, None),
        (MARCH, MARCH),
        (JUNE - DAY, MARCH),
        (JUNE, JUNE),
        (JUNE + 999 * DAY, JUNE),
    ],
)
def test_segment_begins_with_its_first_day_and_ends_before_the_next(day, start):
    assert segment_start(MOVED, day) == start
    assert segment_start(PLAIN, day) is None


def test_several_series_are_of_one_piece_from_the_latest_border_on():
    assert common_segment_start([MOVED, PLAIN, RENEWED], MARCH + 8 * DAY) == MARCH
    assert common_segment_start([MOVED, PLAIN, RENEWED], MARCH + 9 * DAY) == MARCH + 9 * DAY
    assert common_segment_start([MOVED, PLAIN, RENEWED], JUNE) == JUNE
    assert common_segment_start([MOVED, PLAIN], MARCH - DAY) is None
    assert common_segment_start([PLAIN], JUNE) is None


def test_a_border_does_not_depend_on_later_ones():
    """What a window of the past used stays the same when a further segment begins."""
    earlier = Series("A.NO2", "ug/m3", segments=MOVED.segments[:1])
    for i in range((JUNE - MARCH).days):
        assert segment_start(MOVED, MARCH + i * DAY) == segment_start(earlier, MARCH + i * DAY)

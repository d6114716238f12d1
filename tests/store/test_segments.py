"""Segments in the store: what is in force, and what was in force at an earlier moment."""

import dataclasses
import datetime as dt

import pytest

from rhovane.model import Segment
from store.building import NOW, SERIES

MARCH, JUNE = dt.date(2024, 3, 1), dt.date(2024, 6, 1)
LATER = NOW + dt.timedelta(days=1)
LATEST = NOW + dt.timedelta(days=2)


def with_segments(*segments):
    return [dataclasses.replace(SERIES[0], segments=segments), *SERIES[1:]]


def plain(store, at=None):
    return [(g.key, g.first_day, g.what) for g in store.segments(at=at)]


def test_changed_and_withdrawn_segments_stay_readable_with_their_times(store):
    key = SERIES[0].key
    store.keep_segments(with_segments(Segment(MARCH, "new analyser")), now=NOW)
    store.keep_segments(with_segments(Segment(MARCH, "new analyser"), Segment(JUNE, "moved")), now=LATER)
    store.keep_segments(with_segments(Segment(JUNE, "moved")), now=LATEST)
    assert plain(store, NOW) == [(key, MARCH, "new analyser")]
    assert plain(store, LATER) == [(key, MARCH, "new analyser"), (key, JUNE, "moved")]
    assert plain(store, LATEST) == [(key, JUNE, "moved")]
    assert plain(store, NOW - dt.timedelta(seconds=1)) == []
    assert [(g.recorded_at, g.withdrawn_at) for g in store.segments()] == [(NOW, LATEST), (LATER, None)]
    assert store.verify() == []


def test_same_segments_again_write_nothing_and_other_series_keep_theirs(store):
    series = with_segments(Segment(MARCH, "new analyser"))
    store.keep_segments(series, now=NOW)
    store.keep_segments(list(series), now=LATER)
    store._segments_kept = ()  # as in a new process
    store.keep_segments(series, now=LATER)
    store.keep_segments(SERIES[1:], now=LATEST)
    assert [(g.recorded_at, g.withdrawn_at) for g in store.segments()] == [(NOW, None)]


@pytest.mark.parametrize("back", [True, False])
def test_segment_that_comes_back_is_recorded_anew(store, back):
    store.keep_segments(with_segments(Segment(MARCH, "new analyser")), now=NOW)
    store.keep_segments(SERIES, now=LATER)
    if back:
        store.keep_segments(with_segments(Segment(MARCH, "new analyser")), now=LATEST)
    assert len(plain(store)) == 1 + back
    assert len(plain(store, LATEST)) == back

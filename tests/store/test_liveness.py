"""The service's sign of life."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace

import pytest

from rhovane.store import Liveness, Noticed, read_liveness, write_liveness
from rhovane.store.liveness import liveness_path

NOW = dt.datetime(2025, 3, 2, 3, 40, tzinfo=dt.UTC)
SIGN = Liveness(4711, NOW, NOW, 30, "running", "night 2025-03-01", NOW, (Noticed(NOW, "clock", "set back"),))


def test_a_sign_of_life_is_read_as_it_was_written(path):
    assert read_liveness(path) is None
    write_liveness(path, SIGN)
    assert read_liveness(path) == SIGN
    write_liveness(path, replace(SIGN, next_night=None, events=()))
    assert read_liveness(path) == replace(SIGN, next_night=None, events=())
    assert [p.name for p in path.parent.iterdir()] == [liveness_path(path).name]


@pytest.mark.parametrize("text", ["", "{", "[]", '{"pid": 1}', '{"beat": 3}'])
def test_a_file_that_cannot_be_understood_is_no_sign_of_life(path, text):
    liveness_path(path).write_text(text)
    assert read_liveness(path) is None


def test_a_service_is_alive_for_four_heartbeats():
    assert SIGN.alive(NOW + dt.timedelta(seconds=120))
    assert not SIGN.alive(NOW + dt.timedelta(seconds=121))
    assert not replace(SIGN, state="stopped").alive(NOW)
    assert SIGN.alive(NOW - dt.timedelta(days=1)), "the clock was set back; the service is there"

"""Hints say what a change is consistent with and what to check; never what it is."""

import pytest

from rhovane.alerts import hints_for

CASES = [
    ("K.traffic", "K.NO2", "weaker", "pair K.traffic~K.NO2", "strength", "closure"),
    ("A.NO2", "B.NO2", "weaker", "pair A.NO2~B.NO2", "strength", "instruments"),
    ("A.PM25", "B.PM25", "weaker", "series A.PM25", "strength", "inlet"),
    ("A.NO2", "B.NO2", "weaker", "series A.NO2", "strength", "A.NO2"),
    ("A.O3", "B.O3", "weaker", "station A", "timing", "clock of station A"),
    ("A.O3", "B.O3", "weaker", "pair A.O3~B.O3", "timing", "one of the two loggers"),
    ("A.O3", "B.O3", "weaker", "station A", "strength", "all of station A"),
    ("A.O3", "A.temperature", "stronger", "pair", "strength", "weather regime"),
    ("A.wind_speed", "B.wind_speed", "weaker", "", "strength", "wind_speed sensor"),
    ("A.O3", "A.temperature", "weaker", "", "strength", "season"),
]


@pytest.mark.parametrize(("first", "second", "direction", "suspect", "kind", "word"), CASES)
def test_each_kind_of_change_names_what_to_look_at(first, second, direction, suspect, kind, word):
    hints = hints_for(first, second, direction, suspect=suspect, kind=kind)
    assert hints
    assert any(word in hint for hint in hints)
    for hint in hints:
        assert hint.startswith("consistent with ")

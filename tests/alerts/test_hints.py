"""Hints say what a change is consistent with, what speaks for and against it, and what to check; never what it is."""

from __future__ import annotations

import datetime as dt

import pytest

from rhovane.alerts import hints_for
from rhovane.model import Alert, AlertSheet, Bounded, CorrelationEstimate, EpisodeDays, SeriesLevel, Witness

DAY = dt.date(2025, 3, 1)


def estimate(rho: float | None) -> CorrelationEstimate:
    return CorrelationEstimate(DAY, DAY, rho, 600, 40.0, None, None)


def sheet(
    *witnesses: tuple[str, str, bool | None],
    ratios: dict[str, tuple[float, float, float]] | None = None,
    spread: float = 1.0,
    episode: tuple[dt.date, ...] = (),
    season: bool = False,
) -> AlertSheet:
    levels = tuple(
        SeriesLevel(key, "1", Bounded(1.0), Bounded(1.0), Bounded(*ratio), spread)
        for key, ratio in (ratios or {}).items()
    )
    return AlertSheet(
        DAY, 1, Bounded(-0.5, -0.7, -0.3), levels, Bounded(1.0), Bounded(1.0), estimate(0.4), season,
        EpisodeDays(episode, 0.8), tuple(Witness(p, r, 0.5, 0.8, 3.0, 7, m) for p, r, m in witnesses),
    )  # fmt: skip


def alert(
    first: str,
    second: str,
    direction: str = "weaker",
    suspect: str = "",
    kind: str = "strength",
    *,
    after: float = 0.3,
    told: AlertSheet | None = None,
    lag_steps: int = 0,
) -> Alert:
    return Alert(
        1, f"{first}~{second}", "r", kind, direction, DAY, DAY, DAY, 1, 1, "s", 9.0, 8.0,
        estimate(0.8), estimate(after), (), suspect, lag_steps=lag_steps, sheet=told,
    )  # fmt: skip


CASES = [
    ("K.traffic", "K.NO2", "weaker", "pair K.traffic~K.NO2", "strength", "closure"),
    ("K.traffic", "K.NO2", "weaker", "pair K.traffic~K.NO2", "strength", "lane"),
    ("A.NO2", "B.NO2", "weaker", "pair A.NO2~B.NO2", "strength", "instrument behind B.NO2"),
    ("A.PM25", "B.PM25", "weaker", "series A.PM25", "strength", "inlet"),
    ("A.PM25", "B.PM25", "weaker", "pair", "strength", "inlet"),
    ("A.NO2", "B.NO2", "weaker", "series A.NO2", "strength", "A.NO2"),
    ("A.O3", "B.O3", "weaker", "station A", "timing", "clock of station A"),
    ("A.O3", "B.O3", "weaker", "pair A.O3~B.O3", "timing", "one of the two loggers"),
    ("A.O3", "B.O3", "weaker", "station A", "strength", "all of station A"),
    ("A.O3", "A.temperature", "stronger", "pair", "strength", "weather regime"),
    ("A.wind_speed", "B.wind_speed", "weaker", "", "strength", "wind_speed instrument"),
    ("A.O3", "A.temperature", "weaker", "", "strength", "season"),
]


@pytest.mark.parametrize(("first", "second", "direction", "suspect", "kind", "word"), CASES)
def test_each_kind_of_change_names_what_to_look_at(first, second, direction, suspect, kind, word):
    hints = hints_for(alert(first, second, direction, suspect, kind))
    assert any(word in hint.text for hint in hints)
    for hint in hints:
        assert hint.text.startswith("consistent with ")
        assert hint.check


def test_the_pairs_that_moved_speak_for_a_failing_series_and_those_that_held_against_it():
    told = sheet(
        ("A.NO2~B.NO2", "own", True), ("A.NO2~C.NO2", "own", False), ("B.NO2~C.NO2", "partner", False)
    )
    hint = hints_for(alert("A.NO2", "B.NO2", suspect="series A.NO2", told=told))[0]
    assert hint.supports == (
        "its pairs moved: A.NO2~B.NO2",
        "other pairs of its partners held: B.NO2~C.NO2",
    )
    assert hint.against == ("its pairs held: A.NO2~C.NO2",)


def test_a_count_that_fell_speaks_for_the_road_and_an_unmoved_receptor_for_the_counter():
    both = sheet(ratios={"K.traffic": (0.2, 0.1, 0.3), "K.NO2": (0.6, 0.5, 0.7)})
    road, counter, *_ = hints_for(alert("K.traffic", "K.NO2", told=both))
    assert len(road.supports) == 2
    assert road.against == ()
    assert counter.against == ("median of K.NO2 is × 0.60 of before",)
    only = sheet(ratios={"K.traffic": (0.5, 0.4, 0.6), "K.NO2": (1.0, 0.9, 1.1)})
    road, counter, *_ = hints_for(alert("K.traffic", "K.NO2", told=only))
    assert road.against == ("median of K.NO2 is × 1.00 of before",)
    assert len(counter.supports) == 2


def test_a_receptor_that_rose_speaks_for_a_new_source_and_against_a_weaker_one():
    told = sheet(ratios={"S.lorries": (0.95, 0.8, 1.1), "S.PM10": (1.44, 1.1, 1.9)})
    weaker, new, *_ = hints_for(alert("S.lorries", "S.PM10", told=told))
    assert "median of S.PM10 is × 1.44 of before" in weaker.against
    assert new.text == "consistent with a new source beside S.PM10"
    assert new.supports == ("median of S.PM10 is × 1.44 of before",)


@pytest.mark.parametrize(("spread", "supported"), [(0.12, True), (0.95, False)])
def test_a_shrunken_spread_speaks_for_a_blocked_inlet(spread: float, supported: bool):
    told = sheet(ratios={"D.PM25": (0.5, 0.3, 1.2)}, spread=spread)
    hints = hints_for(alert("D.PM25", "K.PM25", suspect="series D.PM25", told=told))
    (inlet,) = [h for h in hints if "inlet" in h.text and "flow" in h.text]
    assert bool(inlet.supports) is supported
    assert bool(inlet.against) is not supported


def test_a_series_that_follows_temperature_more_closely_is_told():
    told = sheet(("A.NO2~B.NO2", "own", True), ("A.NO2~A.temperature", "own", True))
    texts = [h.text for h in hints_for(alert("A.NO2", "B.NO2", suspect="series A.NO2", told=told))]
    assert any("following temperature" in text for text in texts)
    without = sheet(("A.NO2~B.NO2", "own", True), ("A.NO2~A.temperature", "own", False))
    texts = [h.text for h in hints_for(alert("A.NO2", "B.NO2", suspect="series A.NO2", told=without))]
    assert not any("following temperature" in text for text in texts)


def test_a_level_step_speaks_for_a_swap_or_a_new_span():
    step, none = (sheet(ratios={"A.NO2": r}) for r in ((0.5, 0.4, 0.6), (0.9, 0.7, 1.2)))
    for told, expected in ((step, True), (none, False)):
        texts = [h.text for h in hints_for(alert("A.NO2", "B.NO2", suspect="series A.NO2", told=told))]
        assert any("swap" in text for text in texts) is expected


def test_two_series_of_a_station_that_changed_at_once_may_be_crossed_channels():
    told = sheet(("A.NO2~B.NO2", "own", True), ("A.O3~B.O3", "own", True))
    hints = hints_for(alert("A.NO2", "B.NO2", suspect="station A", told=told))
    (crossed,) = [h for h in hints if "crossed channels" in h.text]
    assert crossed.supports == ("2 of its series changed at once: A.NO2, A.O3",)


def test_what_would_make_it_no_news_comes_first():
    told = sheet(("C.O3~D.O3", "alike", False), episode=(DAY,), season=True)
    episode, season, *_ = hints_for(alert("A.O3", "B.O3", told=told))
    assert episode.text == "consistent with an episode of 1 day"
    assert "2025-03-01" in episode.supports[0]
    assert "same as last year at this season" in season.text
    assert season.against == ("1 pairs of the same quantities held",)


def test_perfect_agreement_looks_like_one_feed_under_two_names():
    hints = hints_for(alert("A.NO2", "B.NO2", "stronger", after=0.9999))
    assert "one feed delivered under two names" in hints[0].text
    hints = hints_for(alert("A.NO2", "B.NO2", "stronger", after=0.98))
    assert not any("one feed" in hint.text for hint in hints)


def test_a_pair_of_one_sector_may_have_a_new_source_upwind_or_a_turned_vane():
    plain, sector = (hints_for(alert("S.lorries", "S.PM10"), sector=s) for s in (False, True))
    assert [h.text for h in plain] == [h.text for h in sector[:-2]]
    assert "wind sector" in sector[-2].text
    assert "vane" in sector[-1].text


def test_a_slipped_clock_says_how_late():
    hints = hints_for(alert("A.O3", "B.O3", suspect="station A", kind="timing", lag_steps=1))
    assert hints[-1].supports == ("readings seem 1 h late",)

"""The watch over a network: causal, silent on missing days, one incident a change, the budget kept."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from scipy.stats import poisson

from reference.naive_watch import naive_watch
from rhovane.stats.daily_scores import DailyScores
from rhovane.stats.watch import DayState, Watch, signal, watch

DAYS = 420
PLACES = "ABCD"
MEMBERS = [(f"{a}.NO2", f"{b}.NO2") for i, a in enumerate(PLACES) for b in PLACES[i + 1 :]]


def daily(score: np.ndarray, hours: float = 24.0) -> DailyScores:
    """Daily scores with a given innovation score, a day shape that says less, and no lag movement."""
    rng = np.random.default_rng(99)
    scored = np.where(np.isnan(score), 0.0, hours)
    shape = np.where(np.isnan(score), np.nan, rng.normal(0.1, 0.5, score.size))
    lagged = np.tile([0.0, 0.0, 0.5, 0.0, 0.0], (score.size, 1))
    return DailyScores(np.arange(score.size), score, scored, shape, scored, lagged)


def network(seed: int, days: int = DAYS, mean: float = 0.8, sd: float = 0.25) -> list[np.ndarray]:
    """Independent normal daily scores of the six pairs of four stations."""
    rng = np.random.default_rng(seed)
    return [rng.normal(mean, sd, days) for _ in MEMBERS]


def watched(scores: list[np.ndarray], rate: float = 2.0, **options: Any) -> Watch:
    return watch([daily(s) for s in scores], false_alarms_per_year=rate, members=MEMBERS, **options)


def failing(seed: int, place: str, first: int, last: int = DAYS) -> list[np.ndarray]:
    """A network in which one station's series loses its relations for some days."""
    scores = network(seed)
    for pair, score in zip(MEMBERS, scores, strict=True):
        if f"{place}.NO2" in pair:
            score[first:last] -= 0.7
    return scores


def test_a_failing_series_is_one_incident_within_days_and_named() -> None:
    for seed, place in ((1, "A"), (2, "B"), (3, "C"), (4, "D")):
        seen = watched(failing(seed, place, 200), rate=0.3)
        own = {p for p, pair in enumerate(MEMBERS) if f"{place}.NO2" in pair}
        near = [i for i in seen.incidents if 195 <= i.alarm_day < 310 and own & {*i.pairs}]
        assert len(near) == 1, f"seed {seed}: {near}"
        incident = near[0]
        assert 200 <= incident.alarm_day <= 204
        assert 196 <= incident.onset_day <= 202
        assert incident.settled is not None
        assert incident.settled.suspect == ("series", f"{place}.NO2"), f"seed {seed}"
        assert incident.direction == "weaker"
        assert incident.after < incident.before
        assert incident.evidence > incident.threshold


def test_a_change_that_ends_returns_and_one_that_lasts_becomes_the_baseline() -> None:
    short = [i for i in watched(failing(5, "A", 200, 240), rate=0.3).incidents if 195 <= i.alarm_day < 240]
    assert [i.ending for i in short] == ["returned"]
    assert short[0].end_day is not None
    assert 240 <= short[0].end_day <= 262
    lasting = [i for i in watched(failing(5, "A", 200), rate=0.3).incidents if 195 <= i.alarm_day < 400]
    assert [i.ending for i in lasting] == ["new baseline"]
    assert lasting[0].end_day == lasting[0].alarm_day + 110


def test_later_days_never_change_earlier_decisions() -> None:
    scores = failing(6, "B", 180, 260)
    whole = watched(scores)
    for day in (95, 182, 185, 200, 300):
        part = watched([s[: day + 1] for s in scores])
        known = [i for i in whole.incidents if i.alarm_day <= day]
        assert [(i.alarm_day, i.onset_day, i.judged, i.evidence) for i in part.incidents] == [
            (i.alarm_day, i.onset_day, i.judged, i.evidence) for i in known
        ], f"day {day}"
        np.testing.assert_array_equal(part.evidence, whole.evidence[: day + 1])
        np.testing.assert_array_equal(part.state, whole.state[: day + 1])


def test_a_pair_that_still_learns_does_not_touch_decisions_on_others() -> None:
    """A late pair chooses its score on day 210; replays from before and after must agree on earlier days."""
    scores = failing(15, "B", 150, 190)
    given = [daily(s) for s in scores]
    late = np.arange(DAYS) >= 150
    shape = np.where(late, np.random.default_rng(15).normal(1.0, 0.2, DAYS), np.nan)
    innovation = np.where(late, scores[0], np.nan)
    hours = np.where(late, 24.0, 0.0)
    given[0] = replace(
        given[0], innovation=innovation, innovation_hours=hours, shape=shape, shape_hours=hours
    )

    def seen(days: int) -> Watch:
        part = [DailyScores(*(None if v is None else v[:days] for v in vars(s).values())) for s in given]
        return watch(part, false_alarms_per_year=2.0, members=MEMBERS)

    before, after = seen(205), seen(300)
    assert (before.recipe[0], after.recipe[0]) == ("innovation", "day shape")
    np.testing.assert_array_equal(before.deviation, after.deviation[:205])
    assert before.incidents[0].judged == after.incidents[0].judged


def test_the_order_of_pairs_does_not_matter() -> None:
    scores = failing(7, "C", 200)
    order = [4, 2, 0, 5, 1, 3]
    one = watched(scores)
    other = watch(
        [daily(scores[k]) for k in order],
        false_alarms_per_year=2.0,
        members=[MEMBERS[k][::-1] for k in order],
    )
    assert [(i.alarm_day, i.direction) for i in one.incidents] == [
        (i.alarm_day, i.direction) for i in other.incidents
    ]
    for a, b in zip(one.incidents, other.incidents, strict=True):
        assert {*a.pairs} == {order[p] for p in b.pairs}
        assert order[b.lead] == a.lead
        assert a.suspect[0] == b.suspect[0]
        assert a.suspect[0] == "pair" or a.suspect == b.suspect
    np.testing.assert_allclose(one.evidence[:, order], other.evidence, rtol=1e-6)


def test_missing_days_never_alarm() -> None:
    scores = network(8)
    for score in scores:
        score[150:190] = np.nan
        score[np.random.default_rng(8).random(DAYS) < 0.3] = np.nan
    seen = watched(scores)
    for incident in seen.incidents:
        assert any(np.isfinite(scores[p][incident.alarm_day]) for p in incident.pairs)
    assert not [i for i in seen.incidents if 150 <= i.alarm_day < 190]
    assert (seen.state[155] == DayState.NOT_SCORED).all()
    assert np.isnan(seen.deviation[150:190]).all()


def test_what_the_whole_class_does_is_no_alarm() -> None:
    scores = network(9)
    for score in scores:
        score[200:230] += 0.6
    assert not [i for i in watched(scores, rate=1.0).incidents if 200 <= i.alarm_day < 240]
    alone = watch([daily(scores[0])], false_alarms_per_year=1.0)
    assert [i for i in alone.incidents if 200 <= i.alarm_day < 240]


def test_a_pair_that_stands_alone_is_judged_as_defined() -> None:
    score = np.random.default_rng(10).normal(0.8, 0.25, 300)
    score[np.random.default_rng(11).random(300) < 0.1] = np.nan
    seen = watch([daily(score)], false_alarms_per_year=0.001)
    hours = np.where(np.isnan(score), 0.0, 24.0)
    scaled, value = naive_watch(score[None], hours[None], [("A.a", "B.b")])
    assert not seen.incidents
    np.testing.assert_allclose(seen.deviation[:, 0], scaled[0], rtol=1e-7, atol=1e-9)
    np.testing.assert_allclose(seen.evidence[:, 0], value[0], rtol=1e-7, atol=1e-8)


def test_learning_lasts_a_baseline_and_a_late_pair_learns_two_thirds_of_one() -> None:
    scores = network(12)
    scores[0][:200] = np.nan
    seen = watched(scores)
    assert (seen.state[:90] == DayState.LEARNING).all()
    assert (seen.state[90:200, 1:] != DayState.LEARNING).all()
    assert (seen.state[:260, 0] == DayState.LEARNING).all()
    assert seen.state[262, 0] == DayState.WATCHED


def test_false_alarms_on_independent_days_meet_the_budget() -> None:
    """Twenty network-years at 4 a year: the count must lie in the central 99.9 % of a Poisson of 80 ± 20 %."""
    count = 0
    for seed in range(20):
        count += len(watched(network(1000 + seed, 90 + 365), rate=4.0).incidents)
    low, high = poisson.ppf(0.0005, 80 * 0.8), poisson.ppf(0.9995, 80 * 1.2)
    assert low <= count <= high, count


def test_the_stronger_signal_is_watched_and_the_course_only_between_quantities() -> None:
    rng = np.random.default_rng(13)
    base = daily(rng.normal(0.3, 0.3, 150))
    hours = np.full(150, 24.0)
    shape = replace(base, shape=rng.normal(0.9, 0.3, 150), shape_hours=hours)
    course = replace(shape, course=rng.normal(1.5, 0.3, 150), course_hours=hours)
    seen = watch(
        [base, shape, course, course, base],
        false_alarms_per_year=1.0,
        members=[
            ("A.NO2", "B.NO2"),
            ("A.NO2", "C.NO2"),
            ("B.NO2", "C.NO2"),
            ("A.traffic", "A.NO2"),
            ("A.O3", "B.O3"),
        ],
        choice=["auto", "auto", "auto", "auto", "day shape"],
    )
    assert seen.recipe == ("innovation", "day shape", "day shape", "day course", "day shape")
    assert signal(shape.shape) > signal(base.innovation) > 0
    assert signal(np.full(20, 1.0)) == 0.0


def test_an_empty_network_sees_nothing() -> None:
    seen = watch([], false_alarms_per_year=1.0)
    assert seen.incidents == ()
    assert seen.score.shape == (0, 0)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"false_alarms_per_year": 0.0}, "must be a number above 0"),
        ({"false_alarms_per_year": np.nan}, "must be a number above 0"),
        ({"baseline_days": 10}, "baseline_days=10 is too few"),
        ({"guard_days": 0}, "guard_days=0 is too few"),
        ({"rebaseline_days": 5}, "rebaseline_days=5 is too few"),
        ({"choice": ["auto"]}, "choice has 1 entries for 2 pairs"),
        ({"choice": ["auto", "level"]}, "is not known"),
        ({"choice": ["auto", "day course"]}, "scores hold none"),
        ({"members": [("A.x", "B.x")]}, "members has 1 entries"),
    ],
)
def test_a_mistake_is_refused(options: dict[str, Any], message: str) -> None:
    scores = [daily(s) for s in network(14, 120)[:2]]
    with pytest.raises(ValueError, match=message):
        watch(scores, **{"false_alarms_per_year": 1.0, **options})
    with pytest.raises(ValueError, match="other days"):
        watch([scores[0], scores[1].last(50)], false_alarms_per_year=1.0)

"""What people know steers the watch from the day it was known, and never what was decided before."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from rhovane.stats.daily_scores import DailyScores
from rhovane.stats.decisions import Decisions, SetAside
from rhovane.stats.replay import Replay
from rhovane.stats.resume import SPARE_DAYS, WatchMemory
from rhovane.stats.watch import DayState, Watch, watch

MEMBERS = [("A.NO2", "B.NO2"), ("A.NO2", "C.NO2"), ("B.NO2", "C.NO2"), ("A.O3", "B.O3"), ("B.O3", "C.O3")]
N_DAYS = 330
FAULT, REPAIR = 170, 230


def history(seed: int, *, fault: slice = slice(FAULT, REPAIR), lasting: int = N_DAYS) -> list[DailyScores]:
    """Five pairs; series A.NO2 fails for a while, pair 4 changes for good on a day."""
    rng = np.random.default_rng(seed)
    scores = []
    for i in range(len(MEMBERS)):
        innovation = 1.0 + rng.normal(size=N_DAYS) * 0.2
        if i in (0, 1):
            innovation[fault] -= 0.9
        if i == 4:
            innovation[lasting:] -= 1.2
        hours = np.full(N_DAYS, 24.0)
        lagged = np.tanh(innovation)[:, None] * np.array([0.1, 0.3, 1.0, 0.3, 0.1])
        scores.append(DailyScores(np.arange(N_DAYS), innovation, hours, innovation * 0.5, hours, lagged))
    return scores


def first_days(scores: list[DailyScores], n: int) -> list[DailyScores]:
    return [DailyScores(*(None if v is None else v[:n] for v in vars(s).values())) for s in scores]


def look(
    scores: list[DailyScores],
    set_aside: list[SetAside] = (),
    new_baselines: list[tuple[int, int]] = (),
    memory: WatchMemory | None = None,
) -> Watch:
    return watch(
        scores,
        members=MEMBERS,
        false_alarms_per_year=0.1,
        choice=["innovation"] * len(MEMBERS),
        set_aside=set_aside,
        new_baselines=new_baselines,
        memory=memory,
    )


def assert_equal(ours: Watch, theirs: Watch, what: str, days: slice = slice(None)) -> None:
    for f in dataclasses.fields(Watch):
        if f.name not in ("incidents", "recipe"):
            one, other = getattr(ours, f.name)[days], getattr(theirs, f.name)[days]
            np.testing.assert_array_equal(one, other, err_msg=f"{what}: {f.name}")


def near(seen: Watch, first: int, last: int) -> list:
    return [i for i in seen.incidents if first <= i.alarm_day <= last]


def test_days_set_aside_from_the_beginning_are_as_if_they_had_never_been_scored():
    scores = history(1)
    innovation = scores[0].innovation.copy()
    innovation[100:120] = np.nan
    without = [dataclasses.replace(scores[0], innovation=innovation), *scores[1:]]
    ours, theirs = look(scores, [SetAside((0,), 100, 119)]), look(without)
    assert ours.incidents == theirs.incidents
    assert ours.incidents
    for name in ("reference_mean", "reference_sd", "deviation", "evidence", "threshold"):
        np.testing.assert_array_equal(getattr(ours, name), getattr(theirs, name), err_msg=name)
    assert (ours.state[100:120, 0] == DayState.NOT_JUDGED).all()
    assert (ours.state[120:160, 0] == DayState.WATCHED).all()


def test_a_fault_in_the_site_log_does_not_alarm_and_leaves_the_reference_clean():
    scores = history(2)
    assert near(look(scores), FAULT, REPAIR)
    seen = look(scores, [SetAside((0, 1), FAULT, REPAIR - 1)])
    assert not near(seen, FAULT, N_DAYS)
    assert (seen.state[FAULT:REPAIR, :2] == DayState.NOT_JUDGED).all()
    assert (seen.state[REPAIR:, :2] == DayState.WATCHED).all()
    assert np.nanmin(seen.reference_mean[REPAIR:, :2]) > 0.9


def test_what_becomes_known_later_changes_nothing_before_and_the_reference_after():
    scores = history(3, fault=slice(FAULT, FAULT + 3))
    known = FAULT + 20
    plain, seen = look(scores), look(scores, [SetAside((0, 1), FAULT, FAULT + 2, known=known)])
    assert_equal(seen, plain, "before", slice(0, known))
    later = slice(known, known + 80)
    assert (seen.reference_mean[later, 0] > plain.reference_mean[later, 0]).all()
    expected = [
        np.average(np.delete(scores[0].innovation[: d - 14], slice(FAULT, FAULT + 3))[-90:])
        for d in range(known, known + 80)
    ]
    np.testing.assert_allclose(seen.reference_mean[later, 0], expected, rtol=1e-12)


def test_a_withdrawn_entry_acts_no_longer():
    scores = history(4, fault=slice(0, 0))
    forgotten = look(scores, [SetAside((2,), 150, 250, known=150, forgotten=200)])
    assert (forgotten.state[150:200, 2] == DayState.NOT_JUDGED).all()
    assert (forgotten.state[200:, 2] == DayState.WATCHED).all()
    np.testing.assert_array_equal(forgotten.reference_mean[200:], look(scores).reference_mean[200:])


def test_a_confirmed_fault_is_never_taken_as_the_new_normal_and_its_return_is_seen():
    scores = history(5, fault=slice(FAULT, 310))
    (unattended,) = near(look(scores), FAULT, FAULT + 10)
    assert unattended.ending == "new baseline"
    known = unattended.alarm_day + 3
    seen = look(scores, [SetAside((0, 1), unattended.onset_day, None, known=known, judged=True)])
    (incident,) = near(seen, FAULT, FAULT + 10)
    assert incident.alarm_day == unattended.alarm_day
    assert incident.ending == "returned"
    assert 310 <= incident.end_day <= 325
    assert not near(seen, 311, N_DAYS)


def test_a_new_baseline_by_decision_ends_the_change_and_the_reference_starts_anew():
    scores = history(16, fault=slice(0, 0), lasting=200)
    (plain,) = near(look(scores), 200, 210)
    assert plain.end_day == plain.alarm_day + 110
    for wait in (2, 30):  # before and after the suspect is settled
        day = plain.alarm_day + wait
        seen = look(scores, new_baselines=[(4, day)])
        (incident,) = near(seen, 200, N_DAYS)
        assert (incident.end_day, incident.ending) == (day, "new baseline"), wait
        assert incident.judged == plain.judged
        assert_equal(seen, look(scores), "before the decision", slice(0, day))
        again = plain.onset_day + 7 + 20 + 14  # 20 days of the new level, and the guard
        assert np.isnan(seen.reference_mean[day:again, 4]).all()
        assert (seen.reference_mean[again + 5 :, 4] < 0.2).all()
    elsewhere = look(scores, new_baselines=[(3, plain.alarm_day + 2)])
    assert elsewhere.incidents == look(scores).incidents


def decisions_by_night(n: int) -> tuple[list[SetAside], list[tuple[int, int]]]:
    """What is known when the night of day n - 1 runs: it grows, gets an end, and is partly withdrawn."""
    aside, renewed = [], []
    if n > 150:  # an entry about days gone by and to come, withdrawn on day 205
        aside.append(SetAside((2, 3), 140, 260, known=150, forgotten=205 if n > 205 else None))
    if n > 180:  # a confirmed fault; its end is known from day 240 on
        aside.append(SetAside((0, 1), 171, 239 if n > 240 else None, known=180, judged=True))
    if n > 275:
        renewed.append((4, 275))
    return aside, renewed


def test_nights_with_decisions_between_them_give_what_a_fresh_replay_gives(monkeypatch: pytest.MonkeyPatch):
    scores, memory = history(7, lasting=250), WatchMemory()
    judged = []
    plain_judge = Replay.judge

    def counting(self: Replay, day: int) -> None:
        judged.append(day)
        plain_judge(self, day)

    monkeypatch.setattr(Replay, "judge", counting)
    for n in range(120, N_DAYS + 1):
        before = len(judged)
        going = look(first_days(scores, n), *decisions_by_night(n), memory=memory)
        if n not in (120, 121 + SPARE_DAYS):  # nothing to go on from, no room left
            assert judged[before:] == [n - 1], "only the new day is judged"
        if n in (150, 151, 181, 206, 241, 242, 276, N_DAYS):
            fresh = look(first_days(scores, n), *decisions_by_night(n))
            assert going.incidents == fresh.incidents
            assert_equal(going, fresh, f"{n} days")
    at_once = look(scores, *decisions_by_night(N_DAYS))
    assert going.incidents == at_once.incidents
    assert {i.ending for i in at_once.incidents} == {"returned", "new baseline"}


def test_a_decision_about_days_already_judged_is_replayed_from_there():
    """Another history of decisions (an edited calendar) must not go on from a state that did not know it."""
    scores, memory = history(8), WatchMemory()
    look(scores, memory=memory)
    aside = [SetAside((0, 1), FAULT, REPAIR)]
    assert_equal(look(scores, aside, memory=memory), look(scores, aside), "the calendar was edited")


def test_only_what_bears_on_the_first_days_is_compared():
    one = Decisions((SetAside((1, 0), 5, None, known=8),), ((2, 9),))
    other = Decisions((SetAside((0, 1), 5, 40, known=8, forgotten=50),), ((2, 9), (1, 30)))
    assert one.up_to(20) == other.up_to(20)
    assert one.up_to(45) != other.up_to(45)
    assert one.up_to(8) == Decisions()


@pytest.mark.parametrize(
    ("aside", "renewed", "message"),
    [
        ([SetAside((7,), 1, 2)], [], "names pairs"),
        ([SetAside((0,), 5, 2)], [], "before its first day"),
        ([SetAside((0,), 1, 2, known=9, forgotten=3)], [], "before it is known"),
        ([], [(9, 100)], "names pair 9"),
    ],
)
def test_a_decision_that_cannot_be_is_refused(aside, renewed, message: str):
    with pytest.raises(ValueError, match=message):
        look(history(9), aside, renewed)

"""Going on from a kept state gives what a full replay gives, to the last bit."""

import dataclasses

import numpy as np
import pytest

from rhovane.stats.daily_scores import DailyScores
from rhovane.stats.resume import RECENT, WatchMemory
from rhovane.stats.watch import Watch, watch

MEMBERS = [("A.NO2", "B.NO2"), ("A.NO2", "C.NO2"), ("B.NO2", "C.NO2"), ("A.O3", "B.O3"), ("B.O3", "C.O3")]
N_DAYS = 330


def history(seed: int) -> list[DailyScores]:
    """Five pairs with gaps; one series fails for a while, one pair changes for good."""
    rng = np.random.default_rng(seed)
    weather = rng.normal(size=N_DAYS) * 0.15
    scores = []
    for i in range(len(MEMBERS)):
        innovation = 1.0 + weather + rng.normal(size=N_DAYS) * 0.2
        if i in (0, 1):
            innovation[170:200] -= 0.9
        if i == 4:
            innovation[230:] -= 1.2
        innovation[rng.random(N_DAYS) < 0.08] = np.nan
        hours = np.where(np.isnan(innovation), 0.0, 24.0)
        lagged = np.tanh(innovation)[:, None] * np.array([0.1, 0.3, 1.0, 0.3, 0.1])
        scores.append(
            DailyScores(np.arange(N_DAYS), innovation, hours, innovation * 0.5, hours, np.nan_to_num(lagged))
        )
    return scores


def first_days(scores: list[DailyScores], n: int) -> list[DailyScores]:
    return [
        DailyScores(
            **{
                f.name: None if getattr(s, f.name) is None else getattr(s, f.name)[:n]
                for f in dataclasses.fields(s)
            }
        )
        for s in scores
    ]


def look(scores: list[DailyScores], memory: WatchMemory | None = None) -> Watch:
    return watch(scores, members=MEMBERS, false_alarms_per_year=4, memory=memory)


def assert_equal(ours: Watch, theirs: Watch, what: str) -> None:
    assert ours.incidents == theirs.incidents, what
    for f in dataclasses.fields(Watch):
        if f.name not in ("incidents", "recipe"):
            np.testing.assert_array_equal(
                getattr(ours, f.name), getattr(theirs, f.name), err_msg=f"{what} {f.name}"
            )


@pytest.mark.parametrize("seed", [1, 2])
def test_nights_in_a_row_give_what_a_full_replay_gives(seed: int):
    scores, memory = history(seed), WatchMemory()
    for n in range(80, N_DAYS + 1):
        going = look(first_days(scores, n), memory)
        if n % 25 == 0 or n == N_DAYS:
            assert_equal(going, look(first_days(scores, n)), f"seed {seed}, {n} days")
    assert len(going.incidents) >= 2, "the history is meant to hold changes that end and that last"
    assert any(i.ending == "returned" for i in going.incidents)


@pytest.mark.parametrize("back", [1, 5, RECENT + 3, 60, 200])
def test_a_revised_day_is_judged_again_from_there(back: int):
    scores, memory = history(3), WatchMemory()
    for n in range(250, 300):
        look(first_days(scores, n), memory)
    revised = [
        dataclasses.replace(s, innovation=np.where(np.arange(N_DAYS) == 299 - back, 0.2, s.innovation))
        for s in scores
    ]
    assert_equal(look(first_days(revised, 300), memory), look(first_days(revised, 300)), f"{back} days back")
    assert_equal(look(first_days(revised, 301), memory), look(first_days(revised, 301)), "the night after")


def test_an_earlier_night_and_another_budget_are_replayed_rightly():
    scores, memory = history(4), WatchMemory()
    look(first_days(scores, 320), memory)
    assert_equal(look(first_days(scores, 260), memory), look(first_days(scores, 260)), "an earlier night")
    other = watch(first_days(scores, 321), members=MEMBERS, false_alarms_per_year=1, memory=memory)
    plain = watch(first_days(scores, 321), members=MEMBERS, false_alarms_per_year=1)
    assert_equal(other, plain, "another budget")


def test_the_memory_stays_small():
    scores, memory = history(5), WatchMemory()
    for n in range(150, N_DAYS + 1):
        look(first_days(scores, n), memory)
    assert len(memory.states) <= RECENT + 11

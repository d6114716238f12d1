"""Leave-days-out: an episode is found, a lasting change is not taken for one."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from rhovane.stats import rank_correlation_test
from rhovane.stats.episode import episode_of

N_DAYS = 15


def stretch(seed: int, rho: float) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    e = rng.normal(size=(2, 24 * N_DAYS))
    x = np.empty_like(e)
    x[:, 0] = e[:, 0]
    for t in range(1, x.shape[1]):
        x[:, t] = 0.7 * x[:, t - 1] + np.sqrt(0.51) * e[:, t]
    return x[0], rho * x[0] + np.sqrt(1 - rho**2) * x[1]


def correlation(x: np.ndarray, y: np.ndarray) -> Callable[[np.ndarray], float]:
    def of(kept: np.ndarray) -> float:
        return rank_correlation_test(np.where(np.repeat(kept, 24), x, np.nan), y, adjust="none").statistic

    return of


@pytest.mark.parametrize("seed", range(5))
def test_the_days_of_an_episode_are_named_and_without_them_the_correlation_is_back(seed: int):
    x, y = stretch(seed, 0.8)
    y[24 * 6 : 24 * 9] = -3.0 * x[24 * 6 : 24 * 9]
    found = episode_of(correlation(x, y), np.ones(N_DAYS, bool), 0.8)
    assert found.days
    assert len(set(found.days) - {6, 7, 8}) <= 1
    assert len(set(found.days) & {6, 7, 8}) >= 2
    assert found.without > 0.65


@pytest.mark.parametrize("seed", range(5))
def test_a_lasting_change_is_no_episode(seed: int):
    x, y = stretch(seed, 0.3)
    of = correlation(x, y)
    found = episode_of(of, np.ones(N_DAYS, bool), 0.8)
    assert (found.days, found.reason) == ((), None)
    assert found.without == of(np.ones(N_DAYS, bool))


def test_a_relation_that_grows_for_a_few_days_is_an_episode_too():
    x, y = stretch(3, 0.2)
    y[: 24 * 3] = 6.0 * x[: 24 * 3]
    x[: 24 * 3] *= 6.0
    found = episode_of(correlation(x, y), np.ones(N_DAYS, bool), 0.2)
    assert found.days
    assert set(found.days) <= {0, 1, 2}


def test_no_more_than_one_day_in_three_is_cut_away_and_too_few_days_say_so():
    asked: list[int] = []

    def counting(kept: np.ndarray) -> float:
        asked.append(int(kept.sum()))
        return 0.1

    assert episode_of(counting, np.ones(7, bool), 0.8).days == ()
    assert min(asked) == 5
    assert (
        episode_of(counting, np.array([True, False, True]), 0.8).reason
        == "2 days with readings, at least 3 needed"
    )
    assert episode_of(counting, np.ones(9, bool), 0.15).reason == "the correlation has hardly changed"
    assert "not computable" in (episode_of(lambda _kept: float("nan"), np.ones(9, bool), 0.8).reason or "")

"""Which pairs moved since a day, and which held."""

from __future__ import annotations

import numpy as np
import pytest

from reference.naive_sheet import sum_scale
from rhovane.stats.movement import movements_since


def network(n_pairs: int, seed: int, phi: float = 0.0) -> tuple[np.ndarray, ...]:
    rng = np.random.default_rng(seed)
    noise = rng.normal(size=(260, n_pairs))
    for d in range(1, 260):
        noise[d] = phi * noise[d - 1] + np.sqrt(1 - phi**2) * noise[d]
    weight = np.full(noise.shape, 22.0)
    mean, sd = np.full(noise.shape, 1.0), np.full(noise.shape, 1.1)
    return 1.0 + 1.1 * noise / np.sqrt(22.0), weight, mean, sd


def test_the_pair_that_moved_is_told_from_those_that_held():
    score, weight, mean, sd = network(6, 1)
    score[240:, 2] -= 1.0
    found = movements_since(score, weight, mean, sd, 240, 246)
    assert [p for p, one in enumerate(found) if one.moved] == [2]
    assert found[2].before == pytest.approx(np.tanh(1.0))
    assert found[2].after < 0.35
    assert found[2].z < -5.0
    assert found[2].n_days == 7


def test_the_number_is_the_sum_of_deviations_over_what_such_sums_usually_are():
    score, weight, mean, sd = network(1, 2, phi=0.6)
    score[100:110, 0] = np.nan
    (found,) = movements_since(score, weight, mean, sd, 230, 236)
    daily = np.clip((score[:, 0] - 1.0) / 1.1 * np.sqrt(22.0), -3.5, 3.5)
    expected = daily[230:237].sum() / sum_scale(daily[50:230], 7, 60)
    assert found.z == pytest.approx(expected)


def test_pairs_whose_days_follow_each_other_seldom_count_as_moved():
    """Independent sums would call 19 % of such pairs moved (AR(1) .6, 7 days)."""
    score, weight, mean, sd = network(400, 3, phi=0.6)
    found = movements_since(score, weight, mean, sd, 250, 256)
    assert np.mean([bool(one.moved) for one in found]) < 0.06


def test_a_pair_without_reference_or_scored_days_is_left_open():
    score, weight, mean, sd = network(3, 4)
    mean[:, 0] = np.nan
    score[241:, 1] = np.nan
    found = movements_since(score, weight, mean, sd, 240, 246)
    assert [one.moved for one in found] == [None, None, False]
    assert [one.n_days for one in found] == [0, 1, 7]


def test_later_days_change_nothing():
    score, weight, mean, sd = network(3, 5)
    cut = tuple(a[:248] for a in (score, weight, mean, sd))
    assert movements_since(*cut, 240, 247) == movements_since(score, weight, mean, sd, 240, 247)

"""Naming what changed: a pair, a series or a station, and clocks that slipped."""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest

from rhovane.stats.network import directions, structure_of
from rhovane.stats.suspect import explain, lag_movement, slipped_node

PLACES = "ABCDE"
MEMBERS = [(f"{a}.NO2", f"{b}.NO2") for i, a in enumerate(PLACES) for b in PLACES[i + 1 :]]
STRUCTURE = structure_of(MEMBERS)
MEAN = np.full(len(MEMBERS), np.arctanh(0.7))
NAMES = [(h.kind, h.name) for h in STRUCTURE.hypotheses]


def setting() -> tuple[np.ndarray, np.ndarray]:
    """Covariance of pairs that share series, and the hypotheses' directions."""
    shares = np.array([[len({*a} & {*b}) for b in MEMBERS] for a in MEMBERS])
    belongs = np.zeros((len(NAMES), len(MEMBERS)), dtype=bool)
    for row, one in zip(belongs, STRUCTURE.hypotheses, strict=True):
        row[one.pairs] = True
    direction = np.zeros(belongs.shape)
    directions(
        belongs, MEAN, np.ones(len(MEMBERS)), np.full(len(MEMBERS), 22.0), direction, np.zeros(len(MEMBERS))
    )
    return np.where(shares == 2, 1.0, np.where(shares == 1, 0.3, 0.0)), direction


def days(rng: np.random.Generator, covariance: np.ndarray, shift: np.ndarray, n: int = 5) -> np.ndarray:
    return shift[:, None] + np.linalg.cholesky(covariance) @ rng.normal(size=(len(shift), n))


def named(shift_of: np.ndarray, seed: int, repeats: int = 60) -> Counter[tuple[str, object]]:
    rng = np.random.default_rng(seed)
    covariance, direction = setting()
    everything = np.arange(len(NAMES))
    out: Counter[tuple[str, object]] = Counter()
    for _ in range(repeats):
        found = explain(STRUCTURE, everything, days(rng, covariance, shift_of), covariance, direction, MEAN)
        assert found is not None
        out[NAMES[found.hypothesis]] += 1
    return out


@pytest.mark.parametrize("place", ["A", "C", "E"])
def test_a_failing_series_is_named_nine_times_in_ten(place: str) -> None:
    shift = np.array([-2.0 if f"{place}.NO2" in pair else 0.0 for pair in MEMBERS])
    assert named(shift, 1)["series", f"{place}.NO2"] >= 54


def test_a_single_changed_pair_is_named_nine_times_in_ten() -> None:
    shift = np.zeros(len(MEMBERS))
    shift[3] = -2.5
    assert named(shift, 2)["pair", 3] >= 54


def test_a_node_needs_a_second_witness() -> None:
    """One pair that fell by very much would look like its series without the rule."""
    shift = np.zeros(len(MEMBERS))
    shift[0] = -6.0
    counts = named(shift, 3)
    assert counts["pair", 0] == 60


def test_the_lead_is_the_pair_that_moved_most() -> None:
    covariance, direction = setting()
    shift = np.array([-1.5 if "A.NO2" in pair else 0.0 for pair in MEMBERS])
    shift[2] = -4.0
    rng = np.random.default_rng(4)
    found = explain(
        STRUCTURE, np.arange(len(NAMES)), days(rng, covariance, shift, 12), covariance, direction, MEAN
    )
    assert found is not None
    assert found.lead == 2


def test_nothing_observed_explains_nothing() -> None:
    covariance, direction = setting()
    empty = np.full((len(MEMBERS), 4), np.nan)
    assert explain(STRUCTURE, np.arange(len(NAMES)), empty, covariance, direction, MEAN) is None


@pytest.mark.parametrize(("late", "expected"), [(1, 1), (2, 2), (0, 0), (-1, -1)])
def test_a_slipped_clock_shows_its_steps_whichever_side_it_is_on(late: int, expected: int) -> None:
    series = NAMES.index(("series", "C.NO2"))
    lagged = np.full((len(MEMBERS), 6, 5), 0.05)
    for p in STRUCTURE.hypotheses[series].pairs:
        steps = late if MEMBERS[p][1] == "C.NO2" else -late
        lagged[p, :, 2 + steps] = 0.6
    assert lag_movement(STRUCTURE, STRUCTURE.hypotheses[series], lagged, MEAN) == expected


def test_a_weak_gain_at_another_lag_is_no_slip() -> None:
    lagged = np.full((len(MEMBERS), 6, 5), 0.3)
    lagged[:, :, 3] = 0.38
    assert lag_movement(STRUCTURE, STRUCTURE.hypotheses[0], lagged, MEAN) == 0
    assert lag_movement(STRUCTURE, STRUCTURE.hypotheses[0], np.full_like(lagged, np.nan), MEAN) == 0


def test_a_pair_that_moved_in_lag_speaks_for_the_series_whose_others_moved_too() -> None:
    lagged = np.tile([0.05, 0.05, 0.6, 0.05, 0.05], (len(MEMBERS), 2, 1))
    pair = MEMBERS.index(("C.NO2", "D.NO2"))
    lagged[pair] = [0.05, 0.6, 0.05, 0.05, 0.05]
    assert slipped_node(STRUCTURE, pair, lagged, MEAN) is None
    for p in STRUCTURE.hypotheses[NAMES.index(("series", "C.NO2"))].pairs:
        late = 3 if MEMBERS[p][1] == "C.NO2" else 1
        lagged[p] = 0.05
        lagged[p, :, late] = 0.6
    node = slipped_node(STRUCTURE, pair, lagged, MEAN)
    assert node is not None
    assert NAMES[node] == ("series", "C.NO2")

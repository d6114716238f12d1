"""How pairs hang together, and what the network as its own control does to their deviations."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from reference.naive_monitor import naive_reference
from reference.naive_watch import naive_watch
from rhovane.stats.decisions import Decisions, SetAside
from rhovane.stats.network import (
    add_class_movement,
    directions,
    duplicate_nodes,
    inverse_among,
    learnt_covariance,
    references,
    structure_of,
    unrest,
    whole_covariance,
)
from rhovane.stats.replay import Replay, Spans

MEMBERS = [
    ("A.NO2", "B.NO2"),
    ("C.NO2", "A.NO2"),
    ("B.NO2", "C.NO2"),
    ("A.O3", "B.O3"),
    ("A.traffic", "A.NO2"),
]


def test_series_and_stations_with_two_partners_are_suspects() -> None:
    structure = structure_of(MEMBERS)
    nodes = {(h.kind, h.name): h.pairs.tolist() for h in structure.hypotheses if h.kind != "pair"}
    assert nodes == {
        ("series", "A.NO2"): [0, 1, 4],
        ("series", "B.NO2"): [0, 2],
        ("series", "C.NO2"): [1, 2],
        ("station", "A"): [0, 1, 3],
        ("station", "B"): [0, 2, 3],
    }
    assert structure.classes.tolist() == [0, 0, 0, 2, 1]
    assert structure.related[3].tolist() == [False, False, False, True, False]
    assert structure.related[4].tolist() == [True, True, False, False, True]


def test_two_recipes_of_the_same_pair_are_one_partner() -> None:
    structure = structure_of([("A.NO2", "B.NO2"), ("A.NO2", "B.NO2")], ["plain", "adjusted"])
    assert [h.kind for h in structure.hypotheses] == ["pair", "pair"]
    assert structure.related.all()


def test_without_stations_every_pair_is_its_own_class() -> None:
    structure = structure_of([("0", "1"), ("1", "2"), ("3", "4")], stations=False)
    assert sorted(structure.classes.tolist()) == [0, 1, 2]
    assert [(h.kind, h.name) for h in structure.hypotheses[3:]] == [("series", "1")]


def test_references_equal_their_definition() -> None:
    rng = np.random.default_rng(1)
    score, weight = rng.normal(0.5, 0.2, (3, 250)), rng.integers(6, 23, (3, 250)).astype(float)
    score[rng.random(score.shape) < 0.2] = np.nan
    usable = rng.random(score.shape) < 0.9
    for day in (0, 20, 60, 249):
        got = references(score, weight, usable, day, 14, 90, 20)
        for p in range(3):
            expected = naive_reference(np.where(usable[p], score[p], np.nan), weight[p], day)
            np.testing.assert_allclose(got[:, p], expected, rtol=1e-9)


def test_class_movement_adds_along_the_classes_own_direction_and_its_inverse_follows() -> None:
    movement = np.array([0.5, -1.0, 2.0, 0.3, 0.7])
    classes = np.array([0, 0, 0, 1, 1])
    scored, seen = np.array([True, True, True, True, False]), np.array([True, False, True, True, False])
    variance = np.array([0.0, 0.0, 4.0, 9.0])
    learnt = np.eye(5)
    learnt[0, 2] = learnt[2, 0] = 0.4
    got = whole_covariance(learnt, classes, scored, movement, variance)
    along = movement[:3] / np.sqrt(np.mean(movement[:3] ** 2))
    expected = learnt.copy()
    expected[:3, :3] += 9.0 * np.outer(along, along)
    np.testing.assert_allclose(got, expected, atol=1e-6)
    inverse = inverse_among(np.linalg.inv(learnt), seen)
    add_class_movement(inverse, classes, scored, seen, movement, variance)
    chosen = np.ix_(seen, seen)
    np.testing.assert_allclose(inverse[chosen], np.linalg.inv(got[chosen]), rtol=1e-12, atol=1e-12)
    assert not inverse[~seen].any()


def test_learnt_covariance_keeps_related_pairs_only() -> None:
    rng = np.random.default_rng(2)
    common = rng.normal(size=120)
    history = np.stack([common + 0.5 * rng.normal(size=120) for _ in range(3)])
    related = np.array([[True, True, False], [True, True, False], [False, False, True]])
    got = learnt_covariance(history, np.ones((3, 120), dtype=bool), related)
    assert np.diag(got).tolist() == [1.0, 1.0, 1.0]
    assert 0.4 < got[0, 1] < 0.7
    assert got[0, 2] == 0.0


def test_more_pairs_than_days_still_give_a_covariance() -> None:
    history = np.random.default_rng(5).normal(size=(200, 120))
    got = learnt_covariance(history, np.ones((200, 120), dtype=bool), np.ones((200, 200), dtype=bool))
    assert np.linalg.eigvalsh(got)[0] >= 0.1 - 1e-9
    assert np.diag(got).tolist() == [1.0] * 200


KNOWN = [
    SetAside((0, 2), 70, 76),
    SetAside((1, 3), 120, None, known=126, forgotten=139),
    SetAside((0, 1, 2), 112, 131, known=120, judged=True),
    SetAside((8, 9), 150, 170, known=155, forgotten=180),
]
"""Days of one series and of many, known always, at once and afterwards; withdrawn; judged all the same."""


@pytest.mark.parametrize(("seed", "aside"), [(1, []), (2, []), (1, KNOWN), (2, KNOWN)])
def test_the_evidence_of_a_small_network_equals_its_definition(seed: int, aside: list[SetAside]) -> None:
    """Two classes, two stations' worth of nodes, gaps, and a weather that moves one class."""
    rng = np.random.default_rng(seed)
    pairs = [(f"{a}.{q}", f"{b}.{q}") for q in ("NO2", "O3") for a, b in ("AB", "BC", "AC", "CD")]
    pairs += [("A.O3", "A.NO2"), ("E.rain", "F.rain")]
    n_days = 190
    score = (
        rng.normal(0.8, 0.2, (len(pairs), n_days))
        + 0.2 * rng.normal(size=n_days) * (np.arange(10) < 4)[:, None]
    )
    score[8] -= 1.6
    score[rng.random(score.shape) < 0.07] = np.nan
    hours = np.where(np.isnan(score), 0.0, rng.integers(10, 25, score.shape))
    replay = Replay(
        score, np.maximum(hours - 2.0, 1.0), np.zeros((*score.shape, 5)), np.full(len(pairs), 90),
        structure_of(pairs), Spans(90, 14, 110), 1e-9, Decisions(tuple(aside)),
    )  # fmt: skip
    assert not replay.run()
    scaled, value = naive_watch(score, hours, pairs, aside=[dataclasses.astuple(s) for s in aside])
    np.testing.assert_allclose(replay.scaled, scaled, rtol=1e-7, atol=1e-9)
    np.testing.assert_allclose(replay.values, value, rtol=1e-7, atol=1e-8)
    assert np.isfinite(scaled[10:, 90:]).any(), "the network is meant to have nodes that are judged"


def test_what_a_whole_class_does_is_taken_out() -> None:
    """Six pairs of one class move together by 3 sd for five days: each alone would alarm, together none does."""
    rng = np.random.default_rng(4)
    pairs = [(f"{a}.NO2", f"{b}.NO2") for a, b in ("AB", "AC", "AD", "BC", "BD", "CD")]
    score = rng.normal(0.8, 0.2, (6, 180))
    together, one = score.copy(), score.copy()
    together[:, 150:155] -= 0.6
    one[0, 150:155] -= 0.6

    def found(score: np.ndarray) -> int:
        rest = (np.full((6, 180), 22.0), np.zeros((6, 180, 5)), np.full(6, 90))
        incidents = Replay(score, *rest, structure_of(pairs), Spans(90, 14, 110), 0.3, Decisions()).run()
        return sum(150 <= i.alarm_day < 160 for i in incidents)

    assert found(together) == 0
    assert found(one) == 1


def test_a_failing_series_points_toward_loss_in_its_pairs_only() -> None:
    structure = structure_of(MEMBERS)
    belongs = np.zeros((len(structure.hypotheses), 5), dtype=bool)
    for row, one in zip(belongs, structure.hypotheses, strict=True):
        row[one.pairs] = True
    mean = np.arctanh([0.8, -0.6, 0.05, 0.5, 0.4])
    direction, movement = np.zeros(belongs.shape), np.zeros(5)
    directions(belongs, mean, np.full(5, 1.0), np.full(5, 16.0), direction, movement)
    node = direction[5]
    assert node[0] < 0 < node[1]
    assert node[2] == node[3] == 0.0
    assert np.sign(movement).tolist() == [1, -1, 1, 1, 1]
    assert not duplicate_nodes(structure, direction, np.eye(5))[:5].any()


def test_unrest_is_the_median_size_of_the_others() -> None:
    z = np.array([0.5, -1.0, 2.0, np.nan, 0.6745, -3.0, 0.1, 0.9])
    touches = np.zeros((2, 8), dtype=bool)
    touches[0, 0] = True
    touches[1, :3] = True
    got = unrest(z, touches)
    assert got[0] == pytest.approx(np.median([1.0, 2.0, 0.6745, 3.0, 0.1, 0.9]) / 0.6745)
    assert np.isnan(got[1])

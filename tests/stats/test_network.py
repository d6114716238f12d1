"""How pairs hang together, and what the network as its own control does to their deviations."""

from __future__ import annotations

import numpy as np
import pytest

from reference.naive_monitor import naive_reference
from rhovane.stats.network import (
    add_class_movement,
    directions,
    duplicate_nodes,
    filtered,
    learnt_covariance,
    references,
    structure_of,
    unrest,
)

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


def test_class_movement_adds_along_the_classes_own_direction() -> None:
    movement = np.array([0.5, -1.0, 2.0, 0.3, 0.7])
    classes = np.array([0, 0, 0, 1, 1])
    observed = np.array([True, True, True, True, False])
    got = np.eye(5)
    add_class_movement(got, classes, observed, movement, np.array([0.0, 0.0, 4.0, 9.0]))
    along = movement[:3] / np.sqrt(np.mean(movement[:3] ** 2))
    expected = np.eye(5)
    expected[:3, :3] += 9.0 * np.outer(along, along)
    np.testing.assert_allclose(got, expected, atol=1e-6)


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


def test_a_lone_pairs_filter_is_its_own_t_statistic() -> None:
    rng = np.random.default_rng(3)
    past = rng.normal(0.3, 1.2, (1, 150))
    t, n = filtered(np.ones((1, 1)), np.ones((1, 1)), np.array([2.0]), past, np.ones((1, 150)), 90)
    last = past[0, -90:]
    assert n[0] == 90
    assert t[0] == pytest.approx((2.0 - last.mean()) / (last.std(ddof=1) * np.sqrt(1 + 1 / 90)))


def test_what_a_whole_class_does_is_taken_out() -> None:
    """Six pairs of one class move together by 3 sd: alone each would stand out, with control none does."""
    rng = np.random.default_rng(4)
    past = rng.normal(size=(6, 180))
    direction, movement = np.eye(6), np.ones(6)
    covariance = np.eye(6)
    add_class_movement(
        covariance, np.zeros(6, np.int64), np.ones(6, bool), movement, np.array([0, 0, 0, 4.0])
    )
    together, one = np.full(6, 3.0), np.array([3.0, 0, 0, 0, 0, 0])
    args = past, np.ones((6, 180)), 90
    t_together, _ = filtered(direction, np.linalg.inv(covariance), together, *args)
    t_one, _ = filtered(direction, np.linalg.inv(covariance), one, *args)
    assert np.abs(t_together).max() < 1.0
    assert t_one[0] > 2.2


def test_a_failing_series_points_toward_loss_in_its_pairs_only() -> None:
    structure = structure_of(MEMBERS)
    belongs = np.zeros((len(structure.hypotheses), 5), dtype=bool)
    for row, one in zip(belongs, structure.hypotheses, strict=True):
        row[one.pairs] = True
    is_node = np.array([h.kind != "pair" for h in structure.hypotheses])
    mean = np.arctanh([0.8, -0.6, 0.05, 0.5, 0.4])
    direction, movement = directions(is_node, belongs, mean, np.full(5, 1.0), np.full(5, 16.0))
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

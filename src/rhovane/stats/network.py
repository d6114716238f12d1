"""The network as its own control: what a class of pairs does together is weather, what one does alone is news.

Each night the deviations of all pairs from their references form one vector. Its covariance is learnt from
the reference days; to it comes, for every class of pairs (the same two quantities), the direction in which
a season or an episode moves the whole class. Generalised least squares against that covariance then asks
of every *hypothesis* (this pair changed; this series fails; this station fails) how strongly today's
vector speaks for it. Idea: Pearson & Filon (1898) and Steiger (1980) on correlations that share a variable;
numbers: tests/studies/alerting.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.compiled import compiled

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

HISTORY_DAYS = 200
"""Days before the guard whose deviations form a filter's own history."""
COVARIANCE_DAYS = 120
"""Days before the guard from which correlations between pairs are learnt."""
INDEPENDENT_SHARE = 0.3
"""Share by which correlations between pairs are shrunk toward none at least."""
LEAST_EIGENVALUE = 0.1
"""Correlations between pairs are shrunk until their matrix has no smaller eigenvalue: with hundreds of pairs
and 120 days the estimates contradict each other,"""
SHRINKAGE = 0.7
"""by this factor at a time."""
LEAST_COMMON_DAYS = 20
"""A correlation between two pairs is divided by at least this many common days."""
CLASS_VARIANCE = np.array([0.0, 0.0, 4.0, 4.0])
"""Variance of the movement of a whole class, by number of its pairs observed; the last for more."""
FAILING_SHARE = 0.5
"""A failing series is taken to bring its pairs' daily correlations down to this share."""
LEAST_RELATION = 0.1
"""Pairs with a smaller absolute correlation say nothing about a failing series."""
LEAST_HISTORY_SHARE = 0.8
"""A day counts in a filter's history where this share of its weight was observed."""
LEAST_OBSERVED_SHARE = 0.6
"""A hypothesis is judged where this share of its direction is observed."""
MAX_HISTORY_DEVIATION = 5.0
"""Deviations of reference days are kept inside this."""
LEAST_OTHER_PAIRS = 6
"""Fewest pairs from which the unrest of the rest of the network is read."""
NORMAL_MEDIAN = 0.6745
"""Median of the absolute value of a standard normal variable."""
DUPLICATE_COSINE = 0.85
"""A node whose direction is this close to that of one of its pairs is left to the pair."""


@dataclass(frozen=True)
class Hypothesis:
    """What may have changed: ``kind`` "pair", "series" or "station"; ``name``; positions of its pairs."""

    kind: str
    name: object
    pairs: NDArray[np.int64]


@dataclass(frozen=True)
class Structure:
    """How the pairs of a network hang together.

    ``classes`` (n_pairs,) numbers the class of each pair; ``members`` its two series; ``related``
    (n_pairs, n_pairs) is true for pairs that share a class or a series; ``hypotheses`` lists pairs first,
    then series and stations with at least two pairs to different partners.
    """

    classes: NDArray[np.int64]
    members: tuple[tuple[str, str], ...]
    related: Flags
    hypotheses: tuple[Hypothesis, ...]

    @property
    def n_pairs(self) -> int:
        """Number of pairs."""
        return len(self.classes)


def structure_of(
    members: Sequence[tuple[str, str]], classes: Sequence[str] | None = None, *, stations: bool = True
) -> Structure:
    """The structure of a network from the series keys "STATION.quantity" of its pairs.

    Parameters
    ----------
    members : sequence of (str, str)
        Keys of each pair's two series.
    classes : sequence of str, optional
        Class of each pair; default: its two quantities, whichever comes first.
    stations : bool
        Whether keys name stations; without, every pair is a class of its own.
    """
    if classes is None:
        if stations:
            classes = ["~".join(sorted(map(quantity_of, pair))) for pair in members]
        else:
            classes = [str(i) for i in range(len(members))]
    numbers = np.array([sorted(set(classes)).index(c) for c in classes], dtype=np.int64)
    n = len(members)
    related = np.array(
        [
            [numbers[i] == numbers[j] or bool({*members[i]} & {*members[j]}) for j in range(n)]
            for i in range(n)
        ],
        dtype=bool,
    ).reshape(n, n)
    found = [Hypothesis("pair", i, np.array([i])) for i in range(n)]
    for key in sorted({k for pair in members for k in pair}):
        at = [i for i, pair in enumerate(members) if key in pair]
        if len({k for i in at for k in members[i]} - {key}) >= 2:
            found.append(Hypothesis("series", key, np.array(at)))
    if stations:
        for place in sorted({station_of(k) for pair in members for k in pair}):
            at = [
                i for i, (a, b) in enumerate(members) if (station_of(a) == place) != (station_of(b) == place)
            ]
            own = {k for i in at for k in members[i] if station_of(k) == place}
            if len(at) >= 2 and len(own) >= 2:
                found.append(Hypothesis("station", place, np.array(at)))
    return Structure(numbers, tuple(members), related, tuple(found))


def station_of(key: str) -> str:
    """The station of a series key."""
    return key.partition(".")[0]


def quantity_of(key: str) -> str:
    """The quantity of a series key; empty where it names none."""
    return key.partition(".")[2]


@compiled
def unrest(deviation: Floats, touches: Flags) -> Floats:
    """How restless the rest of the network is today, for each chart: 1 is usual.

    The median absolute deviation of the pairs that a chart does not touch, over that of a normal variable;
    NaN with fewer than six of them. ``deviation`` has shape (n_pairs,), ``touches`` (n_charts, n_pairs).
    """
    order = np.empty(len(deviation), dtype=np.int64)  # by size, smallest first, without NaN
    known = 0
    for p in range(len(deviation)):
        if np.isnan(deviation[p]):
            continue
        at = known
        while at > 0 and abs(deviation[order[at - 1]]) > abs(deviation[p]):
            order[at] = order[at - 1]
            at -= 1
        order[at] = p
        known += 1
    out = np.full(len(touches), np.nan)
    others = np.empty(known)
    for h in range(len(touches)):
        n = 0
        for k in range(known):
            p = order[k]
            if not touches[h, p]:
                others[n] = abs(deviation[p])
                n += 1
        if n >= LEAST_OTHER_PAIRS:
            out[h] = 0.5 * (others[(n - 1) // 2] + others[n // 2]) / NORMAL_MEDIAN
    return out


@compiled
def references(
    score: Floats, weight: Floats, usable: Flags, day: int, guard_days: int, length: int, least: int
) -> Floats:
    """Weighted mean, standard deviation of unit weight, total weight and count of each pair's reference.

    The last ``length`` usable days before ``day - guard_days``; arrays have shape (n_pairs, n_days), the
    result (4, n_pairs), NaN where fewer than ``least`` days are usable.
    """
    n_pairs = len(score)
    out = np.full((4, n_pairs), np.nan)
    for p in range(n_pairs):
        n = 0
        total, first, second = 0.0, 0.0, 0.0
        at = day - guard_days - 1
        while at >= 0 and n < length:
            if usable[p, at] and not np.isnan(score[p, at]):
                n += 1
                total += weight[p, at]
                first += weight[p, at] * score[p, at]
                second += weight[p, at] * score[p, at] * score[p, at]
            at -= 1
        out[3, p] = n
        if n >= least:
            mean = first / total
            out[0, p] = mean
            out[1, p] = np.sqrt(max((second - total * mean * mean) / (n - 1), 1e-12))
            out[2, p] = total
    return out


def learnt_covariance(history: Floats, known: Flags, related: Flags) -> Floats:
    """Correlations between the pairs' deviations on reference days, shrunk; shape (n_pairs, n_pairs).

    ``history`` has shape (n_pairs, n_days), zero where not ``known``; pairs that are not ``related`` are
    taken as uncorrelated. The correlations are shrunk toward none by the share of their squares that chance
    would give (Schäfer & Strimmer 2005), at least by 30 %, and further where they contradict each other.
    """
    recent, seen = history[:, -COVARIANCE_DAYS:], known[:, -COVARIANCE_DAYS:].astype(np.float64)
    days = np.maximum(seen @ seen.T, LEAST_COMMON_DAYS)
    covariance = (recent @ recent.T) / days
    sd = np.sqrt(np.maximum(np.diag(covariance), 0.2))
    between = np.where(related, covariance / np.outer(sd, sd), 0.0)
    np.fill_diagonal(between, 0.0)
    by_chance = np.where(related, 1.0 / days, 0.0)
    np.fill_diagonal(by_chance, 0.0)
    chance = by_chance.sum() / max(float((between**2).sum()), 1e-12)
    between *= 1.0 - min(max(chance, INDEPENDENT_SHARE), 1.0)
    whole = (1.0 - LEAST_EIGENVALUE) * np.eye(len(between))
    while not _positive(whole + between):
        between *= SHRINKAGE
    return np.eye(len(between)) + between


def _positive(matrix: Floats) -> bool:
    """Whether a symmetric matrix is positive definite."""
    try:
        np.linalg.cholesky(matrix)
    except np.linalg.LinAlgError:
        return False
    return True


@compiled
def inverse_among(inverse: Floats, chosen: Flags) -> Floats:
    """Inverse of the chosen rows and columns of a matrix, from that of the whole; 0 elsewhere; shape (n, n).

    Leaving one out takes an outer product of its column from the inverse of the rest.
    """
    out = inverse.copy()
    n = len(out)
    column = np.empty(n)
    for gone in range(n):
        if chosen[gone]:
            continue
        corner = out[gone, gone]
        for j in range(n):
            column[j] = out[gone, j]
        for i in range(n):
            share = column[i] / corner
            if share != 0.0:
                for j in range(n):
                    out[i, j] -= share * column[j]
        for j in range(n):
            out[gone, j] = 0.0
            out[j, gone] = 0.0
    return out


@compiled
def class_movement(
    number: int, classes: NDArray[np.int64], scored: Flags, movement: Floats, variance: Floats
) -> Floats:
    """Direction in which a whole class moves, (n_pairs,), as long as the standard deviation of that movement.

    ``variance[k]`` is that of a class with *k* pairs scored (the last entry for larger ones), where the
    movement has a mean square of one over them.
    """
    out = np.zeros(len(classes))
    count = 0
    squares = 0.0
    for i in range(len(classes)):
        if classes[i] == number and scored[i]:
            out[i] = movement[i]
            count += 1
            squares += movement[i] * movement[i]
    size = np.sqrt(variance[min(count, len(variance) - 1)] / (squares / max(count, 1) + 1e-9))
    for i in range(len(classes)):
        out[i] *= size
    return out


@compiled
def whole_covariance(
    learnt: Floats, classes: NDArray[np.int64], scored: Flags, movement: Floats, variance: Floats
) -> Floats:
    """Covariance of a night's deviations: what was learnt and the movement of each class."""
    out = learnt.copy()
    for number in range(classes.max() + 1):
        along = class_movement(number, classes, scored, movement, variance)
        for i in range(len(out)):
            for j in range(len(out)):
                out[i, j] += along[i] * along[j]
    return out


@compiled
def add_class_movement(
    inverse: Floats,
    classes: NDArray[np.int64],
    scored: Flags,
    seen: Flags,
    movement: Floats,
    variance: Floats,
) -> None:
    """Let the inverse of a covariance among the pairs seen know of the movement of each class; in place.

    One class adds an outer product to the covariance, hence takes one from its inverse (Sherman & Morrison
    1950). See :func:`class_movement`.
    """
    for number in range(classes.max() + 1):
        along = class_movement(number, classes, scored, movement, variance)
        moved = np.zeros(len(along))
        growth = 1.0
        for i in range(len(along)):
            if seen[i] and along[i] != 0.0:
                for j in range(len(along)):
                    moved[j] += inverse[i, j] * along[i]
        for i in range(len(along)):
            growth += along[i] * moved[i]
        for i in range(len(along)):
            share = moved[i] / growth
            if share != 0.0:
                for j in range(len(along)):
                    inverse[i, j] -= share * moved[j]


@compiled
def directions(
    belongs: Flags, mean: Floats, sd: Floats, weight: Floats, direction: Floats, movement: Floats
) -> None:
    """Direction of each hypothesis in the space of deviations, and of each class's common movement.

    Fills ``direction`` (n_hypotheses, n_pairs), pairs first, and ``movement`` (n_pairs,). A failing series or
    station moves each of its pairs from its reference correlation toward half of it; a season moves a class
    in proportion to r / (1 + |r|). Both in units of the night's standard deviation of each pair. ``belongs``
    has shape (n_hypotheses, n_pairs).
    """
    n_pairs = len(mean)
    for p in range(n_pairs):
        r = 0.0 if np.isnan(mean[p]) else np.tanh(mean[p])
        unit = 0.0 if np.isnan(mean[p]) else np.sqrt(weight[p]) / sd[p]
        fall = (np.arctanh(FAILING_SHARE * r) - np.arctanh(r)) * unit if abs(r) >= LEAST_RELATION else 0.0
        movement[p] = r / (1.0 + abs(r)) * unit
        for h in range(len(belongs)):
            direction[h, p] = (1.0 if h < n_pairs else fall) * belongs[h, p]


def duplicate_nodes(structure: Structure, direction: Floats, inverse: Floats) -> Flags:
    """Nodes whose direction is nearly that of one of their pairs, in the metric of ``inverse``."""
    strength = ((direction @ inverse) * direction).sum(axis=1)
    unit = np.sqrt(np.maximum(np.outer(strength, np.diag(inverse)), 1e-12))
    cosine = np.abs(direction @ inverse) / unit
    return np.array(
        [
            h.kind != "pair" and cosine[i, h.pairs].max() > DUPLICATE_COSINE
            for i, h in enumerate(structure.hypotheses)
        ]
    )

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


def unrest(deviation: Floats, touches: Flags) -> Floats:
    """How restless the rest of the network is today, for each chart: 1 is usual.

    The median absolute deviation of the pairs that a chart does not touch, over that of a normal variable;
    NaN with fewer than six of them. ``deviation`` has shape (n_pairs,), ``touches`` (n_charts, n_pairs).
    """
    size = np.abs(deviation)
    order = np.argsort(size)[: int(np.isfinite(size).sum())]  # NaN sorts last
    return medians_of_others(size, order, touches) / NORMAL_MEDIAN


@compiled
def medians_of_others(size: Floats, order: NDArray[np.int64], touches: Flags) -> Floats:
    """Median of ``size`` (ascending in ``order``) over the pairs that each chart does not touch."""
    out = np.full(len(touches), np.nan)
    others = np.empty(len(order))
    for h in range(len(touches)):
        n = 0
        for p in order:
            if not touches[h, p]:
                others[n] = size[p]
                n += 1
        if n >= LEAST_OTHER_PAIRS:
            out[h] = 0.5 * (others[(n - 1) // 2] + others[n // 2])
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
def add_class_movement(
    covariance: Floats, classes: NDArray[np.int64], observed: Flags, movement: Floats, variance: Floats
) -> None:
    """Add to a covariance the common movement of each class along ``movement`` (n_pairs,); in place.

    ``variance[k]`` is that of a class with *k* pairs observed (the last entry for larger ones), where the
    movement is scaled to a mean square of one over them.
    """
    for number in range(classes.max() + 1):
        count = 0
        squares = 0.0
        for i in range(len(classes)):
            if classes[i] == number and observed[i]:
                count += 1
                squares += movement[i] * movement[i]
        size = variance[min(count, len(variance) - 1)]
        if count == 0 or size == 0.0:
            continue
        size /= squares / count + 1e-9
        for i in range(len(classes)):
            for j in range(len(classes)):
                if classes[i] == number and classes[j] == number and observed[i] and observed[j]:
                    covariance[i, j] += size * movement[i] * movement[j]


def directions(
    is_node: Flags, belongs: Flags, mean: Floats, sd: Floats, weight: Floats
) -> tuple[Floats, Floats]:
    """Direction of each hypothesis in the space of deviations, and of each class's common movement.

    Returns shapes (n_hypotheses, n_pairs) and (n_pairs,). A failing series or station moves each of its
    pairs from its reference correlation toward half of it; a season moves a class in proportion to
    r / (1 + |r|). Both in units of the night's standard deviation of each pair. ``belongs`` has shape
    (n_hypotheses, n_pairs).
    """
    r = np.nan_to_num(np.tanh(mean))
    unit = np.nan_to_num(np.sqrt(weight) / sd)
    fall = np.where(np.abs(r) >= LEAST_RELATION, (np.arctanh(FAILING_SHARE * r) - np.arctanh(r)) * unit, 0.0)
    out: Floats = np.where(is_node[:, None], fall, 1.0) * belongs
    return out, r / (1.0 + np.abs(r)) * unit


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


def filtered(
    direction: Floats, inverse: Floats, today: Floats, history: Floats, known: Flags, length: int
) -> tuple[Floats, NDArray[np.int64]]:
    """Each hypothesis's evidence today as a t statistic on its own history, and its number of days.

    ``today`` (n_pairs,) and ``history`` (n_pairs, n_days) are deviations, zero where not known.
    """
    filters = direction @ inverse
    size = np.abs(filters)
    share = (size @ known) / np.maximum(size.sum(axis=1, keepdims=True), 1e-9)
    use = share >= LEAST_HISTORY_SHARE
    use &= use[:, ::-1].cumsum(axis=1)[:, ::-1] <= length
    past = filters @ history
    n = use.sum(axis=1)
    mean = (past * use).sum(axis=1) / np.maximum(n, 1)
    variance = (np.where(use, past - mean[:, None], 0.0) ** 2).sum(axis=1) / np.maximum(n - 1, 1)
    t = (filters @ today - mean) / np.sqrt(np.maximum(variance * (1.0 + 1.0 / np.maximum(n, 1)), 1e-12))
    return t, n

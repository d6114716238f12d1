"""Where to look first: which hypothesis explains best what has changed since the onset.

Deviations since the onset are averaged and whitened with the night's covariance. A pair on its own is
weighed by its squared filter output; a node (series or station) by the squared output along its direction,
or by what its pairs explain together when each may have changed by its own amount; both less a price for
what they leave free. A node needs a *second witness*: without its strongest pair it must still stand out.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.network import LEAST_OBSERVED_SHARE, Hypothesis, Structure

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

PRICE = 4.0
"""Squared standard deviations that each free amount has to pay for."""
PRICE_OF_GAIN = 4.0
"""What a pair pays more where it grew stronger: faults seldom do that."""
WITNESS = 3.0
"""Standard deviations that a node must show without its strongest pair."""
LEAST_AGREEING = 0.6
"""Share of a node's pairs whose freely fitted changes must have the sign of a failure."""
LEAST_LAG_GAIN = 0.1
"""A best lag away from the usual counts where its mean correlation is higher by more than this."""
LAG_GAIN_ERRORS = 2.5
"""and by this many standard errors of a difference of two such correlations over days of 24 unrelated hours."""
LEAST_LAGGED_RELATION = 0.3
"""Pairs with a smaller daily reference correlation say nothing about timing."""
LEAST_MOVED_SHARE = 0.4
"""and at least this share of the reference: a slipped clock moves a relation, it does not destroy it."""
IMPOSSIBLE = -99.0


@dataclass(frozen=True)
class Explanation:
    """The best hypothesis, its weight in squared standard deviations, and its mean daily strength."""

    hypothesis: int
    weight: float
    lead: int


def explain(
    structure: Structure,
    candidates: NDArray[np.int64],
    deviations: Floats,
    covariance: Floats,
    direction: Floats,
    mean: Floats,
) -> Explanation | None:
    """The hypothesis among ``candidates`` that explains best the deviations since an onset.

    Parameters
    ----------
    deviations : ndarray of float64, shape (n_pairs, n_days)
        Deviations of the days since the onset, NaN where not judged.
    covariance : ndarray of float64, shape (n_pairs, n_pairs)
        Of one day's deviations.
    direction : ndarray of float64, shape (n_hypotheses, n_pairs)
    mean : ndarray of float64, shape (n_pairs,)
        Reference means (atanh).

    Returns
    -------
    Explanation or None
        None where nothing was observed.
    """
    n_days = deviations.shape[1]
    n = np.isfinite(deviations).sum(axis=1)
    if not n.any():
        return None
    fewest = max(1.0, 0.5 * n_days * min(1.0, 0.6 * n.max() / n_days))
    seen = np.flatnonzero(n >= fewest)
    total = np.zeros(len(n))
    total[seen] = np.nansum(deviations[seen], axis=1) / np.sqrt(n[seen])
    inverse = np.zeros_like(covariance)
    inverse[np.ix_(seen, seen)] = np.linalg.inv(covariance[np.ix_(seen, seen)])
    whitened = inverse @ total
    observed = np.zeros(len(n), dtype=bool)
    observed[seen] = True
    weights = np.full(len(structure.hypotheses), IMPOSSIBLE)
    for i in candidates:
        one = structure.hypotheses[i]
        if observed[one.pairs].sum() < LEAST_OBSERVED_SHARE * len(one.pairs):
            continue
        if one.kind == "pair":
            if observed[one.pairs[0]]:
                weights[i] = _pair_weight(int(one.pairs[0]), whitened, inverse, mean)
        else:
            weights[i] = _node_weight(one, direction[i], whitened, inverse, observed)
    best = int(weights.argmax())
    if weights[best] <= IMPOSSIBLE:
        return None
    pairs = structure.hypotheses[best].pairs
    strength = np.abs(whitened[pairs]) / np.sqrt(np.maximum(np.diag(inverse)[pairs], 1e-12))
    return Explanation(best, float(weights[best]), int(pairs[strength.argmax()]))


def _pair_weight(pair: int, whitened: Floats, inverse: Floats, mean: Floats) -> float:
    z = whitened[pair] / np.sqrt(inverse[pair, pair])
    grew = (z > 0.0) != (mean[pair] < 0.0)
    return float(z * z - PRICE - PRICE_OF_GAIN * grew)


def _node_weight(
    one: Hypothesis, direction: Floats, whitened: Floats, inverse: Floats, observed: Flags
) -> float:
    pairs = one.pairs[observed[one.pairs] & (direction[one.pairs] != 0.0)]
    if len(pairs) < 2:
        return IMPOSSIBLE
    along, own = direction[pairs], inverse[np.ix_(pairs, pairs)]
    z = float(along @ whitened[pairs]) / float(np.sqrt(max(float(along @ own @ along), 1e-12)))
    if z <= 0.0 or _witness(along, whitened[pairs], own) < WITNESS:
        return IMPOSSIBLE
    free = np.linalg.solve(own, whitened[pairs])
    agreeing = np.mean(np.sign(free) == np.sign(along))
    together = (
        float(whitened[pairs] @ free) - PRICE * len(pairs) if agreeing >= LEAST_AGREEING else IMPOSSIBLE
    )
    return max(z * z - PRICE, together)


def _witness(along: Floats, whitened: Floats, own: Floats) -> float:
    """Filter output along a node's direction once its strongest pair is taken out of the network.

    Leaving a pair out changes the inverse covariance by one outer product of its column there.
    """
    strongest = int((whitened**2 / np.diag(own)).argmax())
    rest = along.copy()
    rest[strongest] = 0.0
    column, corner = own[:, strongest], own[strongest, strongest]
    output = rest @ whitened - (rest @ column) * whitened[strongest] / corner
    variance = rest @ own @ rest - (rest @ column) ** 2 / corner
    return float(output / np.sqrt(max(float(variance), 1e-12)))


def slipped_node(structure: Structure, pair: int, lagged: Floats, mean: Floats) -> int | None:
    """The station or series whose other pairs moved in lag as this pair did; None where there is none.

    A logger's clock carries all its series along, so a pair that moved in lag speaks for its whole station
    where the others say the same. Arguments as for :func:`lag_movement`; the result is a position among the
    hypotheses, stations before series.
    """
    best: tuple[bool, int, int] | None = None
    for i, one in enumerate(structure.hypotheses):
        others = one.pairs[one.pairs != pair]
        if one.kind == "pair" or len(others) == len(one.pairs):
            continue
        if lag_movement(structure, Hypothesis(one.kind, one.name, others), lagged, mean):
            rank = (one.kind == "station", len(others), -i)
            best = rank if best is None else max(best, rank)
    return None if best is None else -best[2]


def lag_movement(structure: Structure, one: Hypothesis, lagged: Floats, mean: Floats) -> int:
    """Steps by which the suspect's series seem late (negative: early) in recent days; 0 where not moved.

    Parameters
    ----------
    lagged : ndarray of float64, shape (n_pairs, n_days, 5)
        Daily innovation correlations at lags -2 to 2 around the pair's own, second series later.
    mean : ndarray of float64, shape (n_pairs,)
        Reference means (atanh).
    """
    strong = [p for p in one.pairs if abs(np.tanh(mean[p])) > LEAST_LAGGED_RELATION] or list(one.pairs)
    profiles = []
    usual = []
    n_days = 0
    for p in strong:
        seen = lagged[p][np.isfinite(lagged[p]).all(axis=1)]
        if not len(seen):
            continue
        n_days += len(seen)
        profile = seen.mean(axis=0) * (-1.0 if mean[p] < 0.0 else 1.0)
        first = structure.members[p][0]
        suspect_first = one.kind != "pair" and one.name in (first, first.partition(".")[0])
        profiles.append(profile[::-1] if suspect_first else profile)
        usual.append(abs(np.tanh(mean[p])))
    if not profiles:
        return 0
    mixed = np.mean(profiles, axis=0)
    middle = len(mixed) // 2
    least_gain = max(LEAST_LAG_GAIN, LAG_GAIN_ERRORS * np.sqrt(2.0 / (24 * n_days)))
    moved = mixed.max() - mixed[middle] > least_gain and mixed.max() > LEAST_MOVED_SHARE * np.mean(usual)
    return int(mixed.argmax()) - middle if moved else 0

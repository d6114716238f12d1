"""How far two estimates lie apart, with an interval recovered from their own intervals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Estimate:
    """A value with its 95 % interval; NaN bounds, and the reason, where the interval is not assessable."""

    value: float
    low: float
    high: float
    reason: str | None = None


def not_assessable(value: float, reason: str) -> Estimate:
    """Return an estimate without an interval."""
    return Estimate(value, float("nan"), float("nan"), reason)


def difference(later: Estimate, earlier: Estimate) -> Estimate:
    """Return later less earlier with a 95 % interval.

    Notes
    -----
    Method of variance estimates recovery: each bound of the difference takes the distances of the estimates
    to those bounds of theirs that lie that way, as root of the sum of squares. It keeps the asymmetry of the
    two intervals, and takes the two stretches as independent of each other.

    References
    ----------
    Zou & Donner (2008), Statistics in Medicine 27, 1693-1702; Zou (2007), Psychological Methods 12, 399-413, for
    correlations (both cited from memory).

    Examples
    --------
    >>> difference(Estimate(5.0, 2.0, 9.0), Estimate(1.0, -3.0, 4.0))
    Estimate(value=4.0, low=-0.2426406871192848, high=9.65685424949238, reason=None)
    """
    value = later.value - earlier.value
    reason = later.reason or earlier.reason
    if reason is not None:
        return not_assessable(value, reason)
    down = float(np.hypot(later.value - later.low, earlier.high - earlier.value))
    up = float(np.hypot(later.high - later.value, earlier.value - earlier.low))
    return Estimate(value, value - down, value + up)


def correlation_change(later: Estimate, earlier: Estimate) -> Estimate:
    """Return the difference of two correlations on the atanh scale, where equal steps are equally hard to see.

    Not assessable where either interval is not, or a correlation is exactly 1 or -1.
    """
    if later.reason is None and earlier.reason is None and max(abs(later.value), abs(earlier.value)) >= 1.0:
        reason = "perfect agreement of ranks has no distance"
        return not_assessable(float("nan"), reason)
    return difference(_on_atanh(later), _on_atanh(earlier))


def _on_atanh(one: Estimate) -> Estimate:
    value, low, high = (
        float(np.arctanh(v)) if abs(v) < 1.0 else float("nan") for v in (one.value, one.low, one.high)
    )
    return Estimate(value, low, high, one.reason)

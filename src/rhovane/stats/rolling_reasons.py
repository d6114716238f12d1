"""Why a window has no correlation, in a number for the kernels and in words for people."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.arguments import Whole
from rhovane.stats.compiled import compiled

Codes = NDArray[np.int8]

COMPUTED = 0
TOO_FEW_PAIRS = 1
CONSTANT_X = 2
CONSTANT_Y = 3


@compiled
def judge(xy: Whole, xx: Whole, yy: Whole, n_pairs: Whole, min_pairs: int) -> tuple[float, int]:
    """Return the correlation from its exact sums (NaN where there is none) and the reason code."""
    if n_pairs < min_pairs:
        return np.nan, TOO_FEW_PAIRS
    if xx == 0:
        return np.nan, CONSTANT_X
    if yy == 0:
        return np.nan, CONSTANT_Y
    # The root of a correctly rounded square is exact, so equal ranks give exactly 1.
    rho = float(xy) / np.sqrt(float(xx) * float(yy))
    return min(1.0, max(-1.0, rho)), COMPUTED


def describe_reason(code: int, n_pairs: int, min_pairs: int) -> str | None:
    """Put a reason code into words; None for a computed statistic."""
    if code == TOO_FEW_PAIRS:
        return f"too few pairs: {n_pairs}, at least {min_pairs} needed"
    if code == CONSTANT_X:
        return "the first series is constant over these pairs"
    if code == CONSTANT_Y:
        return "the second series is constant over these pairs"
    return None

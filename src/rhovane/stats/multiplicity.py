"""Many tests in one night: which of them still stand."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from rhovane.stats.arguments import Floats


def false_discovery(p: ArrayLike, method: Literal["bh", "by"] = "bh") -> Floats:
    """Return p-values adjusted for multiplicity: call those at or below q, and a share q of the calls is false.

    Parameters
    ----------
    p : array-like of float, any shape
        p-values in [0, 1]; NaN marks a test that was not assessable, and is not counted.
    method
        "bh" (Benjamini & Hochberg 1995; independent or positively related tests) or "by" (Benjamini & Yekutieli
        2001; any dependence).

    Returns
    -------
    ndarray of float64, the shape of ``p``
        In [0, 1]; NaN where ``p`` is NaN.

    Raises
    ------
    ValueError
        A p-value outside [0, 1], or an unknown method.

    References
    ----------
    Benjamini & Hochberg (1995), Journal of the Royal Statistical Society B 57; Benjamini & Yekutieli (2001),
    Annals of Statistics 29 (from memory).

    Examples
    --------
    >>> false_discovery([0.01, 0.02, float("nan"), 0.5])
    array([0.03, 0.03,  nan, 0.5 ])
    """
    if method not in ("bh", "by"):
        raise ValueError(f'method={method!r} is not known; choose "bh" or "by".')
    found = np.asarray(p, dtype=np.float64)
    if bool(((found < 0) | (found > 1)).any()):
        raise ValueError(f"p holds values from {np.nanmin(found)} to {np.nanmax(found)}; 0 to 1 is allowed.")
    adjusted = np.full(found.size, np.nan)
    tested = np.flatnonzero(found.ravel() == found.ravel())
    n_tests = len(tested)
    if n_tests == 0:
        return adjusted.reshape(found.shape)
    order = tested[np.argsort(found.ravel()[tested], kind="stable")]
    rank = np.arange(1, n_tests + 1)
    price = float(np.sum(1.0 / rank)) if method == "by" else 1.0
    raised = found.ravel()[order] * (n_tests * price) / rank
    adjusted[order] = np.minimum(np.minimum.accumulate(raised[::-1])[::-1], 1.0)
    return adjusted.reshape(found.shape)

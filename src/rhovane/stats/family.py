"""The significance of the best of many lags, which are correlated with each other."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from scipy.special import ndtri

from rhovane.stats.arguments import Floats, Integers
from rhovane.stats.dependence import SMALLEST_INFLATION, Autocorrelation

DRAWS = 1000  # of the multivariate normal vector; standard error .007 at p = .05
SMALLEST_P = 1e-300  # keeps normal quantiles finite


@lru_cache(maxsize=8)
def _normal_draws(n_lags: int, seed: int) -> Floats:
    return np.random.default_rng(seed).standard_normal((DRAWS, n_lags))


def lag_correlation(lags: Integers, acf: Autocorrelation) -> Floats:
    """Return the correlation matrix of the statistics at ``lags`` when the series are unrelated, shape (n, n).

    Statistics at lags j apart correlate as g(j) = Σ_k r_xx(k) r_yy(k+j), over g(0) (Bartlett 1935).
    """
    own_x = np.concatenate(((acf.weight * acf.xx)[::-1], (1.0,), acf.weight * acf.xx))
    own_y = np.concatenate((acf.yy[::-1], (1.0,), acf.yy))
    apart = np.abs(lags[:, None] - lags[None, :])
    reach = int(apart.max())
    products = np.correlate(
        np.concatenate((own_y, np.zeros(reach))), np.concatenate((own_x, np.zeros(reach))), "full"
    )
    middle = len(own_x) + reach - 1
    g = products[middle : middle + reach + 1]
    toeplitz: Floats = (g / max(float(g[0]), SMALLEST_INFLATION))[apart]
    return toeplitz


def best_of_lags_p_value(p_values: Floats, lags: Integers, acf: Autocorrelation, seed: int) -> float:
    """Return the p-value of the smallest of ``p_values``, corrected for having looked at all lags.

    The share of seeded draws from a normal vector with the lags' correlation whose largest absolute entry
    reaches the best; never above the sum bound (Bonferroni), which also takes over below 1/1,001, and never
    below the single p-value.
    """
    smallest = float(p_values.min())
    n_lags = len(p_values)
    if n_lags == 1:
        return smallest
    values, vectors = np.linalg.eigh(lag_correlation(lags, acf))
    factor = vectors * np.sqrt(np.maximum(values, 0.0))
    factor /= np.sqrt((factor**2).sum(axis=1, keepdims=True))
    reached = -ndtri(max(smallest, SMALLEST_P) / 2.0)
    largest = np.abs(_normal_draws(n_lags, seed) @ factor.T).max(axis=1)
    drawn = (1 + int((largest >= reached).sum())) / (DRAWS + 1)
    return max(smallest, min(drawn, n_lags * smallest))

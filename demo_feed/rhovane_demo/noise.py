"""Seeded random series, one stream a name."""

from __future__ import annotations

from zlib import crc32

import numpy as np
from numpy.random import Generator, default_rng

from rhovane_demo.physics import Hourly

NEGLIGIBLE = 1e-18  # a weight that can no longer change a float64 sum of terms near 1


class Noise:
    """Random series by name: each name has its own stream, so nothing planted disturbs another's draws."""

    def __init__(self, seed: int, n_hours: int) -> None:
        self.seed = seed
        self.n_hours = n_hours

    def stream(self, name: str) -> Generator:
        """The generator that belongs to a name."""
        return default_rng([self.seed, crc32(name.encode())])

    def white(self, name: str) -> Hourly:
        """Independent standard normal values."""
        return self.stream(name).standard_normal(self.n_hours)

    def red(self, name: str, hours: float) -> Hourly:
        """A stationary AR(1) of unit variance whose memory fades to 1/e within ``hours``."""
        phi = float(np.exp(-1 / hours))
        shocks = self.white(name)
        shocks[1:] *= np.sqrt(1 - phi**2)
        return with_memory(shocks, phi)

    def counts(self, name: str, expected: Hourly) -> Hourly:
        """Poisson counts."""
        return self.stream(name).poisson(expected).astype(np.float64)


def with_memory(shocks: Hourly, phi: float) -> Hourly:
    """``x[t] = phi * x[t - 1] + shocks[t]`` from ``x[0] = shocks[0]``, for ``0 < phi < 1``.

    Each pass doubles the number of past shocks that are summed, so a dozen passes replace the loop over hours.
    """
    x = shocks.copy()
    reach, weight = 1, phi
    while reach < len(x) and weight > NEGLIGIBLE:
        x[reach:] = x[reach:] + weight * x[:-reach]
        reach, weight = 2 * reach, weight * weight
    return x

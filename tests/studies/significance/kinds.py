"""Pairs of dependent hourly series with a known rank correlation: what the significance study draws.

The latent pair is Gaussian: x follows one process, y = r x + √(1 - r²) z with z of another process, r such that
the Spearman correlation is the one asked for (Kruskal 1958: rho = 6/π asin(r/2)). Margins and gaps come after.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter
from scipy.special import ndtri

from rhovane.stats import remove_cycle

BURN_IN = 600  # steps dropped at the start of every process
IMPULSE_STEPS = 5000  # of the impulse response that gives a process its variance
LEARNING_DAYS = 58  # days before the window from which remove_cycle learns
PERIOD = 24  # steps of a day


def process(rng, reps, n, ar=(), ma=()):
    """Unit-variance ARMA process, shape (reps, n)."""
    noise = rng.standard_normal((reps, n + BURN_IN))
    numerator, denominator = np.r_[1.0, ma], np.r_[1.0, -np.asarray(ar, dtype=float)]
    impulse = np.zeros(IMPULSE_STEPS)
    impulse[0] = 1.0
    spread = np.sqrt((lfilter(numerator, denominator, impulse) ** 2).sum())
    return lfilter(numerator, denominator, noise, axis=1)[:, BURN_IN:] / spread


def latent_pair(rng, reps, n, rho, first=((), ()), second=None):
    """Latent Gaussian pair with Spearman correlation ``rho``; ``first`` and ``second`` are (ar, ma)."""
    r = 2.0 * np.sin(np.pi * rho / 6.0)
    x = process(rng, reps, n, *first)
    z = process(rng, reps, n, *(first if second is None else second))
    return x, r * x + np.sqrt(1.0 - r * r) * z


def daily_cycle(n, phase):
    hour = np.arange(n)
    angle = 2.0 * np.pi * (hour - phase) / PERIOD
    return 1.5 * np.cos(angle) + 0.5 * np.cos(2.0 * angle)


def less_hour_medians(x):
    flat = x.copy()
    for hour in range(PERIOD):
        flat[:, hour::PERIOD] -= np.median(flat[:, hour::PERIOD], axis=1, keepdims=True)
    return flat


def uneven_cycle(rng, reps, n, phase):
    """A cycle whose amplitude changes from day to day (standard deviation 30 %)."""
    days = 1.0 + 0.3 * rng.standard_normal((reps, n // PERIOD + 1))
    return daily_cycle(n, phase) * np.repeat(days, PERIOD, axis=1)[:, :n]


def random_gaps(rng, x):
    return np.where(rng.random(x.shape) < 0.1, np.nan, x)


def block_gaps(rng, x, share=0.1, mean_length=24):
    """Outages from a two-state chain: ``share`` missing, blocks of ``mean_length`` steps on average."""
    x = x.copy()
    end, start = 1.0 / mean_length, share / mean_length / (1.0 - share)
    out = rng.random(len(x)) < share
    for t in range(x.shape[1]):
        draw = rng.random(len(x))
        out = np.where(out, draw >= end, draw < start)
        x[out, t] = np.nan
    return x


def ar1(phi):
    return ((phi,), ()) if phi else ((), ())


SLOW = ar1(0.8)
RADIUS = 0.95
DAILY_SWING = ((2.0 * RADIUS * np.cos(2.0 * np.pi / PERIOD), -(RADIUS**2)), ())


@dataclass(frozen=True)
class Kind:
    """One kind of data: how to draw it, and what tells its true rank correlation.

    Margins with ties change it; so does a recipe, whose ``limit`` a very long window shows.
    """

    draw: Callable[..., tuple[np.ndarray, np.ndarray]]
    margin: Callable[[np.ndarray], np.ndarray] | None = None
    margin_y: Callable[[np.ndarray], np.ndarray] | None = None
    limit: bool = False


def plain(first, second=None):
    return Kind(lambda rng, reps, n, rho: latent_pair(rng, reps, n, rho, first, second))


def marked(margin, margin_y=None):
    """Latent AR(1), .8, seen through margins."""
    other = margin if margin_y is None else margin_y

    def draw(rng, reps, n, rho):
        x, y = latent_pair(rng, reps, n, rho, SLOW)
        return margin(x), other(y)

    return Kind(draw, margin, other)


def changed(change_x, change_y, limit=False):
    """Latent AR(1), .8, changed by functions of (rng, x)."""

    def draw(rng, reps, n, rho):
        x, y = latent_pair(rng, reps, n, rho, SLOW)
        return change_x(rng, x), change_y(rng, y)

    return Kind(draw, limit=limit)


def causally_removed(rng, reps, n, rho):
    """A skewed quantity with a cycle, put through the program's own recipe on 58 more days before the window."""
    total = n + LEARNING_DAYS * PERIOD
    x, y = latent_pair(rng, reps, total, rho, SLOW)
    hour = np.arange(total) % PERIOD
    working = (np.arange(total) // PERIOD) % 7 < 5
    sides = [np.exp(side + daily_cycle(total, phase)) for side, phase in ((x, 8), (y, 14))]
    return tuple(np.stack([remove_cycle(row, hour, working)[-n:] for row in side]) for side in sides)


KINDS = {
    "independent": plain(ar1(0)),
    "AR(1) .5": plain(ar1(0.5)),
    "AR(1) .8": plain(SLOW),
    "AR(1) .9": plain(ar1(0.9)),
    "AR(1) .95": plain(ar1(0.95)),
    "AR(1) .95 / .5": plain(ar1(0.95), ar1(0.5)),
    "AR(1) .95 / 0": plain(ar1(0.95), ar1(0)),
    "ARMA .8, .4": plain(((0.8,), (0.4,))),
    "ARMA .95, -.5": plain(((0.95,), (-0.5,))),
    "AR(2) swinging daily": plain(DAILY_SWING),
    "hour medians removed inside": changed(
        lambda rng, x: less_hour_medians(x + daily_cycle(x.shape[1], 8)),  # noqa: ARG005
        lambda rng, y: less_hour_medians(y + daily_cycle(y.shape[1], 14)),  # noqa: ARG005
        limit=True,
    ),
    "uneven cycle, medians removed": changed(
        lambda rng, x: less_hour_medians(x + uneven_cycle(rng, *x.shape, 8)),
        lambda rng, y: less_hour_medians(y + uneven_cycle(rng, *y.shape, 14)),
        limit=True,
    ),
    "cycle removed causally": Kind(causally_removed, limit=True),
    "rounded": marked(lambda z: np.round(2.0 * z) / 2.0),
    "40 % censored": marked(lambda z: np.maximum(z, ndtri(0.4))),
    "80 % zeros": marked(lambda z: np.maximum(z, ndtri(0.8)), lambda z: z),
    "10 % random gaps": changed(random_gaps, random_gaps),
    "10 % block gaps": changed(block_gaps, block_gaps),
    "lognormal": marked(lambda z: np.exp(1.5 * z)),
}
# A shared cycle left in: no method repairs it; shown in the size table as a warning, not counted.
SHARED_CYCLE = changed(
    lambda rng, x: x + daily_cycle(x.shape[1], 8),  # noqa: ARG005
    lambda rng, y: y + daily_cycle(y.shape[1], 8),  # noqa: ARG005
)

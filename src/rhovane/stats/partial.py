"""Rank correlation of a pair with other series held fixed."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike

from rhovane.stats.arguments import (
    Floats,
    as_pair,
    as_series,
    checked_lags,
    checked_min_pairs,
    checked_window,
)
from rhovane.stats.dependence import (
    MIN_EFFECTIVE,
    Autocorrelation,
    effective_pairs,
    inflation,
    lag_limits,
    scaled_products,
    spearman_p_value,
    transformed_products,
)
from rhovane.stats.family import best_of_lags_p_value
from rhovane.stats.interval import (
    MIN_INTERVAL_COVERAGE,
    MIN_INTERVAL_EFFECTIVE,
    dependent_widths,
)
from rhovane.stats.rank_kernels import dense_ranks
from rhovane.stats.rank_test import too_little_reason
from rhovane.stats.scan_lags import DEFAULT_SEED
from rhovane.stats.scan_window import WindowScan, checked_min_effective, last_rows

NEARLY_EQUAL = 0.999  # |rho| with a member from which a control counts as that member
SMALLEST_REMAINDER = 1e-9  # share of the variance of the midranks that must be left after adjusting


def partial_window(
    x: ArrayLike,
    y: ArrayLike,
    controls: ArrayLike,
    *,
    window: int,
    lags: Iterable[int] = (0,),
    min_pairs: int | None = None,
    min_effective: float = MIN_EFFECTIVE,
    interval: bool = True,
    seed: int = DEFAULT_SEED,
) -> WindowScan:
    """Return the partial rank correlations of the window that ends at the last row, adjusted for ``controls``.

    Parameters
    ----------
    x, y : array-like of float or int, shape (n_rows,)
        Observations on one regular grid; NaN marks a row without one.
    controls : array-like of float or int, shape (n_rows, n_controls)
        Other series on the same grid, taken at the later row of each pair.
    window, lags, min_pairs, min_effective, interval, seed
        As for :func:`window_scan`; a pair counts where x, y and all controls are present.

    Returns
    -------
    WindowScan
        ``n_effective`` comes from the autocorrelations of the residuals, less one for each control.

    Raises
    ------
    ValueError
        As for :func:`window_scan`; a control that equals or nearly equals a member (|rho| ≥ .999 in the window).

    Notes
    -----
    Midranks over the rows jointly observed; x and y are replaced by the residuals of a linear regression of
    their midranks on those of the controls, whose correlation is the partial rank correlation (for one
    control, Spearman's partial coefficient). It removes what the controls explain monotonically and without
    interaction, no more. The interval holds the controls' coefficients for known but for their degrees of
    freedom.

    References
    ----------
    Kendall (1970), Rank Correlation Methods, chapter 8; Conover (1999), Practical Nonparametric Statistics
    (both cited from memory).
    """
    first, second = as_pair(x, y)
    others = _as_controls(controls, len(first))
    length = checked_window(window)
    leads = checked_lags(lags, length)
    fewest = checked_min_pairs(min_pairs, length)
    checked_min_effective(min_effective)
    rows = length + int(np.abs(leads).max())
    first, second = last_rows(first, rows), last_rows(second, rows)
    others = [last_rows(control, rows)[rows - length :] for control in others]
    n_lags = len(leads)
    statistic, n_effective, p_value, low, high = (np.full(n_lags, np.nan) for _ in range(5))
    n_pairs = np.zeros(n_lags, dtype=np.int64)
    reason: list[str | None] = [None] * n_lags
    tie_share = np.full(n_lags, np.nan)
    acfs: dict[int, Autocorrelation] = {}
    for i, lag in enumerate(leads):
        start_x, start_y = rows - length - max(int(lag), 0), rows - length - max(-int(lag), 0)
        sides = [first[start_x : start_x + length], second[start_y : start_y + length], *others]
        joint = np.logical_and.reduce([side == side for side in sides])
        n_pairs[i] = int(joint.sum())
        if n_pairs[i] < fewest:
            reason[i] = f"too few pairs: {n_pairs[i]}, at least {fewest} needed"
            continue
        midranks = np.stack([_standard_midranks(side[joint]) for side in sides])
        _refuse_members(midranks, int(n_pairs[i]))
        tie_share[i] = max(_largest_tie_share(side[joint]) for side in sides[:2])
        names = ("first", "second")
        flat = [name for name, side in zip(names, midranks[:2], strict=True) if not side.any()]
        if flat:
            reason[i] = f"the {flat[0]} series is constant over these pairs"
            continue
        residuals, spent = _residuals(midranks[:2], midranks[2:])
        squares = (residuals**2).sum(axis=1)
        explained = [
            name for name, left in zip(names, squares, strict=True) if left < SMALLEST_REMAINDER * n_pairs[i]
        ]
        if explained:
            reason[i] = f"the {explained[0]} series is fully explained by the controls"
            continue
        rho = float(residuals[0] @ residuals[1] / np.sqrt(squares[0] * squares[1]))
        statistic[i] = max(-1.0, min(1.0, rho))
        spread = np.zeros((2, length))
        spread[:, joint] = residuals
        acf = scaled_products(
            int(n_pairs[i]),
            float(squares[0]),
            float(squares[1]),
            *transformed_products(spread[0], spread[1], joint.astype(np.float64), *lag_limits(length)),
        )
        factor = inflation(acf)
        n_effective[i] = effective_pairs(float(n_pairs[i]), factor) - spent
        reason[i] = too_little_reason(float(n_effective[i]), min_effective)
        if reason[i] is not None:
            continue
        acfs[i] = acf
        p_value[i] = float(spearman_p_value(rho, n_effective[i]))
        if interval and abs(rho) < 1.0 and n_pairs[i] >= MIN_INTERVAL_COVERAGE * length:
            widths = dependent_widths(rho, int(n_pairs[i]), acf, factor, 0.0, spent)
            if widths.n_effective >= MIN_INTERVAL_EFFECTIVE:
                low[i], high[i] = widths.around(rho)
    best, best_p_value = _best(leads, statistic, p_value, acfs, seed)
    shares = tie_share[tie_share == tie_share]
    return WindowScan(
        lags=leads,
        statistic=statistic,
        n_pairs=n_pairs,
        n_effective=n_effective,
        p_value=p_value,
        reason=tuple(reason),
        best_lag=best,
        best_p_value=best_p_value,
        low=low,
        high=high,
        tie_share=float(shares.max()) if len(shares) else float("nan"),
    )


def _as_controls(controls: ArrayLike, n_rows: int) -> list[Floats]:
    columns = np.asarray(controls)
    if columns.ndim != 2 or columns.shape[0] != n_rows or columns.shape[1] == 0:
        raise ValueError(
            f"controls has shape {columns.shape}; ({n_rows}, number of controls) is allowed; "
            "give one column for each control, on the rows of x and y."
        )
    return [as_series(columns[:, i], f"controls[:, {i}]") for i in range(columns.shape[1])]


def _standard_midranks(values: Floats) -> Floats:
    """Return midranks with mean 0 and variance 1; all 0 for a constant."""
    ranks, n_distinct = dense_ranks(values)
    ties = np.bincount(ranks, minlength=n_distinct)
    centred = (2.0 * np.cumsum(ties) - ties - len(values))[ranks]
    spread = float(np.sqrt(np.mean(centred**2)))
    standard: Floats = np.divide(centred, spread) if spread > 0 else np.asarray(centred, dtype=np.float64)
    return standard


def _largest_tie_share(values: Floats) -> float:
    ranks, _ = dense_ranks(values)
    return float(np.bincount(ranks).max()) / len(values)


def _refuse_members(midranks: Floats, n_pairs: int) -> None:
    closeness = np.abs(midranks[2:] @ midranks[:2].T) / n_pairs
    if closeness.max() >= NEARLY_EQUAL:
        control, member = np.unravel_index(int(closeness.argmax()), closeness.shape)
        raise ValueError(
            f"controls[:, {control}] is nearly the same as {'xy'[int(member)]} (|rho| = {closeness.max():.4f} "
            f"in the window); below {NEARLY_EQUAL} is allowed; leave this control out."
        )


def _residuals(members: Floats, controls: Floats) -> tuple[Floats, int]:
    """Return what of the members the controls do not explain, and the degrees of freedom this took."""
    coefficients, _, rank, _ = np.linalg.lstsq(controls.T, members.T, rcond=1e-9)
    residuals: Floats = members - (controls.T @ coefficients).T
    return residuals, int(rank)


def _best(
    lags: np.ndarray[tuple[int], np.dtype[np.int64]],
    statistic: Floats,
    p_value: Floats,
    acfs: dict[int, Autocorrelation],
    seed: int,
) -> tuple[int | None, float]:
    computed = np.flatnonzero(statistic == statistic).tolist()
    if not computed:
        return None, float("nan")
    tested = sorted(acfs)
    among = tested or computed
    best = min(
        among, key=lambda i: (p_value[i] if tested else 0.0, -abs(statistic[i]), abs(lags[i]), lags[i])
    )
    if not tested:
        return int(lags[best]), float("nan")
    return int(lags[best]), best_of_lags_p_value(p_value[tested], lags[tested], acfs[best], seed)

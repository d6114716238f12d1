"""From a budget of false alarms to the thresholds of the change charts."""

from __future__ import annotations

import numpy as np

RATES = (0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0)
"""False alarms a chart and year at which thresholds were simulated."""
TWO_SIDED = {
    30: (15.38, 13.60, 12.28, 10.98, 9.51, 8.47, 7.40, 6.10, 5.19, 4.36),
    60: (13.40, 11.90, 10.88, 10.05, 8.76, 7.78, 6.87, 5.74, 4.96, 4.25),
    90: (12.56, 11.32, 10.38, 9.50, 8.34, 7.50, 6.66, 5.58, 4.86, 4.19),
    180: (11.79, 10.68, 9.86, 9.05, 7.94, 7.13, 6.39, 5.41, 4.76, 4.10),
    365: (11.10, 10.05, 9.38, 8.61, 7.66, 6.90, 6.18, 5.29, 4.67, 4.04),
}
"""Thresholds of the log evidence by days of baseline. Simulated on independent normal days: 40,000 years
for each baseline, seed 5, guard of 14 days, by tests/studies/alerting/thresholds.py (standard error about
0.02 at 0.1 a year, 0.15 at 0.002)."""


ONE_SIDED = TWO_SIDED


def threshold(false_alarms_per_year: float, *, baseline_days: int = 90, one_sided: bool = False) -> float:
    """Log evidence above which a pair's chart alarms.

    Parameters
    ----------
    false_alarms_per_year : float
        Expected false alarms of this one chart in its first year after learning.
    baseline_days : int
        Length of the moving reference.
    one_sided : bool
        For a chart that looks for a rise alone (a failing series or station).

    Raises
    ------
    ValueError
        When the rate is not a positive number or the baseline is shorter than 30 days.

    Notes
    -----
    Interpolated in the logarithms of rate and baseline. Below 0.002 a year the threshold rises by one for
    each factor *e*: the chart's rate of false alarms falls as exp(-threshold).

    Examples
    --------
    >>> round(threshold(0.1), 2)
    7.5
    """
    if not (np.isfinite(false_alarms_per_year) and false_alarms_per_year > 0):
        raise ValueError(f"false_alarms_per_year={false_alarms_per_year} must be a number above 0.")
    tables = ONE_SIDED if one_sided else TWO_SIDED
    lengths = sorted(tables)
    if baseline_days < lengths[0]:
        raise ValueError(f"baseline_days={baseline_days} is too few; choose {lengths[0]} or more.")
    rate = np.log(false_alarms_per_year)
    grid = np.log(RATES)
    at_rate = [_at(rate, grid, np.array(tables[n])) for n in lengths]
    return float(np.interp(np.log(baseline_days), np.log(lengths), at_rate))


def _at(rate: float, grid: np.ndarray, table: np.ndarray) -> float:
    """A row of the table at a log rate, carried on beyond both ends."""
    if rate < grid[0]:
        return float(table[0] + grid[0] - rate)
    if rate > grid[-1]:
        slope = (table[-1] - table[-2]) / (grid[-1] - grid[-2])
        return float(max(table[-1] + slope * (rate - grid[-1]), 0.0))
    return float(np.interp(rate, grid, table))

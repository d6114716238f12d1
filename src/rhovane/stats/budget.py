"""From a budget of false alarms to the thresholds of the change charts."""

from __future__ import annotations

import numpy as np

RATES = (0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0)
"""False alarms a chart and year at which thresholds were simulated."""
TWO_SIDED = {
    30: (15.05, 12.81, 11.52, 10.29, 8.75, 7.63, 6.60, 5.33, 4.48, 3.59),
    60: (12.84, 11.33, 10.37, 9.37, 8.05, 7.12, 6.24, 5.16, 4.45, 3.64),
    90: (11.95, 10.67, 9.80, 8.95, 7.81, 6.94, 6.08, 5.11, 4.42, 3.65),
    180: (11.33, 10.23, 9.43, 8.54, 7.49, 6.68, 5.92, 5.06, 4.38, 3.65),
    365: (10.65, 9.77, 9.00, 8.25, 7.27, 6.51, 5.80, 4.98, 4.32, 3.62),
}
"""Thresholds of the log evidence of a pair by days of baseline, and"""
ONE_SIDED = {
    30: (13.66, 12.30, 11.22, 10.25, 8.83, 7.81, 6.82, 5.58, 4.75, 3.92),
    60: (12.52, 11.42, 10.54, 9.56, 8.27, 7.38, 6.50, 5.44, 4.71, 3.95),
    90: (12.05, 10.95, 10.11, 9.19, 8.03, 7.19, 6.37, 5.38, 4.69, 3.95),
    180: (11.44, 10.53, 9.66, 8.81, 7.73, 6.96, 6.21, 5.32, 4.64, 3.94),
    365: (10.90, 9.96, 9.28, 8.52, 7.52, 6.80, 6.10, 5.27, 4.59, 3.90),
}
"""of a series or station, at these rates. Simulated on independent normal days: 40,000 years for each
baseline, seed 5, guard of 14 days, by tests/studies/alerting/thresholds.py (standard error about 0.02 at
0.1 a year, 0.15 at 0.002)."""


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
    6.94
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

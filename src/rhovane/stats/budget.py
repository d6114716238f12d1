"""From a budget of false alarms to the thresholds of the change charts."""

from __future__ import annotations

import numpy as np

RATES = (0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0)
"""False alarms a chart and year at which thresholds were simulated."""
TWO_SIDED = {
    30: (14.41, 12.76, 11.37, 9.99, 8.53, 7.52, 6.45, 5.21, 4.40, 3.52),
    60: (12.51, 11.16, 10.07, 9.12, 7.99, 7.12, 6.16, 5.09, 4.31, 3.52),
    90: (11.73, 10.60, 9.96, 8.98, 7.70, 6.79, 5.97, 5.04, 4.34, 3.58),
    180: (10.91, 10.30, 9.16, 8.44, 7.33, 6.50, 5.77, 4.95, 4.29, 3.56),
    365: (10.46, 9.64, 9.03, 8.34, 7.32, 6.50, 5.75, 4.95, 4.31, 3.56),
}
"""Thresholds of the log evidence of a pair by days of baseline, and"""
ONE_SIDED = {
    30: (13.97, 12.40, 11.10, 10.12, 8.65, 7.64, 6.69, 5.51, 4.69, 3.84),
    60: (13.08, 11.42, 10.45, 9.38, 8.21, 7.28, 6.31, 5.32, 4.60, 3.86),
    90: (11.95, 11.14, 10.32, 9.19, 8.00, 7.10, 6.27, 5.32, 4.61, 3.91),
    180: (11.83, 10.04, 9.37, 8.53, 7.60, 6.86, 6.07, 5.23, 4.55, 3.87),
    365: (11.12, 9.97, 9.12, 8.56, 7.59, 6.82, 6.01, 5.23, 4.52, 3.86),
}
"""of a series or station, at these rates. Simulated on days of 24 independent hours with correlation .6: 5,000 years
for each baseline, seed 5, guard of 14 days, by tests/studies/alerting/thresholds.py (standard error about 0.05
at 0.1 a year, 0.3 at 0.002)."""


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
    6.79
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

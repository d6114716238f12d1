"""From a budget of false alarms to the thresholds of the change charts."""

from __future__ import annotations

import numpy as np

RATES = (0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0)
"""False alarms a chart and year at which thresholds were simulated."""
TWO_SIDED = {
    30: (14.26, 12.60, 10.92, 9.78, 8.37, 7.38, 6.34, 5.14, 4.33, 3.47),
    60: (11.97, 10.75, 9.88, 9.04, 7.83, 6.98, 6.06, 5.03, 4.25, 3.49),
    90: (11.60, 10.42, 9.66, 8.82, 7.58, 6.67, 5.87, 4.97, 4.28, 3.53),
    180: (11.38, 10.36, 9.20, 8.35, 7.22, 6.44, 5.71, 4.88, 4.26, 3.54),
    365: (10.24, 9.46, 8.89, 8.25, 7.23, 6.45, 5.71, 4.91, 4.26, 3.52),
}
"""Thresholds of the log evidence of a pair by days of baseline, and"""
ONE_SIDED = {
    30: (13.56, 11.93, 11.00, 9.97, 8.55, 7.54, 6.62, 5.45, 4.64, 3.82),
    60: (12.63, 11.30, 10.34, 9.22, 8.11, 7.20, 6.24, 5.30, 4.57, 3.84),
    90: (11.74, 10.90, 10.11, 9.07, 7.87, 7.03, 6.18, 5.28, 4.57, 3.89),
    180: (11.53, 10.02, 9.30, 8.49, 7.54, 6.81, 6.02, 5.20, 4.54, 3.85),
    365: (10.58, 9.75, 9.11, 8.46, 7.49, 6.74, 5.99, 5.19, 4.50, 3.84),
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
    6.67
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

"""From a budget of false alarms to the thresholds of the change charts."""

from __future__ import annotations

import numpy as np

RATES = (0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0)
"""False alarms a chart and year at which thresholds were simulated."""
TWO_SIDED = {
    30: (14.41, 12.69, 11.21, 9.98, 8.45, 7.43, 6.38, 5.15, 4.33, 3.46),
    60: (12.07, 11.19, 10.17, 9.01, 7.89, 7.00, 6.06, 5.03, 4.25, 3.46),
    90: (11.77, 10.57, 9.87, 8.89, 7.57, 6.67, 5.87, 4.97, 4.25, 3.50),
    180: (11.25, 10.49, 9.14, 8.38, 7.26, 6.45, 5.70, 4.86, 4.21, 3.49),
    365: (10.46, 9.62, 9.08, 8.15, 7.21, 6.45, 5.67, 4.89, 4.22, 3.47),
}
"""Thresholds of the log evidence of a pair by days of baseline, and"""
ONE_SIDED = {
    30: (13.97, 12.21, 11.03, 10.03, 8.55, 7.53, 6.63, 5.43, 4.63, 3.79),
    60: (12.73, 11.43, 10.32, 9.26, 8.11, 7.15, 6.25, 5.29, 4.54, 3.83),
    90: (11.95, 11.05, 10.14, 9.05, 7.88, 7.02, 6.17, 5.26, 4.53, 3.85),
    180: (11.39, 10.00, 9.37, 8.52, 7.58, 6.81, 5.98, 5.17, 4.49, 3.82),
    365: (11.14, 10.13, 9.10, 8.40, 7.55, 6.69, 5.95, 5.16, 4.45, 3.77),
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

"""Whether a step in a series' level is that of a known unit, or of a shifted zero."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.level_step import SMALLEST_LEVEL

Floats = NDArray[np.float64]

# Micrograms in a cubic metre of air that one ppb makes: molar mass in g/mol over the molar volume of an ideal gas at
# 1 atm and 25 °C or 20 °C (24.465 and 24.055 L/mol). CO is the same in mg/m³ and ppm.
MOLAR_MASS = {"NO2": 46.006, "O3": 47.998, "NO": 30.006, "SO2": 64.064, "CO": 28.010}
MOLAR_VOLUMES = (24.465, 24.055)
OTHER_FACTORS = {
    "wind_speed": (3.6, 2.2369, 1.9438),  # km/h, miles/h and knots in 1 m/s
    "rain": (25.4,),  # mm in an inch
}
THOUSAND = 1000.0  # mg and µg, ppm and ppb: any quantity
KELVIN_OF_ZERO_CELSIUS = 273.15

MOST_ERRORS = 2.5  # standard errors between a step and the unit's factor ...
MOST_APART = 0.16  # ... and never more than this in the logarithm; see the study of planted switches
MOST_SLOPE = 1.25  # factor by which the slope on the nearest neighbour may change with the unit
FEWEST_JOINT = 48  # hours
LEAST_STRENGTH = 3.0  # of a step that is called a unit switch


@dataclass(frozen=True)
class UnitFactor:
    """The factor of a known change of unit; ``low`` and ``high`` bound it (temperature of the gas)."""

    low: float
    high: float


def unit_factors(quantity: str) -> tuple[UnitFactor, ...]:
    """Known factors between units of a quantity, all above 1; the reverse switch has the inverse factor."""
    name = quantity.upper()
    found = [UnitFactor(THOUSAND, THOUSAND)]
    if name in MOLAR_MASS:
        mass = MOLAR_MASS[name]
        found.append(UnitFactor(mass / MOLAR_VOLUMES[0], mass / MOLAR_VOLUMES[1]))
    found += [UnitFactor(f, f) for f in OTHER_FACTORS.get(quantity.lower(), ())]
    return tuple(found)


def matching_unit(quantity: str, log_factor: float, error: float, strength: float) -> UnitFactor | None:
    """The known unit whose factor a step is near, either way; None when it is near none.

    ``log_factor`` and its standard ``error`` are logarithms; ``strength`` is the step over the spread of the days.
    """
    if abs(strength) < LEAST_STRENGTH:
        return None
    size = abs(log_factor)
    allowed = min(MOST_ERRORS * error, MOST_APART)
    for unit in unit_factors(quantity):
        nearest = min(max(size, math.log(unit.low)), math.log(unit.high))
        if abs(size - nearest) <= allowed:
            return unit
    return None


def keeps_course(before: Floats, after: Floats, others_before: Floats, others_after: Floats) -> bool:
    """Whether the course of a series within the day answers to its neighbours as it did before a step.

    A change of unit adds the same to every logarithm, so the departures from the day's median stay what they were; a
    drift, a leak or a blocked inlet flattens them.

    Parameters
    ----------
    before, after : ndarray of float64, shape (24 n_days,)
        Hourly observations on the two sides of the step, whole days; above zero, NaN where there is none.
    others_before, others_after : ndarray of float64, shape (24 n_days, n_others)
        Neighbours at the same hours.

    Returns
    -------
    bool
        Whether the slope on the neighbour that is correlated best before the step has changed by less than a factor of
        1.25; True without neighbours, False where it cannot be told.
    """
    if others_before.shape[1] == 0:
        return True
    mine, mine_after = _departures(before[:, None])[:, 0], _departures(after[:, None])[:, 0]
    theirs, theirs_after = _departures(others_before), _departures(others_after)
    fits = [_correlation_and_slope(mine, theirs[:, j]) for j in range(theirs.shape[1])]
    best = max(range(len(fits)), key=lambda j: fits[j][0])
    slope, slope_after = fits[best][1], _correlation_and_slope(mine_after, theirs_after[:, best])[1]
    return slope > 0 and 1 / MOST_SLOPE <= slope_after / slope <= MOST_SLOPE


def _departures(values: Floats) -> Floats:
    """Departures of the logarithms from the median of their day; small values count as 5 % of the usual one."""
    usual = np.nanmedian(values, axis=0) if np.isfinite(values).any() else np.full(values.shape[1], np.nan)
    by_day = np.log(np.maximum(values, SMALLEST_LEVEL * usual)).reshape(-1, 24, values.shape[1])
    known: NDArray[np.bool_] = np.asarray(np.isfinite(by_day).any(axis=1))
    middle = np.full(known.shape, np.nan)
    for column in range(values.shape[1]):
        days = known[:, column]
        middle[days, column] = np.nanmedian(by_day[days, :, column], axis=1)
    departures: Floats = (by_day - middle[:, None]).reshape(values.shape)
    return departures


def _correlation_and_slope(y: Floats, x: Floats) -> tuple[float, float]:
    """Of y on x over their joint hours; (-1, 0) with fewer than 48 of them or a constant side."""
    both = np.isfinite(y) & np.isfinite(x)
    if both.sum() < FEWEST_JOINT:
        return -1.0, 0.0
    covariance = np.cov(x[both], y[both])
    if covariance[0, 0] == 0 or covariance[1, 1] == 0:
        return -1.0, 0.0
    slope = float(covariance[0, 1] / covariance[0, 0])
    return slope * math.sqrt(covariance[0, 0] / covariance[1, 1]), slope


def matching_offset(offset: float, error: float) -> float | None:
    """The offset between °C and K if a step of a temperature is near it, either way; else None."""
    near = abs(abs(offset) - KELVIN_OF_ZERO_CELSIUS) <= max(MOST_ERRORS * error, 1.0)
    return math.copysign(KELVIN_OF_ZERO_CELSIUS, offset) if near else None


def shifted_zero(before: Floats, after: Floats, weather: float) -> float | None:
    """The offset, in the series' unit, if a step shifts low and high values alike; None if it scales them.

    Parameters
    ----------
    before, after : ndarray of float64, any shape
        Hourly observations on the two sides of the step, NaN where there is none.
    weather : float
        Factor by which the neighbours changed between the two sides.

    Notes
    -----
    With quartiles q of the hours and the weather taken out, a shifted zero moves both quartiles by the same amount, a
    factor moves them in proportion to themselves. The nearer one counts; where the quartiles are less than a factor of
    1.5 apart the two cannot be told apart and it is no shifted zero.
    """
    low, high = np.nanquantile(before, (0.25, 0.75)) * weather
    low_after, high_after = np.nanquantile(after, (0.25, 0.75))
    low_moved, high_moved = float(low_after - low), float(high_after - high)
    if low <= 0 or high < 1.5 * low or low_moved * high_moved <= 0:
        return None
    ratio = math.log(high_moved / low_moved)
    return (low_moved + high_moved) / 2 if ratio < math.log(high / low) / 2 else None

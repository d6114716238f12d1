"""Whether a step in a series' level is that of a known unit, or of a shifted zero."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

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

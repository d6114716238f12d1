"""Units of feeds: conversions with a published definition, and nothing guessed."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

GAS_CONSTANT_J_PER_MOL_K = 8.314462618  # CODATA 2018 (exact since the 2019 SI)
# Reference state of gas concentrations: 20 °C, 101.325 kPa (293 K, 101.3 kPa in 2008/50/EC, annex VI B).
REFERENCE_TEMPERATURE_K = 293.15
REFERENCE_PRESSURE_KPA = 101.325
MOLAR_VOLUME_L_PER_MOL = GAS_CONSTANT_J_PER_MOL_K * REFERENCE_TEMPERATURE_K / REFERENCE_PRESSURE_KPA  # 24.055
# Abridged standard atomic weights, g/mol: Prohaska et al. (2022), Pure and Applied Chemistry 94, 573-600.
_C, _N, _O, _S = 12.011, 14.007, 15.999, 32.06
MOLAR_MASS_G_PER_MOL = {"NO2": _N + 2 * _O, "O3": 3 * _O, "NO": _N + _O, "SO2": _S + 2 * _O, "CO": _C + _O}

ZERO_CELSIUS_K = 273.15  # K at 0 °C; SI Brochure, 9th edition (2019), 2.3.1
FAHRENHEIT_DEGREE_K = 5 / 9  # K; NIST SP 811 (2008), B.8
ZERO_FAHRENHEIT_K = ZERO_CELSIUS_K - 32 * FAHRENHEIT_DEGREE_K
KM_PER_H_M_PER_S = 1000 / 3600  # m/s
KNOT_M_PER_S = 1852 / 3600  # m/s; international nautical mile (1929): 1852 m
INCH_MM = 25.4  # mm; international inch (1959)


@dataclass(frozen=True)
class Conversion:
    """``value * factor + offset`` is the value in the wanted unit."""

    factor: float
    offset: float

    @property
    def changes_nothing(self) -> bool:
        """Whether values stay as they are."""
        return self.factor == 1 and self.offset == 0


SAME = Conversion(1.0, 0.0)

# Unit → (dimension, size in the dimension's base unit, base value at its zero).
_KNOWN = {
    "ug/m3": ("mass concentration", 1.0, 0.0),
    "mg/m3": ("mass concentration", 1000.0, 0.0),
    "ppb": ("volume fraction", 1.0, 0.0),
    "ppm": ("volume fraction", 1000.0, 0.0),
    "K": ("temperature", 1.0, 0.0),
    "degC": ("temperature", 1.0, ZERO_CELSIUS_K),
    "degF": ("temperature", FAHRENHEIT_DEGREE_K, ZERO_FAHRENHEIT_K),
    "m/s": ("speed", 1.0, 0.0),
    "km/h": ("speed", KM_PER_H_M_PER_S, 0.0),
    "knots": ("speed", KNOT_M_PER_S, 0.0),
    "mm": ("length", 1.0, 0.0),
    "cm": ("length", 10.0, 0.0),
    "in": ("length", INCH_MM, 0.0),
}
_PLAIN = str.maketrans({"µ": "u", "μ": "u", "³": "3", "°": "deg", " ": None})
_OTHER_SPELLINGS = {
    "knot": "knots",
    "kn": "knots",
    "kt": "knots",
    "kts": "knots",
    "kmh": "km/h",
    "kph": "km/h",
    "ms-1": "m/s",
    "ugm-3": "ug/m3",
    "mgm-3": "mg/m3",
}


def ug_m3_per_ppb(gas: str) -> float:
    """Micrograms in a cubic metre for one part per billion of a gas at 20 °C and 101.325 kPa.

    Parameters
    ----------
    gas : str
        One of NO2, O3, NO, SO2, CO.

    Raises
    ------
    KeyError
        The gas is none of these.

    Notes
    -----
    Ideal gas: molar mass divided by molar volume.

    Examples
    --------
    >>> round(ug_m3_per_ppb("NO2"), 3)
    1.912
    """
    return MOLAR_MASS_G_PER_MOL[gas] / MOLAR_VOLUME_L_PER_MOL


@lru_cache(maxsize=256)
def conversion(found: str, wanted: str, quantity: str) -> Conversion | None:
    """How values in one unit become values in another; None where no published conversion is known.

    Parameters
    ----------
    found, wanted : str
        Units. Unequal spellings of a known unit ("µg/m³", "ug/m3") count as the same.
    quantity : str
        What is measured; names the gas where a volume fraction becomes a mass concentration.

    Examples
    --------
    >>> conversion("degC", "K", "temperature")
    Conversion(factor=1.0, offset=273.15)
    """
    if found == wanted:
        return SAME
    source, target = _plain(found), _plain(wanted)
    if source == target:
        return SAME
    if source not in _KNOWN or target not in _KNOWN:
        return None
    dimension, size, zero = _KNOWN[source]
    wanted_dimension, wanted_size, wanted_zero = _KNOWN[target]
    if dimension != wanted_dimension:
        gas = quantity.upper()
        if {dimension, wanted_dimension} != {"mass concentration", "volume fraction"}:
            return None
        if gas not in MOLAR_MASS_G_PER_MOL:
            return None
        size *= ug_m3_per_ppb(gas) if dimension == "volume fraction" else 1 / ug_m3_per_ppb(gas)
    return Conversion(size / wanted_size, (zero - wanted_zero) / wanted_size)


def _plain(unit: str) -> str:
    text = unit.translate(_PLAIN)
    return _OTHER_SPELLINGS.get(text, text)

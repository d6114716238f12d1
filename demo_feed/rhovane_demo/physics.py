"""The physics of the Ostrel Basin, one function a piece; hourly arrays in, hourly arrays out.

All formulas are invented, with the shapes of the real thing: pollution is emitted, diluted by wind and mixing
height, and ozone is used up by fresh nitrogen oxides. Concentrations are µg/m³, wind m/s, temperatures °C,
heights m, radiation W/m², rain mm. Arguments named ``noise_*`` are unit-variance random series.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Hourly = NDArray[np.float64]

LATITUDE_DEG = 48.0
VALLEY_AXIS_DEG = (45.0, 225.0)  # the wind blows along the valley
CLEAR_SKY_W_M2 = 950.0  # solar radiation with the sun overhead
LEAST_WIND_M_S = 0.1
LEAST_MIXING_M = 60.0
REFERENCE_WIND_M_S = 2.5  # wind at which dilution is 1 ...
REFERENCE_MIXING_M = 400.0  # ... with this mixing height
WET_THRESHOLD = 1.35  # of a unit-variance series: wet in about one hour in ten
KELVANE_PEAK_PER_H = 1700.0  # vehicles in the busiest hour
TIVREL_PEAK_PER_H = 2600.0
LORRIES_PER_H = 140.0
LORRY_HOURS = range(6, 18)  # civil clock
HEATING_LIMIT_C = 15.0
HEATING_HOURS = (6, 7, 8, 17, 18, 19, 20, 21, 22)  # civil clock
OZONE_HALF_UG_M3 = 25.0  # slows the conversion of NO at low ozone
SHALLOW_MIXING_M = 150.0  # below it the ground uses up ozone
WARM_FOR_OZONE_C = 12.0
HOT_FOR_OZONE_C = 16.0
LEAST_OZONE_UG_M3 = 0.5
STOCKPILE_SECTOR_DEG = (20.0, 90.0)

# Traffic by civil hour as a share of the busiest hour: working days, and days off.
WORKING_DAY = np.array(
    (
        # midnight to noon, noon to midnight
        (0.12, 0.08, 0.06, 0.06, 0.10, 0.30, 0.70, 1.00, 0.95, 0.75, 0.68, 0.70),
        (0.75, 0.74, 0.78, 0.90, 1.00, 0.98, 0.80, 0.55, 0.42, 0.34, 0.28, 0.20),
    )
).ravel()
FREE_DAY = np.array(
    (
        (0.25, 0.18, 0.13, 0.10, 0.09, 0.12, 0.20, 0.30, 0.45, 0.60, 0.72, 0.78),
        (0.78, 0.74, 0.72, 0.70, 0.68, 0.64, 0.56, 0.46, 0.40, 0.35, 0.32, 0.28),
    )
).ravel()


def season(day_of_year: NDArray[np.int64]) -> Hourly:
    """1 in mid-January, −1 in mid-July."""
    return np.cos(2 * np.pi * (day_of_year - 15) / 365.25)


def sun_height(day_of_year: NDArray[np.int64], standard_hour: NDArray[np.int64]) -> Hourly:
    """Cosine of the sun's zenith angle in the middle of the hour; negative at night."""
    declination = -0.409 * np.cos(2 * np.pi * (day_of_year + 10) / 365.25)
    hour_angle = np.radians(15 * (standard_hour + 0.5 - 12))
    latitude = np.radians(LATITUDE_DEG)
    return np.sin(latitude) * np.sin(declination) + np.cos(latitude) * np.cos(declination) * np.cos(
        hour_angle
    )


def cloud_cover(noise_sky: Hourly, winter: Hourly) -> Hourly:
    """0 clear to 1 overcast."""
    return 1 / (1 + np.exp(-(1.4 * noise_sky + 0.2 * winter)))


def solar_radiation(sun: Hourly, cloud: Hourly) -> Hourly:
    """W/m²; zero at night."""
    return CLEAR_SKY_W_M2 * np.clip(sun, 0, None) * (1 - 0.72 * cloud)


def wind_speed(noise_synoptic: Hourly, sun: Hourly, winter: Hourly, noise_gust: Hourly) -> Hourly:
    """m/s; skewed, stronger by day and in winter."""
    exponent = 0.85 + 0.48 * noise_synoptic + 0.22 * np.clip(sun, 0, None) + 0.1 * winter + 0.12 * noise_gust
    return np.clip(np.exp(exponent), LEAST_WIND_M_S, None)


def night_cooling(sun: Hourly, cloud: Hourly) -> Hourly:
    """How much the ground cools: 0 by day or under cloud, towards 1 in clear midnight."""
    return np.clip(-sun, 0, None) * (1 - cloud)


def air_temperature(winter: Hourly, sun: Hourly, cloud: Hourly, cooling: Hourly, noise_air: Hourly) -> Hourly:
    """°C."""
    return 10 - 9.5 * winter + 5.5 * np.clip(sun, 0, 1) * (1 - 0.5 * cloud) - 4 * cooling + 3.6 * noise_air


def mixing_height(
    wind: Hourly, solar: Hourly, winter: Hourly, cooling: Hourly, noise_mixing: Hourly
) -> Hourly:
    """m; deep over sunlit ground, shallow in clear calm nights."""
    height = 90 + 70 * wind + 900 * (solar / 700) ** 0.8 * (1 - 0.25 * winter) - 40 * cooling
    return np.clip(height, LEAST_MIXING_M, None) * np.exp(0.08 * noise_mixing)


def up_valley(noise_regime: Hourly, sun: Hourly) -> NDArray[np.bool_]:
    """Whether the wind comes from 225° rather than from 45°; more often by day."""
    return noise_regime + 0.3 * np.sign(sun) > 0


def wind_direction(from_south_west: NDArray[np.bool_], noise_slow: Hourly, noise_fast: Hourly) -> Hourly:
    """Degrees 0 to 360 that the wind comes from, around the valley's axis."""
    axis = np.where(from_south_west, VALLEY_AXIS_DEG[1], VALLEY_AXIS_DEG[0])
    return (axis + 28 * noise_slow + 10 * noise_fast) % 360


def rainfall(noise_wet: Hourly, cloud: Hourly, amount: Hourly) -> Hourly:
    """mm in the hour: ``amount`` in wet hours, else zero."""
    return np.where(noise_wet + 0.6 * (cloud - 0.5) > WET_THRESHOLD, amount, 0.0)


def traffic(peak_per_h: float, share: Hourly, noise_common: Hourly, noise_road: Hourly, sd: float) -> Hourly:
    """Expected vehicles an hour: the day's profile times what is common to all roads and what is the road's own."""
    return peak_per_h * share * np.exp(0.1 * noise_common + sd * noise_road)


def lorries(free_day: NDArray[np.bool_], civil_hour: NDArray[np.int64], noise: Hourly) -> Hourly:
    """Expected lorries an hour through the quarry gate; one in twenty on days off."""
    open_gate = np.isin(civil_hour, LORRY_HOURS)
    return LORRIES_PER_H * np.where(free_day, 0.05, 1.0) * open_gate * np.exp(0.25 * noise)


def dilution(wind: Hourly, mixing: Hourly) -> Hourly:
    """Factor on what is emitted: 1 at 2.5 m/s and 400 m, more in still and shallow air."""
    return (wind / REFERENCE_WIND_M_S) ** -0.75 * (mixing / REFERENCE_MIXING_M) ** -0.45


def heating(temperature: Hourly, civil_hour: NDArray[np.int64]) -> Hourly:
    """Heating of houses, about 0 to 1.5: colder is more, mornings and evenings most."""
    at_home = np.isin(civil_hour, HEATING_HOURS)
    return np.clip(HEATING_LIMIT_C - temperature, 0, None) / HEATING_LIMIT_C * (0.4 + 0.6 * at_home)


def city_nox(all_traffic: Hourly, heat: Hourly, dilute: Hourly, noise: Hourly) -> Hourly:
    """NOx that the whole town adds, µg/m³."""
    return 18 * (0.55 * all_traffic / TIVREL_PEAK_PER_H + 0.45 * heat) * dilute * np.exp(0.12 * noise)


def regional_nox(noise: Hourly, winter: Hourly) -> Hourly:
    """NOx that comes with the air mass, µg/m³."""
    return 6 * np.exp(0.35 * noise + 0.25 * winter)


def regional_ozone(
    winter: Hourly, solar: Hourly, temperature: Hourly, mixing: Hourly, wind: Hourly, noise: Hourly
) -> Hourly:
    """Ozone before local chemistry, µg/m³: made in sun and warmth, lost in shallow air."""
    ozone = (
        62
        - 22 * winter
        + 16 * (solar / 700) * (temperature > WARM_FOR_OZONE_C)
        + 1.1 * np.clip(temperature - HOT_FOR_OZONE_C, 0, None)
        + 11 * noise
        - 18 * (mixing < SHALLOW_MIXING_M)
        + 6 * np.log(wind)
    )
    return np.clip(ozone, 3, None)


def nitrogen_chemistry(
    nox: Hourly, primary_share: float, ozone_before: Hourly, solar: Hourly
) -> tuple[Hourly, Hourly]:
    """NO2 and O3 at a station, µg/m³: fresh NO takes ozone and becomes NO2, sunlight undoes part of it."""
    fresh = nox * (1 - primary_share)
    converted = fresh * ozone_before / (ozone_before + fresh + OZONE_HALF_UG_M3 + 0.05 * solar)
    no2 = primary_share * nox + converted
    o3 = np.clip(ozone_before - 0.9 * converted, LEAST_OZONE_UG_M3, None)
    return no2, o3


def regional_particles(noise: Hourly, winter: Hourly, rain: Hourly) -> Hourly:
    """Fine particles that come with the air mass, µg/m³; rain washes out up to a quarter."""
    return 8 * np.exp(0.45 * noise + 0.3 * winter) * (1 - 0.25 * np.clip(rain, 0, 3) / 3)


def quarry_dust(lorry_count: Hourly, wind: Hourly, rain: Hourly) -> Hourly:
    """Dust that lorries raise at the gate, µg/m³; less in rain."""
    wet = np.where(rain > 0, 0.3, 1.0)
    return 18 * lorry_count / LORRIES_PER_H * (wind / REFERENCE_WIND_M_S) ** 0.4 * wet


def stockpile_dust(direction: Hourly, wind: Hourly, noise: Hourly) -> Hourly:
    """Dust from the new stockpile, µg/m³; only with wind from its side, more in strong wind."""
    from_pile = (direction >= STOCKPILE_SECTOR_DEG[0]) & (direction <= STOCKPILE_SECTOR_DEG[1])
    return np.where(from_pile, 55 * (wind / REFERENCE_WIND_M_S) ** 0.9, 0.0) * np.exp(0.5 * noise)

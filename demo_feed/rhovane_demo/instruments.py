"""What instruments make of the air: noise, rounding, span checks, outages and planted faults."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rhovane_demo import clocks
from rhovane_demo.basin import Roads, Weather
from rhovane_demo.noise import Noise
from rhovane_demo.physics import Hourly
from rhovane_demo.planted import UVENHOLT_LOGGER, Planting

UNITS: dict[str, str] = {
    "KEL.traffic": "1/h",
    "TIV.traffic": "1/h",
    "SKA.lorries": "1/h",
    **{f"{station}.NO2": "ug/m3" for station in ("KEL", "TIV", "DOR", "PEL", "SKA", "UVE")},
    **{f"{station}.O3": "ug/m3" for station in ("DOR", "PEL", "UVE")},
    **{f"{station}.PM25": "ug/m3" for station in ("KEL", "DOR", "PEL", "UVE")},
    "SKA.PM10": "ug/m3",
    **{
        f"{station}.{quantity}": unit
        for station in ("DOR", "UVE")
        for quantity, unit in (
            ("wind_speed", "m/s"),
            ("wind_direction", "deg"),
            ("temperature", "degC"),
            ("rain", "mm"),
        )
    },
    "UVE.solar_radiation": "W/m2",
    "UVE.mixing_height": "m",
}
KEYS = tuple(UNITS)
WHOLE_NUMBERS = frozenset(
    (
        *("KEL.traffic", "TIV.traffic", "SKA.lorries"),
        *("DOR.wind_direction", "UVE.wind_direction", "UVE.solar_radiation", "UVE.mixing_height"),
    )
)

# Quality of a reading, in the numbers of IOOS QARTOD.
PASS, SUSPECT, FAIL, MISSING = 1, 3, 4, 9

UG_M3_PER_PPB_NO2 = 1.9125  # at 20 °C and 1013 hPa
RAIN_TIP_MM = 0.2
OUTAGE_STARTS_PER_HOUR = 0.001  # a series falls silent about nine times a year ...
OUTAGE_MEAN_HOURS = 3.0  # ... for three hours
SPAN_CHECK_EVERY_DAYS = 14  # gas analysers measure a check gas for an hour, after 01:00 standard time
SPAN_CHECK_HOUR = 1
ANALYSERS = tuple(key for key in KEYS if key.endswith((".NO2", ".O3")))
# Analysers whose source delivers the value of the check gas, marked as failed, instead of nothing.
SENDS_CHECK_GAS = ("KEL.NO2", "SKA.NO2")

# Proportional noise, and noise in the unit of the series, by quantity.
NOISE = {"NO2": (0.05, 0.6), "O3": (0.03, 0.8), "PM25": (0.08, 0.8), "PM10": (0.08, 1.5)}


def read_all(air: dict[str, Hourly], weather: Weather, roads: Roads, noise: Noise) -> dict[str, Hourly]:
    """What sound instruments read, by series key, before rounding."""
    return {**read_counters(roads), **read_analysers(air, noise), **read_weather(weather, noise)}


def read_counters(roads: Roads) -> dict[str, Hourly]:
    """What the counters count."""
    return {
        "KEL.traffic": roads.kelvane_count,
        "TIV.traffic": roads.tivrel_count,
        "SKA.lorries": roads.lorry_count,
    }


def read_analysers(air: dict[str, Hourly], noise: Noise) -> dict[str, Hourly]:
    """Concentrations with the noise of the analysers; small ones may read negative."""
    read: dict[str, Hourly] = {}
    for key in KEYS:
        if key in air:
            proportional, additive = NOISE[key.partition(".")[2]]
            gain = np.exp(proportional * noise.white(f"{key} gain"))
            read[key] = air[key] * gain + additive * noise.white(f"{key} zero")
    return read


def read_weather(weather: Weather, noise: Noise) -> dict[str, Hourly]:
    """Masts at Dorrimoor (in the town: less wind, warmer) and Uvenholt."""
    town_wind = 0.8 * weather.wind * np.exp(0.08 * noise.white("DOR wind"))
    uvenholt_catch = np.where(noise.stream("UVE rain missed").random(noise.n_hours) < 0.9, weather.rain, 0.0)
    return {
        "DOR.wind_speed": town_wind,
        "UVE.wind_speed": weather.wind * np.exp(0.06 * noise.white("UVE wind")),
        "DOR.wind_direction": whole_degrees(weather.direction + 12 * noise.white("DOR vane")),
        "UVE.wind_direction": whole_degrees(weather.direction),
        "DOR.temperature": weather.temperature + 1.2 + 0.25 * noise.white("DOR thermometer"),
        "UVE.temperature": weather.temperature + 0.25 * noise.white("UVE thermometer"),
        "DOR.rain": tips(weather.rain * np.exp(0.25 * noise.white("DOR gauge"))),
        "UVE.rain": tips(uvenholt_catch * np.exp(0.3 * noise.white("UVE gauge"))),
        "UVE.solar_radiation": weather.solar,
        "UVE.mixing_height": weather.mixing,
    }


def whole_degrees(direction: Hourly) -> Hourly:
    """Degrees 0 to 359."""
    return np.round(direction) % 360


def tips(rain: Hourly) -> Hourly:
    """Rain in whole tips of the gauge's bucket, mm."""
    return np.floor(rain / RAIN_TIP_MM) * RAIN_TIP_MM


def plant_faults(read: dict[str, Hourly], weather: Weather, noise: Noise, planting: Planting) -> None:
    """Change the readings in place where a planted fault of an instrument is on."""
    drift = np.where(planting.during("T2"), np.clip(planting.days_since("T2") / 60, 0, 1), 0.0)
    warm = weather.temperature - weather.temperature.mean()
    wander = 9 + 0.9 * warm + 1.5 * noise.white("PEL drift")
    read["PEL.NO2"] = (1 - 0.55 * drift) * read["PEL.NO2"] + drift * wander

    late = planting.during("T3")
    for key in UVENHOLT_LOGGER:
        read[key] = np.where(late, one_hour_late(read[key], late), read[key])

    leak = 4 * np.exp(0.3 * noise.red("DOR leak", 12)) + 0.6 * noise.white("DOR leak noise")
    read["DOR.PM25"] = np.where(planting.during("T4"), 0.12 * read["DOR.PM25"] + leak, read["DOR.PM25"])
    read["DOR.rain"] = np.where(planting.during("T7"), 0.0, read["DOR.rain"])
    read["TIV.NO2"] = np.where(planting.since("D1"), UG_M3_PER_PPB_NO2, 1.0) * read["TIV.NO2"]
    read["KEL.NO2"] = read["KEL.NO2"] - np.where(planting.since("D6"), 3.0, 0.0)


def one_hour_late(true: Hourly, late: NDArray[np.bool_]) -> Hourly:
    """Readings under the stamps of a slow-set clock: the first stamp is skipped, the last true hour overwritten."""
    stamped = np.roll(true, 1)
    stamped[np.flatnonzero(late)[:1]] = np.nan
    return stamped


def round_readings(read: dict[str, Hourly]) -> Hourly:
    """All series as a matrix (n_hours, 27), rounded as the instruments round, no negative zeros."""
    columns = [np.round(read[key], 0 if key in WHOLE_NUMBERS else 1) for key in KEYS]
    return np.column_stack(columns) + 0.0


def make_quality(hour_start: clocks.Hours, noise: Noise) -> NDArray[np.uint8]:
    """Quality of each reading (n_hours, 27): span checks of the gas analysers, and outages."""
    standard = clocks.standard_time(hour_start)
    hour = clocks.hour_of_day(standard)
    day = (standard - standard[0]).astype("timedelta64[D]").astype(np.int64)
    quality = np.full((noise.n_hours, len(KEYS)), PASS, dtype=np.uint8)
    for column, key in enumerate(KEYS):
        if key in ANALYSERS:
            check_day = day % SPAN_CHECK_EVERY_DAYS == column % SPAN_CHECK_EVERY_DAYS
            check = check_day & (hour == SPAN_CHECK_HOUR)
            quality[check, column] = FAIL if key in SENDS_CHECK_GAS else MISSING
            if not key.startswith("UVE."):  # Uvenholt's files carry no quality code
                quality[check_day & (hour == SPAN_CHECK_HOUR + 1), column] = SUSPECT
        quality[outages(f"{key} outage", noise), column] = MISSING
    return quality


def outages(name: str, noise: Noise) -> NDArray[np.bool_]:
    """Hours in which a series is silent: short blocks at random."""
    random = noise.stream(name)
    starts = np.flatnonzero(random.random(noise.n_hours) < OUTAGE_STARTS_PER_HOUR)
    lengths = random.geometric(1 / OUTAGE_MEAN_HOURS, len(starts))
    silent = np.zeros(noise.n_hours, dtype=bool)
    for start, length in zip(starts, lengths, strict=True):
        silent[start : start + length] = True
    return silent

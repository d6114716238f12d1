"""Calendar, weather, roads and air of the Ostrel Basin, before any instrument sees them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane_demo import clocks, physics
from rhovane_demo.noise import Noise
from rhovane_demo.physics import Hourly
from rhovane_demo.planted import Planting


@dataclass(frozen=True)
class Calendar:
    """Hours on all clocks, and where the sun stands."""

    hour_start: clocks.Hours
    civil_hour: NDArray[np.int64]
    free_day: NDArray[np.bool_]
    winter: Hourly
    sun: Hourly


@dataclass(frozen=True)
class Weather:
    """The air over the valley, before any instrument sees it."""

    wind: Hourly
    temperature: Hourly
    solar: Hourly
    mixing: Hourly
    up_valley: NDArray[np.bool_]
    direction: Hourly
    rain: Hourly


@dataclass(frozen=True)
class Roads:
    """Expected and counted vehicles an hour."""

    kelvane: Hourly
    tivrel: Hourly
    lorries: Hourly
    kelvane_count: Hourly
    tivrel_count: Hourly
    lorry_count: Hourly


def make_calendar(hour_start: clocks.Hours) -> Calendar:
    """Clocks and sun for every hour; the last hour is still 31 December in UTC."""
    standard, civil = clocks.standard_time(hour_start), clocks.civil_time(hour_start)
    day_of_year = clocks.day_of_year(standard)
    return Calendar(
        hour_start,
        civil_hour=clocks.hour_of_day(civil),
        free_day=clocks.is_free_day(civil),
        winter=physics.season(day_of_year),
        sun=physics.sun_height(day_of_year, clocks.hour_of_day(standard)),
    )


def make_weather(calendar: Calendar, noise: Noise, planting: Planting) -> Weather:
    """Weather of the valley, with the calm inversion if planted."""
    winter, sun = calendar.winter, calendar.sun
    cloud = physics.cloud_cover(noise.red("sky", 18), winter)
    solar = physics.solar_radiation(sun, cloud)
    wind = physics.wind_speed(noise.red("synoptic", 36), sun, winter, noise.white("gust"))
    cooling = physics.night_cooling(sun, cloud)
    mixing = physics.mixing_height(wind, solar, winter, cooling, noise.white("mixing"))
    calm = planting.during("D3")
    wind = np.where(calm, 0.35 * wind, wind)
    mixing = np.where(calm, np.clip(0.4 * mixing, physics.LEAST_MIXING_M, None), mixing)
    up_valley = physics.up_valley(noise.red("wind regime", 30), sun)
    amount = noise.stream("rain amount").gamma(0.7, 1.1, noise.n_hours)
    return Weather(
        wind,
        temperature=physics.air_temperature(winter, sun, cloud, cooling, noise.red("air mass", 80)),
        solar=solar,
        mixing=mixing,
        up_valley=up_valley,
        direction=physics.wind_direction(up_valley, noise.red("veer", 8), noise.white("swing")),
        rain=physics.rainfall(noise.red("wet", 9), cloud, amount),
    )


def make_roads(calendar: Calendar, noise: Noise, planting: Planting) -> Roads:
    """Traffic on both roads and at the quarry gate, with the road closure if planted."""
    hour = calendar.civil_hour
    share = np.where(calendar.free_day, physics.FREE_DAY[hour], physics.WORKING_DAY[hour])
    activity = noise.red("activity", 14)
    peaks = physics.KELVANE_PEAK_PER_H, physics.TIVREL_PEAK_PER_H
    kelvane = physics.traffic(peaks[0], share, activity, noise.red("Kelvane traffic", 5), 0.13)
    tivrel = physics.traffic(peaks[1], share, activity, noise.red("Tivrel traffic", 5), 0.12)
    lorries = physics.lorries(calendar.free_day, hour, noise.red("lorries", 4))
    closed = planting.during("T1")
    residents = 0.15 * kelvane * np.exp(0.25 * noise.white("residents"))
    diverted = 1.25 * tivrel
    # The closure's counts have their own streams, so that all other hours are the same in both worlds.
    return Roads(
        kelvane=np.where(closed, residents, kelvane),
        tivrel=np.where(closed, diverted, tivrel),
        lorries=lorries,
        kelvane_count=np.where(
            closed, noise.counts("residents counted", residents), noise.counts("Kelvane counted", kelvane)
        ),
        tivrel_count=np.where(
            closed, noise.counts("diverted counted", diverted), noise.counts("Tivrel counted", tivrel)
        ),
        lorry_count=noise.counts("lorries counted", lorries),
    )


def make_air(
    calendar: Calendar, weather: Weather, roads: Roads, noise: Noise, planting: Planting
) -> dict[str, Hourly]:
    """True concentrations by series key, µg/m³."""
    dilute = physics.dilution(weather.wind, weather.mixing)
    heat = physics.heating(weather.temperature, calendar.civil_hour)
    nox = make_nox(calendar, weather, roads, dilute, heat, noise, planting)
    ozone_before = physics.regional_ozone(
        calendar.winter,
        weather.solar,
        weather.temperature,
        weather.mixing,
        weather.wind,
        noise.red("ozone", 40),
    )
    air: dict[str, Hourly] = {}
    primary = {"KEL": 0.2, "TIV": 0.18, "DOR": 0.1, "PEL": 0.1, "SKA": 0.15, "UVE": 0.08}
    for station, share in primary.items():
        no2, o3 = physics.nitrogen_chemistry(nox[station], share, ozone_before, weather.solar)
        air[f"{station}.NO2"], air[f"{station}.O3"] = no2, o3
    smoke = np.where(planting.during("D5"), 4.2, 1.0)
    particles = smoke * physics.regional_particles(noise.red("particles", 70), calendar.winter, weather.rain)
    # Share of NOx that is soot, µg/m³ from heating, spread of local sources: roadside, city, suburb, country.
    local = {"KEL": (0.05, 2, 0.08), "DOR": (0.06, 4, 0.08), "PEL": (0.06, 6, 0.1), "UVE": (0.03, 1, 0.12)}
    for station, (soot, smoke_of_stoves, spread) in local.items():
        air[f"{station}.PM25"] = (
            particles * np.exp(spread * noise.red(f"{station} particles", 5))
            + soot * nox[station]
            + smoke_of_stoves * heat * dilute
        )
    dust = physics.quarry_dust(roads.lorry_count, weather.wind, weather.rain)
    pile = physics.stockpile_dust(weather.direction, weather.wind, noise.red("stockpile", 6))
    air["SKA.PM10"] = (
        1.4 * particles * np.exp(0.15 * noise.red("SKA particles", 5))
        + dust * np.exp(0.4 * noise.red("dust", 3))
        + np.where(planting.since("T5"), pile, 0.0)
    )
    return air


def make_nox(
    calendar: Calendar,
    weather: Weather,
    roads: Roads,
    dilute: Hourly,
    heat: Hourly,
    noise: Noise,
    planting: Planting,
) -> dict[str, Hourly]:
    """NOx by station, µg/m³: what its road, the town and the region add, each diluted."""
    city = physics.city_nox(roads.kelvane + roads.tivrel, heat, dilute, noise.red("city", 6))
    region = physics.regional_nox(noise.red("region", 60), calendar.winter)
    cleaner = np.where(planting.since("T6"), 0.45, 1.0)
    road = {
        "KEL": 70 * cleaner * roads.kelvane / physics.KELVANE_PEAK_PER_H,
        "TIV": 62 * roads.tivrel / physics.TIVREL_PEAK_PER_H,
        "SKA": 9 * roads.lorries / physics.LORRIES_PER_H,
    }
    spread = {"KEL": 0.22, "TIV": 0.22, "SKA": 0.2}
    beside = {
        station: emitted * dilute * np.exp(spread[station] * noise.red(f"{station} exhaust", 3))
        for station, emitted in road.items()
    }
    down_wind_of_town = np.where(weather.up_valley, 1.8, 0.2)
    return {
        "KEL": beside["KEL"] + city + region,
        "TIV": beside["TIV"] + 0.7 * city + region,
        "DOR": 1.15 * city * np.exp(0.12 * noise.red("DOR local", 4)) + region,
        "PEL": 0.7 * city * np.exp(0.16 * noise.red("PEL local", 4)) + region,
        "SKA": beside["SKA"] + 0.45 * city + region,
        "UVE": 0.12 * city * down_wind_of_town + region * np.exp(0.12 * noise.red("UVE local", 8)),
    }

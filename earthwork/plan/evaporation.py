"""Reference evaporation from weather, by the Penman–Monteith equation as FAO-56 gives it, by day and by hour.

Sources: [fao56] Allen, Pereira, Raes and Smith (1998), Crop evapotranspiration, FAO Irrigation and Drainage
Paper 56; [asce-ewri] for the hourly night rule. Radiation in MJ/m² per day or per hour, vapour pressure in
kPa, temperature in °C, wind at 2 m in m/s, angles in radians. All functions take floats or arrays and give
the like.
"""

from __future__ import annotations

from typing import Any

import numpy as np

SOLAR_CONSTANT_MJ_M2_MIN = 0.0820
ALBEDO_REFERENCE = 0.23
STEFAN_BOLTZMANN_DAY = 4.903e-9  #: MJ K⁻⁴ m⁻² day⁻¹
LATENT_HEAT_INVERSE = 0.408  #: kg (= mm on 1 m²) evaporated by one MJ at 20 °C

Floats = Any  #: a float, or an array of floats


def pressure_kpa(elevation_m: Floats) -> Floats:
    """Air pressure [kPa] at an elevation [m]; [fao56] eq. 7.

    >>> round(pressure_kpa(1800.0), 1)
    81.8
    """
    return 101.3 * ((293.0 - 0.0065 * elevation_m) / 293.0) ** 5.26


def psychrometric_kpa_c(pressure: Floats) -> Floats:
    """Psychrometric constant [kPa/°C] of an air pressure [kPa]; [fao56] eq. 8.

    >>> round(psychrometric_kpa_c(81.8), 3)
    0.054
    """
    return 0.665e-3 * pressure


def saturation_kpa(temperature_c: Floats) -> Floats:
    """Saturation vapour pressure [kPa]; [fao56] eq. 11.

    >>> round(float(saturation_kpa(24.5)), 3)
    3.075
    """
    return 0.6108 * np.exp(17.27 * temperature_c / (temperature_c + 237.3))


def saturation_slope_kpa_c(temperature_c: Floats) -> Floats:
    """Slope of the saturation vapour pressure curve [kPa/°C]; [fao56] eq. 13.

    >>> round(float(saturation_slope_kpa_c(38.0)), 3)
    0.358
    """
    return 4098.0 * saturation_kpa(temperature_c) / (temperature_c + 237.3) ** 2


def wind_at_2m(wind_m_s: Floats, height_m: float) -> Floats:
    """Wind [m/s] at 2 m above ground of a wind measured at ``height_m`` (0.5 m or more); [fao56] eq. 47.

    >>> round(float(wind_at_2m(3.2, 10.0)), 1)
    2.4
    """
    if not height_m >= 0.5:
        raise ValueError(f"wind height is {height_m:g} m; it must be 0.5 m or more")
    return wind_m_s * 4.87 / np.log(67.8 * height_m - 5.42)


def sun_distance_inverse(day_of_year: Floats) -> Floats:
    """Inverse relative distance Earth–Sun [-]; [fao56] eq. 23.

    >>> round(float(sun_distance_inverse(246)), 3)
    0.985
    """
    return 1.0 + 0.033 * np.cos(2.0 * np.pi / 365.0 * day_of_year)


def declination(day_of_year: Floats) -> Floats:
    """Solar declination [rad]; [fao56] eq. 24.

    >>> round(float(declination(246)), 3)
    0.12
    """
    return 0.409 * np.sin(2.0 * np.pi / 365.0 * day_of_year - 1.39)


def sunset_angle(latitude: Floats, day_of_year: Floats) -> Floats:
    """Sunset hour angle [rad], 0 in the polar night and π under the midnight sun; [fao56] eq. 25."""
    return np.arccos(np.clip(-np.tan(latitude) * np.tan(declination(day_of_year)), -1.0, 1.0))


def extraterrestrial_day(latitude: Floats, day_of_year: Floats) -> Floats:
    """Radiation above the atmosphere [MJ/m² per day]; [fao56] eq. 21.

    >>> round(float(extraterrestrial_day(np.radians(-20.0), 246)), 1)
    32.2
    """
    sunset, tilt = sunset_angle(latitude, day_of_year), declination(day_of_year)
    sun = sunset * np.sin(latitude) * np.sin(tilt) + np.cos(latitude) * np.cos(tilt) * np.sin(sunset)
    return 24.0 * 60.0 / np.pi * SOLAR_CONSTANT_MJ_M2_MIN * sun_distance_inverse(day_of_year) * sun


def solar_hour_angle(day_of_year: Floats, utc_hour: Floats, longitude_deg: Floats) -> Floats:
    """Sun's hour angle [rad] at a UTC time [h], 0 at solar noon; [fao56] eqs 31 to 33, zone meridian 0°.

    Args:
        longitude_deg: + east [°].
    """
    season = 2.0 * np.pi * (np.asarray(day_of_year) - 81.0) / 364.0
    correction = 0.1645 * np.sin(2 * season) - 0.1255 * np.cos(season) - 0.025 * np.sin(season)
    angle = np.pi / 12.0 * (utc_hour + longitude_deg / 15.0 + correction - 12.0)
    return (angle + np.pi) % (2.0 * np.pi) - np.pi


def extraterrestrial_hour(latitude: Floats, day_of_year: Floats, middle_angle: Floats, hours: float = 1.0) -> Floats:
    """Radiation above the atmosphere [MJ/m²] in a period of ``hours``; [fao56] eqs 28 to 30.

    The period is cut at sunrise and sunset, so that the hours of a day add up to its total.

    Args:
        middle_angle: sun's hour angle at the middle of the period [rad].
    """
    sunset, tilt = sunset_angle(latitude, day_of_year), declination(day_of_year)
    half = np.pi / 24.0 * hours
    first = np.clip(middle_angle - half, -sunset, sunset)
    last = np.clip(middle_angle + half, -sunset, sunset)
    sun = (last - first) * np.sin(latitude) * np.sin(tilt)
    sun = sun + np.cos(latitude) * np.cos(tilt) * (np.sin(last) - np.sin(first))
    full = 12.0 * 60.0 / np.pi * SOLAR_CONSTANT_MJ_M2_MIN * sun_distance_inverse(day_of_year)
    return np.maximum(full * sun, 0.0)


def clear_sky(extraterrestrial: Floats, elevation_m: Floats) -> Floats:
    """Solar radiation of a cloudless sky, in the unit of ``extraterrestrial``; [fao56] eq. 37."""
    return (0.75 + 2e-5 * elevation_m) * extraterrestrial


def net_longwave_day(maximum_c: Floats, minimum_c: Floats, vapour_kpa: Floats, clearness: Floats) -> Floats:
    """Net outgoing long-wave radiation [MJ/m² per day]; [fao56] eq. 39.

    Args:
        clearness: solar radiation / clear-sky radiation [-], cut at 1.

    >>> round(float(net_longwave_day(25.1, 19.1, 2.1, 14.5 / 18.8)), 1)
    3.5
    """
    body = STEFAN_BOLTZMANN_DAY * ((maximum_c + 273.16) ** 4 + (minimum_c + 273.16) ** 4) / 2.0
    return body * (0.34 - 0.14 * np.sqrt(vapour_kpa)) * (1.35 * np.minimum(clearness, 1.0) - 0.35)


def net_longwave_hour(temperature_c: Floats, vapour_kpa: Floats, clearness: Floats) -> Floats:
    """Net outgoing long-wave radiation [MJ/m² per hour]; [fao56] eq. 39 with the hourly constant.

    Args:
        clearness: solar radiation / clear-sky radiation [-]; cut to 0.3 … 1, as [asce-ewri] has it.
    """
    body = STEFAN_BOLTZMANN_DAY / 24.0 * (temperature_c + 273.16) ** 4
    return body * (0.34 - 0.14 * np.sqrt(vapour_kpa)) * (1.35 * np.clip(clearness, 0.3, 1.0) - 0.35)


def penman_monteith_day(
    mean_c: Floats, net_radiation: Floats, wind_2m: Floats, deficit_kpa: Floats, psychrometric: Floats
) -> Floats:
    """Reference evaporation [mm/day]; [fao56] eq. 6, soil heat flux 0.

    Args:
        net_radiation: [MJ/m² per day].
        deficit_kpa: saturation less actual vapour pressure.
    """
    slope = saturation_slope_kpa_c(mean_c)
    radiation = LATENT_HEAT_INVERSE * slope * net_radiation
    air = psychrometric * 900.0 / (mean_c + 273.0) * wind_2m * deficit_kpa
    return (radiation + air) / (slope + psychrometric * (1.0 + 0.34 * wind_2m))


def penman_monteith_hour(
    temperature_c: Floats,
    net_radiation: Floats,
    wind_2m: Floats,
    deficit_kpa: Floats,
    psychrometric: Floats,
    *,
    daylight: Floats,
    surface: Floats = 0.34,
) -> Floats:
    """Reference evaporation [mm/h]; [fao56] eq. 53 with soil heat flux by eqs 45 and 46.

    Args:
        net_radiation: [MJ/m² per hour].
        daylight: True while the sun is up.
        surface: coefficient of the surface; 0.34 in [fao56] (0.24 by day and 0.96 by night in [asce-ewri]).
    """
    slope = saturation_slope_kpa_c(temperature_c)
    flux = np.where(daylight, 0.1, 0.5) * net_radiation
    radiation = LATENT_HEAT_INVERSE * slope * (net_radiation - flux)
    air = psychrometric * 37.0 / (temperature_c + 273.0) * wind_2m * deficit_kpa
    return (radiation + air) / (slope + psychrometric * (1.0 + surface * wind_2m))


def reference_evaporation_day(
    *,
    maximum_c: Floats,
    minimum_c: Floats,
    vapour_kpa: Floats,
    wind_2m: Floats,
    solar_mj_m2: Floats,
    latitude_deg: float,
    elevation_m: float,
    day_of_year: Floats,
) -> Floats:
    """Reference evaporation [mm/day] of days of weather; [fao56] eqs 6 to 40.

    Args:
        vapour_kpa: actual vapour pressure; see :func:`vapour_from_humidity`.
        solar_mj_m2: solar radiation [MJ/m² per day], 0 or more.
        latitude_deg: + north [°].

    >>> weather = dict(maximum_c=21.5, minimum_c=12.3, vapour_kpa=1.409, wind_2m=2.078, solar_mj_m2=22.07)
    >>> place = dict(latitude_deg=50.8, elevation_m=100, day_of_year=187)
    >>> round(float(reference_evaporation_day(**weather, **place)), 1)
    3.9
    """
    latitude = np.radians(latitude_deg)
    top = clear_sky(extraterrestrial_day(latitude, day_of_year), elevation_m)
    clearness = np.where(top > 0, solar_mj_m2 / np.where(top > 0, top, 1.0), 0.7)
    net = (1 - ALBEDO_REFERENCE) * solar_mj_m2 - net_longwave_day(
        maximum_c, minimum_c, vapour_kpa, np.maximum(clearness, 0.3)
    )
    saturation = (saturation_kpa(maximum_c) + saturation_kpa(minimum_c)) / 2.0
    gamma = psychrometric_kpa_c(pressure_kpa(elevation_m))
    mean = (maximum_c + minimum_c) / 2.0
    return penman_monteith_day(mean, net, wind_2m, np.maximum(saturation - vapour_kpa, 0.0), gamma)


def vapour_from_humidity(maximum_c: Floats, minimum_c: Floats, mean_percent: Floats) -> Floats:
    """Actual vapour pressure [kPa] from a day's mean relative humidity [%]; [fao56] eq. 19.

    >>> round(float(vapour_from_humidity(25.0, 18.0, 68.0)), 2)
    1.78
    """
    return mean_percent / 100.0 * (saturation_kpa(maximum_c) + saturation_kpa(minimum_c)) / 2.0


def vapour_from_extremes(maximum_c: Floats, minimum_c: Floats, highest: Floats, lowest: Floats) -> Floats:
    """Actual vapour pressure [kPa] from a day's highest and lowest relative humidity [%]; [fao56] eq. 17.

    >>> round(float(vapour_from_extremes(25.0, 18.0, 82.0, 54.0)), 2)
    1.7
    """
    return (saturation_kpa(minimum_c) * highest + saturation_kpa(maximum_c) * lowest) / 200.0


def carried_clearness(
    solar: np.ndarray, clear: np.ndarray, to_sunset_h: np.ndarray, *, start: float = 0.7
) -> np.ndarray:
    """Solar / clear-sky radiation [-] of consecutive hours.

    At night it is that of the hour 2 to 3 hours before sunset; [fao56] chapter 4, hourly time step.

    Args:
        solar, clear: measured and clear-sky radiation [MJ/m² per hour], shape (n,).
        to_sunset_h: hours from the middle of each hour to sunset, shape (n,).
        start: ratio for a record that starts at night ([fao56]: 0.7 to 0.8 in arid, 0.4 to 0.6 in humid
            places).
    """
    ratio = np.empty(len(solar))
    carried = start
    for i in range(len(solar)):
        ratio[i] = solar[i] / clear[i] if clear[i] > 0 else carried
        if clear[i] > 0 and 2.0 <= to_sunset_h[i] < 3.0:
            carried = float(ratio[i])
    return ratio


def reference_evaporation_hours(
    *,
    temperature_c: np.ndarray,
    vapour_kpa: np.ndarray,
    wind_2m: np.ndarray,
    solar_mj_m2: np.ndarray,
    day_of_year: np.ndarray,
    utc_middle_hour: np.ndarray,
    latitude_deg: float,
    longitude_deg: float,
    elevation_m: float,
) -> np.ndarray:
    """Reference evaporation [mm/h] of consecutive hours of weather, shape (n,), 0 or more; [fao56] eq. 53.

    Args:
        solar_mj_m2: solar radiation [MJ/m² per hour].
        day_of_year, utc_middle_hour: UTC day of the year and time of the middle of each hour [h].
        latitude_deg, longitude_deg: + north, + east [°].
    """
    latitude = np.radians(latitude_deg)
    angle = solar_hour_angle(day_of_year, utc_middle_hour, longitude_deg)
    clear = clear_sky(extraterrestrial_hour(latitude, day_of_year, angle), elevation_m)
    sunset = sunset_angle(latitude, day_of_year)
    ratio = carried_clearness(solar_mj_m2, clear, (sunset - angle) * 12.0 / np.pi)
    net = (1 - ALBEDO_REFERENCE) * solar_mj_m2 - net_longwave_hour(temperature_c, vapour_kpa, ratio)
    deficit = np.maximum(saturation_kpa(temperature_c) - vapour_kpa, 0.0)
    gamma = psychrometric_kpa_c(pressure_kpa(elevation_m))
    daylight = np.abs(angle) < sunset
    depth = penman_monteith_hour(temperature_c, net, wind_2m, deficit, gamma, daylight=daylight)
    return np.maximum(depth, 0.0)  # dew is no gain for a haul road

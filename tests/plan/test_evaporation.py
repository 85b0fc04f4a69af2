"""Reference evaporation against the worked examples of FAO-56 and of ASCE-EWRI."""

import math

import numpy as np
import pytest

from earthwork.plan import evaporation as ev
from tests.published import evaporation as published


@pytest.mark.parametrize(("name", "arguments", "printed", "tolerance", "where"), published.FAO56_VALUES)
def test_each_term_gives_the_figure_that_fao56_prints(name, arguments, printed, tolerance, where):
    assert float(getattr(ev, name)(*arguments)) == pytest.approx(printed, abs=tolerance), where


def test_the_day_at_uccle_gives_the_printed_evaporation():
    uccle = published.UCCLE
    wind = ev.wind_at_2m(uccle["wind_10m"], 10.0)
    assert wind == pytest.approx(uccle["wind_2m"], abs=0.0015)
    top = ev.extraterrestrial_day(math.radians(uccle["latitude_deg"]), uccle["day_of_year"])
    assert top == pytest.approx(uccle["extraterrestrial"], abs=0.015)
    vapour = ev.vapour_from_extremes(uccle["maximum_c"], uccle["minimum_c"], *uccle["humidity"])
    depth = ev.reference_evaporation_day(
        vapour_kpa=vapour,
        wind_2m=wind,
        **{
            k: uccle[k] for k in ("maximum_c", "minimum_c", "solar_mj_m2", "latitude_deg", "elevation_m", "day_of_year")
        },
    )
    assert depth == pytest.approx(uccle["printed_mm_day"], abs=0.05)
    assert depth == pytest.approx(uccle["recomputed_mm_day"], rel=2e-3)


@pytest.mark.parametrize("hour", [published.NDIAYE_NIGHT, published.NDIAYE_DAY], ids=["night", "day"])
def test_the_hours_at_ndiaye_give_every_printed_term(hour):
    place = published.NDIAYE
    latitude = math.radians(place["latitude_deg"])
    saturation = ev.saturation_kpa(hour["temperature_c"])
    vapour = saturation * hour["humidity"] / 100
    gamma = ev.psychrometric_kpa_c(ev.pressure_kpa(place["elevation_m"]))
    angle = ev.solar_hour_angle(place["day_of_year"], hour["utc"], place["longitude_deg"])
    top = ev.extraterrestrial_hour(latitude, place["day_of_year"], angle)
    longwave = ev.net_longwave_hour(hour["temperature_c"], vapour, hour["clearness"])
    net = 0.77 * hour["solar"] - longwave
    assert ev.saturation_slope_kpa_c(hour["temperature_c"]) == pytest.approx(hour["slope"], abs=5e-4)
    assert gamma == pytest.approx(hour["gamma"], abs=5e-5)
    assert saturation == pytest.approx(hour["saturation"], abs=5e-4)
    assert vapour == pytest.approx(hour["vapour"], abs=5e-4)
    assert angle == pytest.approx(hour["angle"], abs=0.005)
    assert top == pytest.approx(hour["extraterrestrial"], abs=0.002)
    assert longwave == pytest.approx(hour["longwave"], abs=6e-4)
    assert net == pytest.approx(hour["net"], abs=1e-3)
    if "clear_sky" in hour:
        assert ev.clear_sky(top, place["elevation_m"]) == pytest.approx(hour["clear_sky"], abs=0.002)
    depth = ev.penman_monteith_hour(
        hour["temperature_c"], net, hour["wind"], saturation - vapour, gamma, daylight=top > 0
    )
    assert depth == pytest.approx(hour["mm"], abs=0.005)


def _greeley():
    rows = np.array(published.GREELEY_HOURS)
    utc = published.GREELEY["first_end_hour"] + np.arange(len(rows)) - 0.5 + 105 / 15
    return rows.T, 183 + (utc - 7) // 24, utc % 24


def test_thirty_hours_at_greeley_give_the_printed_radiation():
    (temperature, vapour, solar, _, top, clear, longwave, net, _), day, utc = _greeley()
    place = published.GREELEY
    angle = ev.solar_hour_angle(day, utc, place["longitude_deg"])
    ours = ev.extraterrestrial_hour(place["latitude_rad"], day, angle)
    np.testing.assert_allclose(ours, top, atol=0.0055)
    sky = ev.clear_sky(ours, place["elevation_m"])
    np.testing.assert_allclose(sky, clear, atol=0.0055)
    to_sunset = (ev.sunset_angle(place["latitude_rad"], day) - angle) * 12 / np.pi
    ratio = ev.carried_clearness(solar, sky, to_sunset)
    assert ratio[6] == ratio[1]  # the night takes the hour 2 to 3 hours before sunset
    out = ev.net_longwave_hour(temperature, vapour, ratio)
    good = np.ones(30, bool)
    good[[2, 4, 13, 28]] = False  # the print rounds solar and clear-sky radiation of a low sun to one digit
    np.testing.assert_allclose(out[good], longwave[good], atol=0.006)
    np.testing.assert_allclose((0.77 * solar - out)[good], net[good], atol=0.0085)


def test_thirty_hours_at_greeley_give_the_printed_evaporation_with_the_coefficients_of_that_standard():
    (temperature, vapour, _, wind, _, _, _, net, printed), *_ = _greeley()
    gamma = ev.psychrometric_kpa_c(ev.pressure_kpa(published.GREELEY["elevation_m"]))
    daylight = net > 0
    depth = ev.penman_monteith_hour(
        temperature,
        net,
        wind,
        ev.saturation_kpa(temperature) - vapour,
        gamma,
        daylight=daylight,
        surface=np.where(daylight, 0.24, 0.96),
    )
    np.testing.assert_allclose(depth, printed, atol=0.0076)


def test_the_hours_of_a_day_add_up_to_the_day():
    for latitude, day in ((0.7, 172), (-0.3, 20), (1.1, 355), (0.0, 80)):
        hours = np.arange(24) + 0.5
        angle = ev.solar_hour_angle(day, hours, 0.0)
        total = ev.extraterrestrial_hour(latitude, day, angle).sum()
        assert total == pytest.approx(float(ev.extraterrestrial_day(latitude, day)), rel=2e-2, abs=0.05)


def test_polar_night_and_midnight_sun():
    assert ev.sunset_angle(1.4, 355) == 0
    assert ev.sunset_angle(1.4, 172) == pytest.approx(math.pi)
    assert ev.extraterrestrial_day(1.4, 355) == pytest.approx(0)


def test_wind_height_below_the_formula_is_refused():
    with pytest.raises(ValueError, match=r"wind height is 0.1 m; it must be 0.5 m or more"):
        ev.wind_at_2m(3.0, 0.1)


def test_hours_of_a_calm_clear_day_sum_to_about_the_daily_equation():
    latitude, longitude, day, elevation = 40.0, 0.0, 172, 200.0
    utc = np.arange(24) + 0.5
    angle = ev.solar_hour_angle(day, utc, longitude)
    solar = 0.75 * ev.extraterrestrial_hour(math.radians(latitude), day, angle)
    temperature = 22.0 + 7.0 * np.cos(angle - 0.5)
    vapour = np.full(24, 1.3)
    hours = ev.reference_evaporation_hours(
        temperature_c=temperature, vapour_kpa=vapour, wind_2m=np.full(24, 2.0), solar_mj_m2=solar,
        day_of_year=np.full(24, day), utc_middle_hour=utc, latitude_deg=latitude, longitude_deg=longitude,
        elevation_m=elevation,
    )  # fmt: skip
    whole = ev.reference_evaporation_day(
        maximum_c=temperature.max(), minimum_c=temperature.min(), vapour_kpa=1.3, wind_2m=2.0,
        solar_mj_m2=solar.sum(), latitude_deg=latitude, elevation_m=elevation, day_of_year=day,
    )  # fmt: skip
    assert hours.sum() == pytest.approx(float(whole), rel=0.06)
    assert (hours >= 0).all()

"""Evaporation of open ground by day from weather by day and by hour."""

import datetime
from pathlib import Path

import numpy as np
import pytest

from earthwork.errors import PlanError
from earthwork.files.weather import WeatherTable
from earthwork.plan.bare_soil import SurfaceSoil
from earthwork.plan.calendar import WorkCalendar
from earthwork.plan.weather import DailyWeather, Place
from tests.published import evaporation as published

START = datetime.date(2027, 7, 6)


def uccle(days=8):
    case = published.UCCLE
    full = np.full(days, 1.0)
    return WeatherTable(
        Path("w.csv"), False, tuple(START + datetime.timedelta(days=i) for i in range(days)),
        case["maximum_c"] * full, case["minimum_c"] * full, (84.0 * full, 63.0 * full), case["wind_10m"] * full,
        case["solar_mj_m2"] * full, np.where(np.arange(days) == 3, 12.0, 0.0),
    )  # fmt: skip


PLACE = Place(published.UCCLE["latitude_deg"], 4.35, 100.0, wind_height_m=10.0)


def test_bare_wet_ground_loses_a_fifth_more_than_the_reference():
    weather = DailyWeather(uccle(), PLACE)
    calendar = WorkCalendar(start=START)
    lost = weather.open_ground(calendar, calendar.day(1))
    assert lost.day_mm == pytest.approx(1.2 * 3.88, abs=0.012)
    assert len(lost.hours_mm) == 24


def test_a_thin_surface_dries_within_the_day():
    soil = SurfaceSoil(2.0, 3.0)
    calendar = WorkCalendar(start=START)
    lost = DailyWeather(uccle(), PLACE, soil).open_ground(calendar, calendar.day(1)).day_mm
    rate = 1.2 * 3.88
    assert lost == pytest.approx(2.0 + 1.0 * (1 - np.exp(-(rate - 2.0))), rel=2e-3)


def test_after_the_end_there_is_none_and_before_the_start_it_is_an_error():
    weather = DailyWeather(uccle(), PLACE)
    calendar = WorkCalendar(start=START)
    assert weather.open_ground(calendar, calendar.day(9)) is None
    early = WorkCalendar(start=datetime.date(2027, 7, 1))
    with pytest.raises(PlanError, match=r"the weather starts on 2027-07-06, the work on 2027-07-01"):
        weather.open_ground(early, early.day(1))
    with pytest.raises(PlanError, match=r"no dates; give calendar.start"):
        weather.open_ground(WorkCalendar(), WorkCalendar().day(1))
    assert weather.driest_week_mm_day() == pytest.approx(1.2 * 3.88, abs=0.012)


def test_rain_days_and_those_after():
    weather = DailyWeather(uccle(), PLACE)
    wet = START + datetime.timedelta(days=3)
    assert weather.rain_days(10.0, 0, datetime.UTC) == {wet}
    assert weather.rain_days(10.0, 1, datetime.UTC) == {wet, wet + datetime.timedelta(days=1)}
    assert not weather.rain_days(12.5, 1, datetime.UTC)


def hourly(days=3):
    n = 24 * days
    hours = np.arange(n) % 24
    sun = np.maximum(0.0, 3.0 * np.sin(np.pi * (hours - 5) / 14))
    start = datetime.datetime(2027, 7, 6, 5, tzinfo=datetime.UTC)  # midnight of a clock five hours behind
    return WeatherTable(
        Path("w.csv"), True, tuple(start + datetime.timedelta(hours=i) for i in range(n)),
        20 + 6 * np.sin(np.pi * (hours - 9) / 12), 20 + 6 * np.sin(np.pi * (hours - 9) / 12), np.full(n, 50.0),
        np.full(n, 2.5), sun, np.zeros(n),
    )  # fmt: skip


def test_hours_are_counted_from_shift_to_shift():
    weather = DailyWeather(hourly(), Place(40.0, -90.0, 200.0))
    calendar = WorkCalendar(start=START, time_zone="America/Chicago")
    lost = weather.open_ground(calendar, calendar.day(1))
    assert len(lost.hours_mm) == 24
    assert lost.hours_mm[5] > 5 * lost.hours_mm[18]  # noon against one in the morning
    assert lost.day_mm == pytest.approx(1.2 * weather.reference_mm[7:31].sum())
    assert weather.open_ground(calendar, calendar.day(3)) is None  # ends at midnight, within the third day


def test_an_hourly_day_is_about_the_daily_equation():
    weather = DailyWeather(hourly(), Place(40.0, -90.0, 200.0))
    table = hourly(1)
    day = WeatherTable(
        Path("w.csv"), False, (START,), table.highest_c.max(keepdims=True), table.lowest_c.min(keepdims=True),
        np.array([50.0]), np.array([2.5]), table.solar_mj_m2.sum(keepdims=True), np.array([0.0]),
    )  # fmt: skip
    by_day = DailyWeather(day, Place(40.0, -90.0, 200.0)).daily_reference_mm()[0]
    assert weather.daily_reference_mm()[0] == pytest.approx(by_day, rel=0.1)

"""Evaporation of open ground by day from weather by day and by hour."""

import datetime
from pathlib import Path

import numpy as np
import pytest

from earthwork import water
from earthwork.errors import PlanError
from earthwork.files.weather import WeatherTable
from earthwork.plan.bare_soil import SurfaceSoil
from earthwork.plan.calendar import WorkCalendar
from earthwork.plan.weather import DailyWeather, Place
from tests.plan.watered import site
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
    assert weather.rain_days(10.0, 0) == {wet}
    assert weather.rain_days(10.0, 1) == {wet, wet + datetime.timedelta(days=1)}
    assert not weather.rain_days(12.5, 1)


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


def written(folder, first, *, offset="", hours=96):
    """Hours of weather from a clock time on; the sun stands highest at noon of that clock."""
    rows = ["time,temperature_c,relative_humidity_percent,wind_speed_m_s,solar_radiation_mj_m2,rain_mm"]
    for i in range(hours):
        at = first + datetime.timedelta(hours=i)
        sun = max(0.0, 3.0 * np.sin(np.pi * (at.hour + 0.5 - 5) / 14))
        rows.append(f"{at:%Y-%m-%dT%H:%M}{offset},25,40,2,{sun:.3f},0")
    (folder / "w.csv").write_text("\n".join(rows), encoding="utf-8")


@pytest.mark.parametrize(
    ("longitude", "offset", "zone"),
    [(-99.0, "", "UTC-07:00"), (-99.0, "-05:00", "UTC-05:00"), (139.0, "", "UTC+09:00"), (139.0, "+09:00", "UTC+09:00")],
)
def test_without_a_time_zone_the_shift_is_on_the_clock_of_the_weather(tmp_path, longitude, offset, zone):
    written(tmp_path, datetime.datetime(2027, 7, 6), offset=offset)
    weather = {"file": "w.csv", "latitude": 35.0, "longitude": longitude}
    result = water(site(tmp_path, {"weather": weather}, without=("water.evaporation",)))
    said = {w.code: w.message for w in result.warnings}
    assert f"is {zone} all year" in said["time-zone-assumed"]
    assert "work starts on 2027-07-06, the first day" in said["start-assumed"]
    day = result.days[0].demand
    # shift from 07:00: the hours about noon are its fifth and sixth
    assert int(np.argmax(day.lost_by_hour)) in (4, 5)
    assert day.lost_by_hour[5] > 5 * day.lost_by_hour[18]


def test_hours_in_utc_are_not_taken_for_local_time(tmp_path):
    # the file begins at midnight of a clock nine hours ahead of it, which is 9.3 hours by the sun at 139° east
    written(tmp_path, datetime.datetime(2027, 7, 5, 15), offset="+00:00", hours=120)
    weather = {"file": "w.csv", "latitude": 35.0, "longitude": 139.0}
    result = water(site(tmp_path, {"weather": weather}, without=("water.evaporation",)))
    assert result.lifts.work.calendar.start == datetime.date(2027, 7, 6)
    assert "is UTC+09:00 all year" in {w.code: w.message for w in result.warnings}["time-zone-assumed"]


def test_work_starts_with_the_first_shift_that_has_weather(tmp_path):
    written(tmp_path, datetime.datetime(2027, 7, 6, 10), hours=120)
    weather = {"file": "w.csv", "latitude": 35.0, "longitude": -99.0}
    changes = {"weather": weather, "calendar.time_zone": "America/Chicago"}
    result = water(site(tmp_path, changes, without=("water.evaporation",)))
    assert result.lifts.work.calendar.start == datetime.date(2027, 7, 7)
    assert "time-zone-assumed" not in {w.code for w in result.warnings}
    with pytest.raises(PlanError, match=r"the weather starts on 2027-07-06 at 10:00, the work on 2027-07-06"):
        water(site(tmp_path, {**changes, "calendar.start": "2027-07-06"}, without=("water.evaporation",)))

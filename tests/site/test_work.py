"""The tables of calendar, weather, moisture and plant: what they take, and what they refuse."""

import copy
import datetime
from pathlib import Path

import pytest

from earthwork.errors import SiteFileError
from earthwork.plan.bare_soil import TEXTURES
from earthwork.site import check_site
from earthwork.site.work_model import Texture
from earthwork.units import FOOT_M

SITE = {
    "site": {"name": "Test", "units": "metric"},
    "ground": {"existing": "a.tif", "finished": "b.tif"},
    "material": {"silt": {"use": "fill"}},
    "fill": {"relative_compaction": 95, "lift_thickness": 0.2},
    "water": {"placing_rate": 1000, "supply": {"flow": 500}},
}


def site(**tables):
    document = copy.deepcopy(SITE)
    for name, table in tables.items():
        if isinstance(table, dict) and isinstance(document.get(name), dict):
            document[name] = {**document[name], **table}
        else:
            document[name] = table
    return check_site(document, Path("."), foot_of=lambda raw, folder: FOOT_M)


def test_everything_given_is_read():
    model = site(
        calendar={"start": "2027-05-03", "working_days": ["mon", "tue"],
                  "idle": [datetime.date(2027, 5, 4), 9],
                  "shift_start": "06:30", "time_zone": "America/Chicago"},
        roller=[{"width": 2.1, "speed": "5 km/h", "passes": 6, "efficiency": 0.83, "lift_limit": 0.3}],
        moisture={"exposed_time": 30, "wet_in": "cut", "pre_wet_days": 2, "drying": {"mix_with": "silt"}},
        plant={"digging": 300, "least_area": 150},
        weather={"file": "w.csv", "surface": {"texture": "silt loam"}, "rain_day": "5 mm"},
    ).model  # fmt: skip
    assert model.calendar.start == datetime.date(2027, 5, 3)
    assert model.calendar.idle == (datetime.date(2027, 5, 4), 9)
    assert model.calendar.shift_start == datetime.time(6, 30)
    assert model.roller[0].speed == pytest.approx(5 / 3.6)
    assert model.weather.rain_day == 5


def test_textures_of_the_site_file_are_those_that_are_known():
    assert set(Texture.__args__) == set(TEXTURES)


@pytest.mark.parametrize(
    ("tables", "message"),
    [
        ({"calendar": {"start": "3 May"}}, r'calendar.start = "3 May": it must be a date'),
        (
            {"calendar": {"idle": ["2027-05-04"]}},
            r"calendar.idle\[1\] = 2027-05-04: a date needs calendar.start",
        ),
        (
            {"calendar": {"idle": [0]}},
            r"calendar.idle\[1\] = 0: it must be a date, or the number of a day from 1",
        ),
        ({"calendar": {"working_days": ["mon"]}}, r"calendar.start: missing; working_days needs"),
        ({"calendar": {"time_zone": "Mars/Olympus"}}, r'"Mars/Olympus": not a known zone'),
        ({"calendar": {"shift_start": 7}}, r"calendar.shift_start = 7: it must be a time of day"),
        ({"weather": {"file": "w.csv"}, "water": {"evaporation": 6}}, r"both given: keep one"),
        ({"weather": {"file": "w.csv", "surface": {"texture": "silty loam"}}}, r"weather.surface.texture"),
        (
            {"weather": {"file": "w.csv", "surface": {"readily_evaporable": 20, "total_evaporable": 9}}},
            r"readily_evaporable = 20 mm: it must be more than 0 and at most total_evaporable, 9 mm",
        ),
        (
            {"moisture": {"drying": {"mix_with": "silts"}}},
            r"there is no \[material.silts\]; did you mean 'silt'",
        ),
        (
            {"moisture": {"exposed_time": 3, "drying_on_the_way": 1}},
            r"give drying_on_the_way or exposed_time",
        ),
        (
            {"roller": [{"width": 2, "speed": 5, "passes": 6, "efficiency": 0.8, "lift_limit": 0.15}]},
            r"fill.lift_thickness = 0.2 m: the roller works lifts of at most 0.15 m",
        ),
        (
            {"roller": [{"width": 2, "speed": 5, "passes": 6, "efficiency": 0}]},
            r"roller\[1\].efficiency = 0: it must be greater than 0",
        ),
        (
            {"water": {"truck": {"capacity": 9000, "travel_time": 9, "spread_time": 8, "efficiency": 0}}},
            r"water.truck.efficiency = 0: it must be greater than 0",
        ),
        (
            {"water": {"supply": {"flow": 100, "hours": 0}}},
            r"water.supply.hours = 0: it must be more than 0 h",
        ),
        ({"water": {"supply": {"flow": 0}}}, r"water.supply.flow = 0: it must be more than 0 where"),
        ({"water": {"tank": {"volume": 9, "at_start": 10}}}, r"tank.at_start = 10 L: it must be at most"),
        (
            {"site": {"units": "us"}, "water": {"tank": {"volume": 900, "at_start": 1000}}},
            r"tank.at_start = 1000 gal: it must be at most the tank's volume, 900 gal",
        ),
        (
            {
                "site": {"units": "us"}, "fill": {"lift_thickness": 2.0},
                "roller": [{"width": 6, "speed": 3, "passes": 6, "efficiency": 0.8, "lift_limit": 1.5}],
            },
            r"fill.lift_thickness = 2 ft: the roller works lifts of at most 1.5 ft",
        ),
        ({"water": {"evaporation": 60}}, r"water.evaporation = 60: it must be at most 30 mm/day"),
        (
            {"site": {"units": "us"}, "water": {"evaporation": 6}},
            r'water.evaporation = 6: .* the number looks like mm/day: then write "6 mm/day"',
        ),
    ],
)
def test_faults_are_named(tables, message):
    with pytest.raises(SiteFileError, match=message):
        site(**tables)

"""When and with what the fill is placed: calendar, weather, moisture and plant of the site file."""

from __future__ import annotations

import datetime
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, WithJsonSchema, model_validator

from earthwork.site.base import Section
from earthwork.site.values import (
    Elevation,
    FileName,
    GroundArea,
    Length,
    Minutes,
    NotNegative,
    Percent,
    PositiveNumber,
    PositiveSoilVolume,
    Speed,
    Text,
    Thickness,
    WaterDepth,
    Whole,
)

Weekday = Literal["mon", "tue", "wed", "thu", "fri", "sat", "sun"]
WEEKDAYS: tuple[Weekday, ...] = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")

Texture = Literal[
    "sand", "loamy sand", "sandy loam", "loam", "silt loam", "silt", "silty clay loam", "silty clay", "clay"
]  # fmt: skip


def _date(value: Any) -> Any:
    if isinstance(value, datetime.datetime) or not isinstance(value, datetime.date | str):
        raise ValueError('it must be a date, such as 2027-05-03 or "2027-05-03"')
    if isinstance(value, datetime.date):
        return value
    try:
        return datetime.date.fromisoformat(value)
    except ValueError:
        raise ValueError('it must be a date, such as 2027-05-03 or "2027-05-03"') from None


def _clock(value: Any) -> Any:
    if isinstance(value, datetime.time):
        return value
    try:
        return datetime.time.fromisoformat(value)
    except (TypeError, ValueError):
        raise ValueError('it must be a time of day, such as 07:00:00 or "07:00"') from None


def _date_or_day(value: Any) -> Any:
    if isinstance(value, int) and not isinstance(value, bool):
        if value < 1:
            raise ValueError("it must be a date, or the number of a day from 1")
        return value
    return _date(value)


_DATE_SCHEMA = {"type": "string", "format": "date"}
Date = Annotated[datetime.date, BeforeValidator(_date), WithJsonSchema(_DATE_SCHEMA)]
Clock = Annotated[
    datetime.time, BeforeValidator(_clock), WithJsonSchema({"type": "string", "format": "time"})
]
DateOrDay = Annotated[
    datetime.date | int,
    BeforeValidator(_date_or_day),
    WithJsonSchema({"anyOf": [_DATE_SCHEMA, {"type": "integer", "minimum": 1}]}),
]


class Calendar(Section):
    """Which days are worked."""

    start: Date | None = Field(default=None, description="first day; default: the first day of the weather")
    working_days: tuple[Weekday, ...] = Field(
        default=WEEKDAYS, min_length=1, description="days of the week that are worked; needs a start"
    )
    idle: tuple[DateOrDay, ...] = Field(
        default=(), description="days that nothing is placed: dates, or numbers of days from 1"
    )
    rain_days: tuple[DateOrDay, ...] = Field(
        default=(), description="days lost to rain: dates, or numbers of days from 1; dust is wet then too"
    )
    shift_start: Clock = Field(default=datetime.time(7), description="when a working day starts, local time")
    time_zone: Text | None = Field(
        default=None, description='zone of the clock, such as "America/Denver"; default: no change of clocks'
    )


class Surface(Section):
    """Water that the bare surface can lose, by texture or as depths."""

    texture: Texture | None = Field(default=None, description="texture of the open ground")
    readily_evaporable: WaterDepth | None = Field(default=None, description="lost at the full rate")
    total_evaporable: WaterDepth | None = Field(default=None, description="lost in the end")

    @model_validator(mode="after")
    def _one_way(self) -> Surface:
        depths = self.readily_evaporable is not None and self.total_evaporable is not None
        if (self.texture is None) != depths or (
            (self.readily_evaporable is None) != (self.total_evaporable is None)
        ):
            raise ValueError("give texture, or readily_evaporable and total_evaporable")
        return self


class Weather(Section):
    """Weather by hour or by day, from which evaporation and rain days are taken."""

    file: FileName = Field(description="CSV with time or date, temperature, humidity, wind, sun and rain")
    wind_height: Length = Field(default=2.0, description="height of the wind gauge above ground")
    latitude: Annotated[float, Field(strict=True, ge=-90, le=90)] | None = Field(
        default=None, description="degrees, + north; default: of the site's CRS"
    )
    longitude: Annotated[float, Field(strict=True, ge=-180, le=180)] | None = Field(
        default=None, description="degrees, + east; default: of the site's CRS"
    )
    elevation: Elevation | None = Field(default=None, description="default: mean elevation of the site")
    surface: Surface | None = Field(
        default=None, description="the open ground's soil; default: it is kept wet and loses at the full rate"
    )
    rain_day: WaterDepth | None = Field(
        default=None, description="a day with this much rain is lost; default: rain stops nothing"
    )
    days_after_rain: Annotated[int, Field(strict=True, ge=0)] = Field(
        default=0, description="days lost after a day of rain, too"
    )


class Drying(Section):
    """How soil that arrives too wet is dried."""

    spread: Thickness | None = Field(
        default=None, description="loose thickness spread to dry; default: a lift"
    )
    turns_per_day: NotNegative = Field(default=2.0, description="times the spread soil is turned in a day")
    area: GroundArea | None = Field(default=None, description="ground kept for drying; default: no limit")
    mix_with: Text | None = Field(default=None, description="drier material of the site to mix in")


class Moisture(Section):
    """How soil comes to its target water content."""

    drying_on_the_way: Percent | None = Field(
        default=None, description="points of water content lost between the cut and the lift; default 0"
    )
    exposed_time: Minutes | None = Field(
        default=None, description="or minutes that loose soil lies open, from which the loss is estimated"
    )
    wet_in: Literal["lift", "cut"] = Field(default="lift", description="where water is added")
    pre_wet_days: Annotated[int, Field(strict=True, ge=0)] = Field(
        default=0, description="working days ahead that water is put on the cut"
    )
    lift_limit_points: PositiveNumber = Field(
        default=3.0, description="most points of water that a lift takes before it runs off"
    )
    lift_limit_depth: WaterDepth = Field(
        default=10.0, description="most water on a lift before it runs off", validate_default=False
    )
    drying: Drying = Field(default=Drying(), description="how wet soil is dried")

    @model_validator(mode="after")
    def _one_way(self) -> Moisture:
        if self.drying_on_the_way is not None and self.exposed_time is not None:
            raise ValueError("give drying_on_the_way or exposed_time, not both")
        return self


class Plant(Section):
    """What the digging and hauling plant does in an hour, and the smallest lift it can work on."""

    digging: PositiveSoilVolume | None = Field(default=None, description="bank volume dug in an hour")
    hauling: PositiveSoilVolume | None = Field(default=None, description="loose volume hauled in an hour")
    least_area: GroundArea = Field(default=0.0, description="smaller lifts are named")
    least_width: Length | None = Field(default=None, description="narrower lifts are named")
    fills_at_once: Whole = Field(default=1, description="fill areas worked at one time")


class Roller(Section):
    """Rollers of one kind."""

    name: Text = Field(default="roller", description="name")
    width: Length = Field(description="rolled width of a pass")
    speed: Speed = Field(description="speed while rolling")
    passes: PositiveNumber = Field(description="passes that the density takes")
    efficiency: Annotated[float, Field(strict=True, gt=0, le=1)] = Field(
        description="share of the work hours that it rolls, 0.75 to 0.9 as a rule"
    )
    count: Whole = Field(default=1, description="rollers of this kind")
    lift_limit: Length | None = Field(default=None, description="thickest compacted lift that it works")

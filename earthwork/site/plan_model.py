"""Tables of the site file that plan the work: balance, water and pads."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from earthwork.site.base import Area, Section
from earthwork.site.pads_model import PadMoves
from earthwork.site.values import (
    Evaporation,
    Flow,
    GroundArea,
    Length,
    Mass,
    Minutes,
    NotNegative,
    Percent,
    PositiveFlow,
    PositiveHours,
    PositiveSoilVolume,
    PositiveWaterVolume,
    Shift,
    SoilVolume,
    WaterDepth,
    WaterVolume,
    Whole,
)
from earthwork.site.work_model import Clock


class Balance(Section):
    """What the balance aims at, and what ground may move for it."""

    target_surplus: SoilVolume = Field(default=0.0, description="compacted volume wanted in hand at the end")
    step: Length | None = Field(
        default=None, description="the grade shift is rounded to this; default: 0.01 of the site's length unit"
    )
    shift_area: Area | None = Field(
        default=None, description="ground that may move; default: the disturbed area"
    )
    shift_range: tuple[Shift, Shift] = Field(
        default=(-3.0, 3.0), description="lowest and highest shift, + up"
    )
    pad_moves: PadMoves | None = Field(default=None, description="gives each pad of a design its own grade")


class Dust(Section):
    """Water sprayed to hold dust down."""

    area: GroundArea = Field(description="area sprayed")
    rate: WaterDepth = Field(description="water on the area in one pass")
    passes_per_day: NotNegative = Field(description="passes in a day")


class Supply(Section):
    """The standpipe, hydrant or well."""

    flow: Flow = Field(description="flow while it is open")
    hours: PositiveHours = Field(default=24.0, description="hours in a day that it is open")
    start: Clock | None = Field(default=None, description="when it opens, local time; default: with the shift")
    count: Whole = Field(default=1, description="standpipes of this flow")


class Tank(Section):
    """Storage between the supply and the trucks."""

    volume: PositiveWaterVolume = Field(description="what it holds")
    at_start: WaterVolume | None = Field(
        default=None, description="what it holds before the first day; default: full"
    )


class WaterTruck(Section):
    """The water trucks, all alike."""

    capacity: PositiveWaterVolume = Field(description="water in a full truck")
    fill_flow: PositiveFlow | None = Field(
        default=None, description="flow into a truck; default: the supply's"
    )
    bays: Whole = Field(default=1, description="trucks that can fill at one time")
    travel_time: Minutes = Field(description="minutes, out and back")
    spread_time: Minutes = Field(description="minutes to empty a truck")
    efficiency: Annotated[float, Field(strict=True, gt=0, le=1)] = Field(
        default=1.0, description="share of the work hours that trucks run"
    )
    payload: Mass | None = Field(default=None, description="greatest mass of water that the truck is built for")
    empty_mass: Mass | None = Field(default=None, description="mass of the empty truck")
    road_limit: Mass | None = Field(default=None, description="greatest gross mass allowed on the roads used")

    @model_validator(mode="after")
    def _both_masses(self) -> WaterTruck:
        if (self.empty_mass is None) != (self.road_limit is None):
            raise ValueError("give empty_mass and road_limit together: the road limit is of the gross mass")
        if self.empty_mass is not None and self.road_limit is not None and self.empty_mass >= self.road_limit:
            raise ValueError("road_limit must be more than empty_mass")
        return self


class Water(Section):
    """Compaction water: how fast soil is placed, what dries, and what supply there is."""

    placing_rate: PositiveSoilVolume = Field(description="compacted volume placed in a working day")
    work_hours: PositiveHours = Field(default=10.0, description="hours of a working day")
    evaporation: Evaporation | None = Field(
        default=None, description="evaporation from open ground in a day; default: from [weather], else 0"
    )
    open_area: GroundArea | None = Field(
        default=None, description="ground that dries at one time; default: the day's volume / lift thickness"
    )
    waste_percent: Percent = Field(default=0.0, description="spilt and drifted, % of the water applied")
    dust: Dust | None = Field(default=None, description="dust control")
    supply: Supply = Field(description="where the water comes from")
    tank: Tank | None = Field(default=None, description="storage on site")
    truck: WaterTruck | None = Field(default=None, description="the water trucks")

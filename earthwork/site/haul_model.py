"""Tables of the site file that say how earth is moved: blocks, trucks, roads, rules, phases, stockpiles, baseline."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from earthwork.site.base import Area, AreaSpec, Section
from earthwork.site.values import (
    Distance,
    Length,
    Mass,
    Minutes,
    NotNegative,
    Number,
    Percent,
    Point,
    PositiveNumber,
    PositiveSoilVolume,
    Power,
    Shift,
    Speed,
    Text,
    Whole,
)

Share = Annotated[float, Field(strict=True, gt=0, le=1)]


class HaulTruck(Section):
    """The hauling trucks, all alike."""

    heaped_volume: PositiveSoilVolume = Field(description="loose volume of a heaped load")
    payload: Mass = Field(description="greatest mass of a load, moist")
    road_payload: Mass | None = Field(
        default=None, description="greatest load on public roads, moist, for what leaves or reaches the site; "
        "default: the payload"
    )  # fmt: skip
    speed_loaded: Speed | None = Field(default=None, description="greatest speed, loaded; needed for times")
    speed_empty: Speed | None = Field(default=None, description="greatest speed, empty; default: as loaded")
    speeds_loaded: tuple[tuple[Number, Speed], ...] = Field(
        default=(), description="performance chart, loaded: rows of effective grade in percent, speed"
    )
    speeds_empty: tuple[tuple[Number, Speed], ...] = Field(
        default=(), description="performance chart, empty: rows of effective grade in percent, speed"
    )
    power: Power | None = Field(default=None, description="flywheel power, instead of charts")
    empty_mass: Mass | None = Field(default=None, description="mass without a load; needed with power")
    drive_efficiency: Share = Field(default=0.8, description="share of the power that reaches the wheels")
    rolling_resistance: Percent | None = Field(
        default=None, description="rolling resistance of the ground, % of weight; needed with charts or power"
    )
    load_time: Minutes | None = Field(default=None, description="minutes to load a truck; default: from plant.digging")
    dump_time: Minutes = Field(default=0.0, description="minutes to turn and dump")
    wait_time: Minutes = Field(default=0.0, description="minutes of waits and spotting in a cycle")
    efficiency: Share = Field(default=1.0, description="share of an hour that is worked, such as 0.83")
    count: Whole | None = Field(default=None, description="trucks at hand; default: as many as match the loader")
    hour_cost: NotNegative | None = Field(default=None, description="money for an hour of a truck with driver")
    loader_hour_cost: NotNegative = Field(default=0.0, description="money for an hour of the loader")


class Roads(AreaSpec):
    """Haul roads: lines, with the names of the attributes that describe them."""

    name: Text | None = Field(default=None, description="attribute with the road's name")
    speed: Text | None = Field(default=None, description="attribute with its speed limit, in the site's unit")
    one_way: Text | None = Field(
        default=None, description="attribute that is true, 1 or yes where only the line's direction is driven"
    )
    grade_limit: Text | None = Field(
        default=None, description="attribute with the steepest grade that is driven, in percent"
    )
    capacity: Text | None = Field(default=None, description="attribute with the loads that it takes in an hour")
    default_speed: Speed | None = Field(default=None, description="speed of roads that say none")


class FillRule(Section):
    """Which materials may go into a part of the fill; the first rule that holds at a place governs."""

    name: Text = Field(description="name of this part of the fill, such as top metre")
    materials: tuple[Text, ...] = Field(min_length=1, description="materials that may go there")
    top: Length | None = Field(default=None, description="down to this depth; default: all depths")
    measured_from: Literal["finished", "subgrade"] = Field(default="finished", description="where depth starts")
    area: Area | None = Field(default=None, description="polygons, such as the pavement; default: everywhere")


class Haul(Section):
    """How earth is moved on the site."""

    block: Length = Field(default=50.0, description="side of a haul block")
    by: Literal["blocks", "zones", "pads"] = Field(
        default="blocks", description="what is gathered: square blocks, or whole zones or pads (blocks elsewhere)"
    )
    barriers: Area | None = Field(default=None, description="what trucks cannot cross")
    built: Area | None = Field(
        default=None, description="polygons that are barriers once the phase they lie in is built"
    )
    roads: Roads | None = Field(default=None, description="haul roads")
    ground_speed: Speed | None = Field(
        default=None, description="speed over open ground; needed where roads or times are given"
    )
    distance: Literal["driven", "straight"] = Field(
        default="driven", description="round barriers and along roads, or straight lines through everything"
    )
    straight_factor: Annotated[float, Field(strict=True, ge=1)] = Field(
        default=1.0, description="what straight distances are multiplied by, where distance is straight"
    )
    truck: HaulTruck | None = Field(default=None, description="the hauling trucks; loads are counted where given")
    cost: NotNegative = Field(default=1.0, description="money per t·km of dry mass (us: per ton·mile)")
    cost_by: Literal["distance", "time"] = Field(
        default="distance", description="what the plan costs: haul by cost, or truck hours by truck.hour_cost"
    )
    rule: tuple[FillRule, ...] = Field(default=(), description="which materials may go into which fill")


class Stockpile(Section):
    """A place where earth waits for its fill, or stays."""

    name: Text = Field(description="name of the place")
    at: Point = Field(description="easting and northing, in CRS units")
    capacity: PositiveSoilVolume | None = Field(
        default=None, description="most that it holds, loose; default: no limit"
    )
    rehandling: NotNegative = Field(default=0.0, description="money per loose volume that is loaded again")


class Phases(Section):
    """The order of the work: each phase is dug and filled before the next."""

    area: Area = Field(description="polygons of the phases; ground outside all belongs to the first")
    order: Text = Field(default="phase", description="attribute with a number or a date, the earliest first")


class Baseline(Section):
    """The line of the mass curve."""

    line: Area = Field(description="one line, in the direction of rising stations")
    interval: Length = Field(default=20.0, description="distance between stations")
    start: Shift = Field(default=0.0, description="station of its first point, as a length")
    width: Distance | None = Field(default=None, description="ground farther off the line does not count; default: all")
    station: Length | None = Field(
        default=None, description="the station that overhaul is paid by; default: 100 m (us: 100 ft)"
    )
    freehaul: Distance | None = Field(default=None, description="distance that is hauled without extra pay")
    overhaul_price: PositiveNumber | None = Field(
        default=None, description="money per bank volume and station of overhaul"
    )
    borrow_cost: NotNegative | None = Field(
        default=None, description="money per bank volume for borrow with the waste it causes; for the economic limit"
    )


class Borrow(Section):
    """A place that soil can be bought from."""

    name: Text = Field(description="name of the place")
    at: Point = Field(description="easting and northing, in CRS units")
    material: Text = Field(description="material that it gives")
    capacity: PositiveSoilVolume | None = Field(default=None, description="most that it gives, bank; default: no limit")
    price: Number = Field(default=0.0, description="money per unit of price_per; negative where the pit pays")
    price_per: Literal["bank", "loose", "mass"] = Field(
        default="bank", description="what the price is for: bank volume, loose volume, or dry mass"
    )
    opening: NotNegative = Field(default=0.0, description="money for using it at all")


class Disposal(Section):
    """A place that soil can be brought to."""

    name: Text = Field(description="name of the place")
    at: Point = Field(description="easting and northing, in CRS units")
    accepts: tuple[Text, ...] | None = Field(
        default=None, min_length=1, description="materials that it takes; default: any"
    )
    capacity: PositiveSoilVolume | None = Field(
        default=None, description="most that it takes, loose; default: no limit"
    )
    price: Number = Field(default=0.0, description="money per loose volume; negative where it pays")
    opening: NotNegative = Field(default=0.0, description="money for using it at all")

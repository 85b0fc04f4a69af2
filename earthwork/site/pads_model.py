"""Tables of the site file about pads: what they stand on, settlement, keys and benches."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated

from pydantic import Field, field_validator, model_validator

from earthwork.site.base import Area, Section
from earthwork.site.values import (
    AnyPercent,
    Distance,
    Elevation,
    Length,
    NotNegative,
    Percent,
    PositiveNumber,
    PositiveStress,
    Shift,
    Stress,
    Text,
    Thickness,
)


class Settlement(Section):
    """Tests for the settlement screen, instead of percentages. Figures hold for the fill as it will be placed."""

    creep_percent: tuple[Percent, Percent] | None = Field(
        default=None, description="creep in a tenfold of time, low and high, % of fill thickness"
    )
    creep_from: PositiveNumber = Field(
        default=30.0, description="when the building is begun, days after the fill is half placed"
    )
    life: PositiveNumber = Field(default=50.0, description="life of the building, years")
    allowed: Length | None = Field(
        default=None, description="creep that the building may see; gives the wait before building"
    )
    wetting: tuple[tuple[Stress, AnyPercent], ...] | None = Field(
        default=None,
        min_length=2,
        description="wetted oedometer tests: vertical stress, and strain on wetting in % (+ compression, − swell)",
    )
    modulus: PositiveStress | None = Field(
        default=None, description="constrained modulus of the fill, for its compression while it is placed"
    )

    @model_validator(mode="after")
    def _something(self) -> Settlement:
        if self.creep_percent is None and self.wetting is None and self.modulus is None:
            raise ValueError("give creep_percent, wetting or modulus")
        if self.creep_percent is not None and self.creep_percent[0] > self.creep_percent[1]:
            raise ValueError("give the lower creep_percent first")
        if self.allowed is not None and self.creep_percent is None:
            raise ValueError("give creep_percent with allowed: the wait follows from the creep rate")
        stresses = [test[0] for test in self.wetting or ()]
        if any(b <= a for a, b in pairwise(stresses)):
            raise ValueError("give the wetting tests in rising order of stress")
        return self


class Pads(Section):
    """What each building pad stands on, and the rules it is judged by."""

    area: Area = Field(description="polygons of the pads")
    name: Text = Field(default="name", description="attribute with the pad's name")
    building: Area | None = Field(default=None, description="buildings; where given, pads are judged under them")
    building_margin: Distance = Field(default=1.5, description="judged this far around a building")
    deep_fill: Length = Field(
        default=6.0, description="95th percentile of fill thickness at and over which fill is deep"
    )
    differential_fill: Length = Field(default=3.0, description="difference in fill thickness that is flagged")
    transition_share: Percent = Field(default=2.0, description="both cut and fill over this share: a transition pad")
    blanket: Thickness = Field(default=0.9, description="least fill under the whole footprint that mends a transition")
    blanket_ratio: Annotated[float, Field(strict=True, ge=0, le=1)] = Field(
        default=0.33, description="or this share of the greatest thickness, whichever is more"
    )
    settlement_percent: tuple[Percent, Percent] | None = Field(
        default=None, description="settlement after construction, low and high, % of fill thickness"
    )
    distortion_limit: PositiveNumber = Field(default=500, description="x of the allowable angular distortion, 1 in x")
    gauge_length: Length = Field(default=6.0, description="length over which distortion is measured")
    settlement: Settlement | None = Field(
        default=None, description="tests for the settlement screen, instead of settlement_percent"
    )

    @model_validator(mode="after")
    def _one_settlement(self) -> Pads:
        if self.settlement is not None and self.settlement_percent is not None:
            tests = self.settlement.creep_percent is not None or self.settlement.wetting is not None
            if tests:
                raise ValueError("give settlement_percent, or creep and wetting under settlement, not both")
        if self.settlement_percent is not None and self.settlement_percent[0] > self.settlement_percent[1]:
            raise ValueError("give the lower settlement_percent first")
        return self


class Keys(Section):
    """Keys and benches where fill is built on steep ground; counted as soil dug and refilled when asked for."""

    steeper_than: PositiveNumber = Field(default=5.0, description="ground steeper than this ratio H:V is benched")
    least_height: Length = Field(default=1.5, description="where the fill is at least this high")
    width: Length = Field(default=3.0, description="width of the key at the toe")
    depth: Thickness = Field(default=0.6, description="its depth at the outer edge")
    tilt_percent: NotNegative = Field(default=2.0, description="its fall into the slope, percent")
    bench_width: Length = Field(default=3.0, description="width of the benches above it")
    count: bool = Field(default=False, description="count them in the balance as dug and refilled")


class PadLimit(Section):
    """How low and high one pad may lie."""

    pad: Text = Field(description="name of the pad")
    lowest: Elevation | None = Field(default=None, description="lowest elevation; default: that of the range")
    highest: Elevation | None = Field(default=None, description="highest elevation; default: that of the range")


class PadStep(Section):
    """How much two pads may differ."""

    between: tuple[Text, Text] = Field(description="names of the two pads")
    greatest: Thickness = Field(description="greatest difference of their elevations")

    @field_validator("between")
    @classmethod
    def _two(cls, names: tuple[str, str]) -> tuple[str, str]:
        if names[0] == names[1]:
            raise ValueError("name two pads that differ")
        return names


class PadMoves(Section):
    """Lets the balance give each pad of a [design] its own grade, at least cost."""

    range: tuple[Shift, Shift] = Field(default=(-1.5, 1.5), description="lowest and highest shift of any pad, + up")
    fixed: tuple[Text, ...] = Field(default=(), description="names of pads that stay")
    groups: tuple[tuple[Text, ...], ...] = Field(default=(), description="lists of pads that move together")
    limit: tuple[PadLimit, ...] = Field(default=(), description="limits of single pads")
    greatest_step: Thickness | None = Field(
        default=None, description="greatest difference between neighbours; default: any"
    )
    neighbours_within: Distance = Field(default=30.0, description="pads this near each other are neighbours")
    step: tuple[PadStep, ...] = Field(default=(), description="differences between single pads")
    average_distance: Length | None = Field(
        default=None, description="haul on the site; default: between the centres of cut and of fill"
    )
    import_cost: NotNegative | None = Field(
        default=None, description="money per compacted volume brought; default: price and haul from the first borrow"
    )
    export_cost: NotNegative | None = Field(
        default=None,
        description="money per compacted volume taken away; default: price and haul to the first disposal",
    )
    dig_cost: NotNegative = Field(default=0.0, description="money per bank volume dug")
    fill_cost: NotNegative = Field(default=0.0, description="money per compacted volume placed")

    @model_validator(mode="after")
    def _ordered(self) -> PadMoves:
        if self.range[0] > self.range[1]:
            raise ValueError("give the lower end of range first")
        for limit in self.limit:
            if limit.lowest is not None and limit.highest is not None and limit.lowest > limit.highest:
                raise ValueError(f'give a lowest under the highest of pad "{limit.pad}"')
        names = [name for group in self.groups for name in group]
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f'give pad "{name}" in one group only')
        return self

"""Tables of the site file about pads: what they stand on, settlement, keys and benches."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated

from pydantic import Field, model_validator

from earthwork.site.base import Area, Section
from earthwork.site.values import (
    AnyPercent,
    Distance,
    Length,
    NotNegative,
    Percent,
    PositiveNumber,
    PositiveStress,
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

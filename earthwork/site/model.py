"""The site file as typed, frozen models. All quantities are SI once a model exists; see docs/site-file.md."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Discriminator, Field, Tag, model_validator

from earthwork.site.values import (
    AnyPercent,
    Density,
    Distance,
    Elevation,
    Evaporation,
    Flow,
    GroundArea,
    Length,
    Mass,
    Minutes,
    NotNegative,
    Number,
    Percent,
    Point,
    PositiveFlow,
    PositiveHours,
    PositiveNumber,
    PositiveSoilVolume,
    PositiveWaterVolume,
    Shift,
    SoilVolume,
    Text,
    Thickness,
    WaterContent,
    WaterDepth,
    WaterVolume,
    Whole,
)


class Section(BaseModel):
    """A table of the site file: unknown keys are errors, and nothing changes after the check."""

    model_config = ConfigDict(extra="forbid", frozen=True)


# --- surfaces and areas ------------------------------------------------------------------------------------------


class RasterSurface(Section):
    """Elevations from a raster file."""

    file: Text
    band: Whole = 1
    nodata: Number | None = None
    vertical_unit: Literal["m", "ft", "ftUS"] | None = None
    sample: Literal["cell", "node"] = "cell"


class LevelSurface(Section):
    """One elevation everywhere."""

    level: Elevation


class Plane(Section):
    """A tilted plane through a point."""

    at: Point
    elevation: Elevation
    slope: tuple[Number, Number] = Field(description="rise per unit east, rise per unit north")


class PlaneSurface(Section):
    """A tilted plane everywhere."""

    plane: Plane


def _surface_table(value: Any) -> Any:
    return {"file": value} if isinstance(value, str) else value


def _surface_kind(value: Any) -> str:
    if isinstance(value, dict):
        return "level" if "level" in value else "plane" if "plane" in value else "raster"
    return {"LevelSurface": "level", "PlaneSurface": "plane"}.get(type(value).__name__, "raster")


def _one_surface(value: Any) -> Any:
    """Turn a file name into a table and say at once which kind of surface a table is."""
    value = _surface_table(value)
    if not isinstance(value, dict | Section):
        raise ValueError("it must be a file name, or a table with file, level or plane")
    return value


SurfaceSpec = Annotated[
    Annotated[RasterSurface, Tag("raster")] | Annotated[LevelSurface, Tag("level")] | Annotated[PlaneSurface, Tag("plane")],
    Discriminator(_surface_kind),
    BeforeValidator(_one_surface),
]


class AreaSpec(Section):
    """Polygons (or lines) of a vector file."""

    file: Text
    layer: Text | None = None
    where: Text | None = Field(default=None, description="attribute filter in OGR SQL, such as \"phase = 1\"")


def _area_table(value: Any) -> Any:
    return {"file": value} if isinstance(value, str) else value


Area = Annotated[AreaSpec, BeforeValidator(_area_table)]


# --- ground ------------------------------------------------------------------------------------------------------


class SiteSection(Section):
    name: Text
    units: Literal["metric", "us"]
    crs: Text | None = Field(default=None, description="only where a surface carries none")


class Ground(Section):
    existing: SurfaceSpec
    finished: SurfaceSpec | None = None
    limits: Area | None = Field(default=None, description="only ground inside counts")
    disturbed: Area | None = None
    cell: Length | None = Field(default=None, description="analysis cell, in ground length of the CRS's unit")
    ground_scale: PositiveNumber | Literal["auto"] = "auto"


class Design(Section):
    """Pads built with side slopes that daylight on the existing ground."""

    pads: Area
    name: Text = "name"
    elevation: Text = "elevation"
    elevation_is: Literal["finished", "subgrade"]
    cut_slope: PositiveNumber = Field(description="H:V")
    fill_slope: PositiveNumber = Field(description="H:V")


class Zones(Section):
    area: Area
    name: Text = "name"


class Strip(Section):
    material: Text
    depth: Thickness
    area: Area | None = Field(default=None, description="default: the disturbed area")


class LaidSection(Section):
    """What is laid on the subgrade: pavement, slab and base, respread topsoil."""

    name: Text
    thickness: Thickness
    area: Area | None = Field(default=None, description="default: the disturbed area")
    source: Text = Field(default="imported", description='"imported", or a material of the site')


class OverExcavation(Section):
    name: Text
    depth: Thickness | None = None
    bottom: SurfaceSpec | None = None
    measured_from: Literal["lower", "subgrade", "stripped"] = "lower"
    spread: Distance = 0.0
    area: Area | None = Field(default=None, description="default: the disturbed area")

    @model_validator(mode="after")
    def _depth_or_bottom(self) -> OverExcavation:
        if (self.depth is None) == (self.bottom is None):
            raise ValueError("give either depth or bottom")
        return self


class Scarify(Section):
    depth: Thickness
    area: Area | None = Field(default=None, description="default: under fill")


class Allowance(Section):
    name: Text
    material: Text
    volume: SoilVolume = Field(description="+ adds soil to the site, − takes it")
    state: Literal["bank", "loose", "compacted"] = "bank"
    at: Point | None = None


class Stratum(Section):
    material: Text
    bottom: SurfaceSpec | None = None
    thickness: Thickness | None = None

    @model_validator(mode="after")
    def _not_both(self) -> Stratum:
        if self.bottom is not None and self.thickness is not None:
            raise ValueError("give bottom or thickness, not both")
        return self


# --- soils -------------------------------------------------------------------------------------------------------


class BankState(Section):
    """Soil as it lies in the ground: direct figures, or a file of density tests."""

    dry_density: Density | None = None
    moist_density: Density | None = None
    water_content: WaterContent | None = None
    tests: Text | None = None


class LooseState(Section):
    dry_density: Density | None = None
    swell_percent: Percent | None = None

    @model_validator(mode="after")
    def _not_both(self) -> LooseState:
        if self.dry_density is not None and self.swell_percent is not None:
            raise ValueError("give dry_density or swell_percent, not both")
        return self


class Proctor(Section):
    method: Text = Field(description="the standard, such as ASTM D698 or ASTM D1557")
    max_dry_density: Density | None = None
    optimum_water_content: WaterContent | None = None
    tests: Text | None = None


class Oversize(Section):
    percent: Percent = 0.0
    specific_gravity: Annotated[float, Field(strict=True, ge=2.0, le=4.0)] = 2.65
    water_content: Percent = 1.0


class FillState(Section):
    """What rock and other soils without a compaction test become."""

    dry_density: Density


class Material(Section):
    use: Literal["fill", "rock", "topsoil", "waste"]
    specific_gravity: Annotated[float, Field(strict=True, ge=2.0, le=4.0)] | None = None
    bank: BankState = BankState()
    loose: LooseState = LooseState()
    proctor: Proctor | None = None
    oversize: Oversize | None = None
    fill: FillState | None = None
    shrink_percent_of_bank: tuple[AnyPercent, AnyPercent] | None = Field(
        default=None, description="low and high; negative for bulking; labelled as assumed"
    )
    loss_percent: Percent = Field(default=0.0, description="of dry mass, in digging and hauling")


class ByDepth(Section):
    below: Length
    measured_from: Literal["finished", "subgrade"] = "finished"
    relative_compaction: Annotated[float, Field(strict=True, ge=50, le=120)]
    expected_compaction: Annotated[float, Field(strict=True, ge=50, le=120)] | None = None


class Fill(Section):
    relative_compaction: Annotated[float, Field(strict=True, ge=50, le=120)] = Field(description="required, % of maximum")
    expected_compaction: Annotated[float, Field(strict=True, ge=50, le=120)] | None = None
    water_content_offset: Number = Field(default=0.0, description="target, points from optimum")
    water_content_window: tuple[Number, Number] | None = None
    lift_thickness: Length | None = Field(default=None, description="compacted")
    loose_lift_thickness: Length | None = None
    by_depth: tuple[ByDepth, ...] = ()


# --- plan --------------------------------------------------------------------------------------------------------


class Balance(Section):
    target_surplus: SoilVolume = 0.0
    step: Length = 0.01
    shift_area: Area | None = Field(default=None, description="default: the disturbed area")
    shift_range: tuple[Shift, Shift] = (-3.0, 3.0)


class Dust(Section):
    area: GroundArea
    rate: WaterDepth
    passes_per_day: NotNegative


class Supply(Section):
    flow: Flow
    hours: PositiveHours = 24.0


class Tank(Section):
    volume: PositiveWaterVolume
    at_start: WaterVolume | None = None


class WaterTruck(Section):
    capacity: PositiveWaterVolume
    fill_flow: PositiveFlow | None = None
    bays: Whole = 1
    travel_time: Minutes = Field(description="minutes, out and back")
    spread_time: Minutes
    efficiency: Annotated[float, Field(strict=True, gt=0, le=1)] = 1.0


class Water(Section):
    placing_rate: PositiveSoilVolume
    work_hours: PositiveHours = 10.0
    evaporation: Evaporation = 0.0
    open_area: GroundArea | None = None
    waste_percent: Percent = 0.0
    dust: Dust | None = None
    supply: Supply
    tank: Tank | None = None
    truck: WaterTruck | None = None


class HaulTruck(Section):
    heaped_volume: PositiveSoilVolume
    payload: Mass


class Haul(Section):
    block: Length = 50.0
    barriers: Area | None = None
    truck: HaulTruck | None = None
    cost: NotNegative = 1.0


class Borrow(Section):
    name: Text
    at: Point
    material: Text
    capacity: PositiveSoilVolume | None = None
    price: Number = 0.0
    price_per: Literal["bank", "loose", "mass"] = "bank"


class Disposal(Section):
    name: Text
    at: Point
    accepts: tuple[Text, ...] | None = None
    capacity: PositiveSoilVolume | None = None
    price: Number = 0.0


class Pads(Section):
    area: Area
    name: Text = "name"
    building: Area | None = None
    building_margin: Distance = 1.5
    deep_fill: Length = 6.0
    differential_fill: Length = 3.0
    transition_share: Percent = 2.0
    blanket: Thickness = 0.9
    blanket_ratio: Annotated[float, Field(strict=True, ge=0, le=1)] = 0.33
    settlement_percent: tuple[Percent, Percent] | None = None
    distortion_limit: PositiveNumber = 500
    gauge_length: Length = 6.0


class SiteModel(Section):
    """A whole site file."""

    site: SiteSection
    ground: Ground
    design: Design | None = None
    zones: Zones | None = None
    strip: tuple[Strip, ...] = ()
    section: tuple[LaidSection, ...] = ()
    over_excavation: tuple[OverExcavation, ...] = ()
    scarify: tuple[Scarify, ...] = ()
    allowance: tuple[Allowance, ...] = ()
    stratum: tuple[Stratum, ...] = ()
    material: dict[str, Material] = {}
    fill: Fill | None = None
    balance: Balance = Balance()
    water: Water | None = None
    haul: Haul | None = None
    borrow: tuple[Borrow, ...] = ()
    disposal: tuple[Disposal, ...] = ()
    pads: Pads | None = None

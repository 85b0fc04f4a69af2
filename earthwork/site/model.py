"""The site file as typed, frozen models. All quantities are SI once a model exists; see docs/site-file.md."""

from __future__ import annotations

from pydantic import Field

from earthwork.site.base import (
    Area,
    AreaSpec,
    LevelSurface,
    Plane,
    PlaneSurface,
    RasterSurface,
    Section,
    SurfaceSpec,
)
from earthwork.site.ground_model import (
    Allowance,
    Design,
    Ground,
    LaidSection,
    OverExcavation,
    Scarify,
    SiteSection,
    Stratum,
    Strip,
    Zones,
)
from earthwork.site.haul_model import (
    Baseline,
    Borrow,
    Disposal,
    FillRule,
    Haul,
    HaulTruck,
    Phases,
    Roads,
    Stockpile,
)
from earthwork.site.pads_model import Keys, Pads, Settlement
from earthwork.site.plan_model import (
    Balance,
    Dust,
    Supply,
    Tank,
    Water,
    WaterTruck,
)
from earthwork.site.soil_model import (
    BankState,
    ByDepth,
    Fill,
    FillState,
    LooseState,
    Material,
    Oversize,
    Proctor,
)
from earthwork.site.work_model import (
    Calendar,
    Drying,
    Moisture,
    Plant,
    Roller,
    Surface,
    Weather,
)


class SiteModel(Section):
    """A whole site file."""

    site: SiteSection = Field(description="name and units")
    ground: Ground = Field(description="the two surfaces")
    design: Design | None = Field(
        default=None, description="pads built with side slopes, instead of a finished surface"
    )
    zones: Zones | None = Field(default=None, description="a partition to report by")
    strip: tuple[Strip, ...] = Field(default=(), description="stripping")
    section: tuple[LaidSection, ...] = Field(default=(), description="what is laid on the subgrade")
    over_excavation: tuple[OverExcavation, ...] = Field(default=(), description="ground dug out and refilled")
    scarify: tuple[Scarify, ...] = Field(default=(), description="ground recompacted in place")
    allowance: tuple[Allowance, ...] = Field(default=(), description="soil that no surface shows")
    stratum: tuple[Stratum, ...] = Field(default=(), description="layers of the ground, from the top")
    material: dict[str, Material] = Field(default={}, description="soils, by name")
    fill: Fill | None = Field(default=None, description="how the fill is compacted")
    balance: Balance = Field(default=Balance(), description="what the balance aims at")
    water: Water | None = Field(default=None, description="compaction water")
    calendar: Calendar = Field(default=Calendar(), description="which days are worked")
    weather: Weather | None = Field(default=None, description="weather that dries the ground and stops work")
    moisture: Moisture = Field(default=Moisture(), description="how soil comes to its target water content")
    plant: Plant = Field(default=Plant(), description="digging and hauling plant")
    roller: tuple[Roller, ...] = Field(default=(), description="rollers")
    haul: Haul | None = Field(default=None, description="how earth is moved")
    borrow: tuple[Borrow, ...] = Field(default=(), description="places that give soil")
    disposal: tuple[Disposal, ...] = Field(default=(), description="places that take soil")
    stockpile: tuple[Stockpile, ...] = Field(default=(), description="places where soil waits")
    phases: Phases | None = Field(default=None, description="the order of the work")
    baseline: Baseline | None = Field(default=None, description="the line of the mass curve")
    pads: Pads | None = Field(default=None, description="what building pads stand on")
    keys: Keys = Field(default=Keys(), description="keys and benches of fills on steep ground")


__all__ = [
    "Allowance",
    "Area",
    "AreaSpec",
    "Balance",
    "BankState",
    "Baseline",
    "Borrow",
    "ByDepth",
    "Calendar",
    "Design",
    "Disposal",
    "Drying",
    "Dust",
    "Fill",
    "FillRule",
    "FillState",
    "Ground",
    "Haul",
    "HaulTruck",
    "Keys",
    "LaidSection",
    "LevelSurface",
    "LooseState",
    "Material",
    "Moisture",
    "OverExcavation",
    "Oversize",
    "Pads",
    "Phases",
    "Plane",
    "PlaneSurface",
    "Plant",
    "Proctor",
    "RasterSurface",
    "Roads",
    "Roller",
    "Scarify",
    "Section",
    "Settlement",
    "SiteModel",
    "SiteSection",
    "Stockpile",
    "Stratum",
    "Strip",
    "Supply",
    "Surface",
    "SurfaceSpec",
    "Tank",
    "Water",
    "WaterTruck",
    "Weather",
    "Zones",
]  # fmt: skip

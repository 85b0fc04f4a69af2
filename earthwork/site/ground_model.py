"""Tables of the site file that say where the ground lies, and what is taken from it or laid on it."""

from __future__ import annotations

import math
from itertools import pairwise
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, model_validator

from earthwork.site.base import Area, Section, SurfaceSpec
from earthwork.site.values import (
    Distance,
    Elevation,
    Length,
    Percent,
    Point,
    PositiveNumber,
    SlopeRatio,
    SoilVolume,
    Text,
    Thickness,
)

_DISTURBED = "where; default: the disturbed area"


class SiteSection(Section):
    """What the site is called, and the units of its numbers."""

    name: Text = Field(description="name of the site, as printed on everything")
    units: Literal["metric", "us"] = Field(description="units of plain numbers here and of what is printed")
    crs: Text | None = Field(
        default=None,
        description='such as "EPSG:32611"; only where a surface carries no coordinate reference system',
    )


class SurveyError(Section):
    """How well the surfaces are known: standard deviations of the elevations of the survey.

    Where both surfaces are surveys, give the values of their difference.
    """

    noise: Distance = Field(default=0.0, description="independent in each cell")
    correlated: Distance = Field(default=0.0, description="shared by neighbours, over the range")
    range: Length = Field(default=50.0, description="distance over which the correlated part is shared, in ground length")
    bias: Distance = Field(default=0.0, description="common to the whole survey")


def _ground_scale(value: Any) -> Any:
    """Refuse in one go what is neither of the two that it may be."""
    number = isinstance(value, int | float) and not isinstance(value, bool)
    if value != "auto" and not (number and 0 < value < math.inf):
        raise ValueError('it must be a number over 0, or "auto"')
    return value


GroundScale = Annotated[PositiveNumber | Literal["auto"], BeforeValidator(_ground_scale)]


class Ground(Section):
    """The two surfaces and the ground between them that counts."""

    existing: SurfaceSpec = Field(description="ground as surveyed")
    finished: SurfaceSpec | None = Field(
        default=None, description="proposed finished grade; required where there is no [design]"
    )
    limits: Area | None = Field(
        default=None, description="only ground inside counts; default: where both surfaces have data"
    )
    disturbed: Area | None = Field(
        default=None,
        description="bounds stripping and the grade shift; default: pads and slopes of a design, else where "
        "the surfaces differ by more than 1 cm, with the areas of sections and over-excavations",
    )
    cell: Length | None = Field(
        default=None,
        description="side of the analysis cell, on the map; default: that of the finer raster, on its own grid",
    )
    survey_error: SurveyError | None = Field(
        default=None, description="error of the survey, which gives the error of the volumes"
    )
    ground_scale: GroundScale = Field(
        default="auto", description='ground length / map length; "auto": from the CRS and the mean elevation'
    )


class RoadProfile(Section):
    """Elevations along one road, where its line carries none."""

    road: Text = Field(description="name of the road")
    points: tuple[tuple[Distance, Elevation], ...] = Field(
        min_length=2, description="distance from the start of the line, and elevation; straight in between"
    )

    @model_validator(mode="after")
    def _rising(self) -> RoadProfile:
        at = [point[0] for point in self.points]
        if any(b <= a for a, b in pairwise(at)):
            raise ValueError("give the points in order of distance, each farther than the one before")
        return self


class DesignRoads(Section):
    """Roads and ramps as prisms along lines; they end where they enter a pad."""

    lines: Area = Field(description="lines of the crowns; their vertices carry elevations, or profile does")
    name: Text = Field(default="name", description="attribute with the road's name")
    width: Length = Field(description="whole width")
    own_width: Text | None = Field(default=None, description="attribute with a road's own width, where it differs")
    crossfall: Percent = Field(default=0.0, description="fall across the road, percent")
    falls: Literal["both sides", "left to right"] = Field(
        default="both sides", description="from the crown to both sides, or all across, seen along the line"
    )
    profile: tuple[RoadProfile, ...] = Field(default=(), description="elevations along roads whose lines have none")


class Design(Section):
    """Instead of ground.finished: pads built with side slopes that daylight on the existing ground."""

    pads: Area = Field(description="polygons of the pads; they must not overlap")
    name: Text = Field(default="name", description="attribute with the pad's name")
    elevation: Text = Field(default="elevation", description="attribute with its elevation, in the site's unit")
    elevation_is: Literal["finished", "subgrade"] = Field(
        description="which surface the elevations give; with subgrade, sections are laid on top of what is built"
    )
    elevation_from: Literal["attribute", "vertices"] = Field(
        default="attribute", description="or the heights of the polygons' vertices, triangles in between"
    )
    fall: Text | None = Field(
        default=None, description="attribute with the fall of a tilted pad, percent; the elevation is at its centroid"
    )
    fall_direction: Text | None = Field(
        default=None, description="attribute with where it falls to, degrees clockwise from grid north"
    )
    cut_slope: SlopeRatio = Field(description="horizontal run per unit of height, in cut")
    fill_slope: SlopeRatio = Field(description="horizontal run per unit of height, in fill")
    own_cut_slope: Text | None = Field(default=None, description="attribute with a pad's own cut slope")
    own_fill_slope: Text | None = Field(default=None, description="attribute with a pad's own fill slope")
    corners: Literal["round", "mitred"] = Field(
        default="round", description="slopes run around convex corners as cones, or meet in a line"
    )
    bench_every: Length | None = Field(default=None, description="height between benches in slopes; default: none")
    bench_width: Length | None = Field(default=None, description="width of the level benches")
    retaining: Area | None = Field(
        default=None, description="lines along the edges of pads over which no slope may spread"
    )
    roads: DesignRoads | None = Field(default=None, description="roads and ramps")

    @model_validator(mode="after")
    def _pairs(self) -> Design:
        if (self.bench_every is None) != (self.bench_width is None):
            raise ValueError("give bench_every and bench_width together")
        if (self.fall is None) != (self.fall_direction is None):
            raise ValueError("give fall and fall_direction together")
        if self.elevation_from == "vertices" and self.fall is not None:
            raise ValueError("give elevations by vertices, or one elevation and a fall, not both")
        return self


class Zones(Section):
    """Any partition to report by: phases, lots, bid items. Zones must not overlap."""

    area: Area = Field(description="polygons of the zones")
    name: Text = Field(default="name", description="attribute with the zone's name; equal names are one zone")


class Strip(Section):
    """What is stripped before the earthwork: topsoil, or removed pavement. Not part of cut."""

    material: Text = Field(description="material that is stripped")
    depth: Thickness = Field(description="depth of stripping")
    area: Area | None = Field(default=None, description=_DISTURBED)


class LaidSection(Section):
    """What is laid on the subgrade: pavement, slab and base, respread topsoil."""

    name: Text = Field(description="name of the section")
    thickness: Thickness = Field(description="whole thickness, from subgrade to finished grade")
    area: Area | None = Field(default=None, description=_DISTURBED)
    source: Text = Field(default="imported", description='"imported", or a material of the site')


class OverExcavation(Section):
    """Ground dug out below the lower surface and refilled. Where several overlap, the deepest counts."""

    name: Text = Field(description="name of the over-excavation")
    depth: Thickness | None = Field(default=None, description="its depth")
    bottom: SurfaceSpec | None = Field(default=None, description="or its bottom as a surface")
    measured_from: Literal["lower", "subgrade", "stripped"] = Field(
        default="lower",
        description="the depth is measured from the lower of stripped ground and subgrade, or from one",
    )
    spread: Distance = Field(default=0.0, description="how far it goes beyond the area, horizontally")
    area: Area | None = Field(default=None, description=_DISTURBED)

    @model_validator(mode="after")
    def _depth_or_bottom(self) -> OverExcavation:
        if (self.depth is None) == (self.bottom is None):
            raise ValueError("give either depth or bottom")
        return self


class Scarify(Section):
    """Ground loosened and recompacted in place; it costs depth × (1 − shrinkage factor) of compacted soil."""

    depth: Thickness = Field(description="depth that is loosened")
    area: Area | None = Field(default=None, description="where; default: under fill")


class Allowance(Section):
    """Soil that no surface shows: trench, footing and pool spoil, demolition, a neighbour's import."""

    name: Text = Field(description="name of the allowance")
    material: Text = Field(description="its material")
    volume: SoilVolume = Field(description="+ adds soil to the site, − takes it")
    state: Literal["bank", "loose", "compacted"] = Field(default="bank", description="state of the volume")
    at: Point | None = Field(default=None, description="easting and northing where it lies, in CRS units")


class Stratum(Section):
    """A layer of the ground, listed from the existing ground down; the last one has no bottom."""

    material: Text = Field(description="its material")
    bottom: SurfaceSpec | None = Field(default=None, description="its lower boundary as a surface")
    thickness: Thickness | None = Field(default=None, description="or its thickness below the stratum above")

    @model_validator(mode="after")
    def _not_both(self) -> Stratum:
        if self.bottom is not None and self.thickness is not None:
            raise ValueError("give bottom or thickness, not both")
        return self

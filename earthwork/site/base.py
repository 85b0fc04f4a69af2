"""What every table of the site file is made of: strict sections, surfaces and areas."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Discriminator, Field, GetJsonSchemaHandler, Tag

from earthwork.site.values import Elevation, FileName, Number, Point, Text, Whole


class Section(BaseModel):
    """A table of the site file: unknown keys are errors, and nothing changes after the check."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class OrFileName:
    """In the JSON Schema, a file name stands for a table that has nothing but ``file``."""

    def __get_pydantic_json_schema__(self, core_schema: Any, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        table = handler(core_schema)
        return {"anyOf": [{"type": "string", "minLength": 1}, *table.get("oneOf", [table])]}


class RasterSurface(Section):
    """Elevations from a raster file."""

    file: FileName = Field(description="any raster that GDAL reads, relative to the site file")
    band: Whole = Field(default=1, description="band of the file, from 1")
    nodata: Number | None = Field(default=None, description="value for no data, where the file does not say")
    vertical_unit: Literal["m", "ft", "ftUS"] | None = Field(
        default=None,
        description="unit of the elevations; default: that of the band, the vertical CRS or the CRS",
    )
    sample: Literal["cell", "node"] = Field(
        default="cell", description="what a value stands for: its cell, or the grid node it was surveyed at"
    )


class LevelSurface(Section):
    """One elevation everywhere."""

    level: Elevation = Field(description="the elevation")


class Plane(Section):
    """A tilted plane through a point."""

    at: Point = Field(description="easting and northing of a point of the plane, in CRS units")
    elevation: Elevation = Field(description="elevation of the plane at that point")
    slope: tuple[Number, Number] = Field(description="rise per unit east, rise per unit north")


class PlaneSurface(Section):
    """A tilted plane everywhere."""

    plane: Plane = Field(description="a point of the plane and its slopes")


_SURFACE_TYPES = {"LevelSurface": "level", "PlaneSurface": "plane"}


def _surface_kind(value: Any) -> str:
    if isinstance(value, dict):
        return "level" if "level" in value else "plane" if "plane" in value else "raster"
    return _SURFACE_TYPES.get(type(value).__name__, "raster")


def _one_surface(value: Any) -> Any:
    """Turn a file name into a table, and refuse at once what cannot be a surface."""
    if isinstance(value, str):
        return {"file": value}
    if not isinstance(value, dict | Section):
        raise ValueError("it must be a file name, or a table with file, level or plane")
    given = [key for key in ("file", "level", "plane") if isinstance(value, dict) and key in value]
    if len(given) > 1:
        raise ValueError(f"give one of file, level and plane, not {' and '.join(given)}")
    return value


SurfaceSpec = Annotated[
    Annotated[RasterSurface, Tag("raster")]
    | Annotated[LevelSurface, Tag("level")]
    | Annotated[PlaneSurface, Tag("plane")],
    Discriminator(_surface_kind),
    BeforeValidator(_one_surface),
    OrFileName(),
]


class AreaSpec(Section):
    """Polygons (or lines) of a vector file."""

    file: FileName = Field(description="GeoPackage, GeoJSON, Shapefile, …, relative to the site file")
    layer: Text | None = Field(default=None, description="layer of the file; needed where it has several")
    where: Text | None = Field(default=None, description='attribute filter in OGR SQL, such as "phase = 1"')


def _area_table(value: Any) -> Any:
    """Turn a file name into a table, and refuse at once what cannot be an area."""
    if isinstance(value, str):
        return {"file": value}
    if not isinstance(value, dict | Section):
        raise ValueError("it must be a file name, or a table with file")
    return value


Area = Annotated[AreaSpec, BeforeValidator(_area_table), OrFileName()]

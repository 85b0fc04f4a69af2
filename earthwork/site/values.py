"""Types of the values in a site file: numbers in the site's units, or strings that carry their own unit.

Every type turns its value into SI while the file is checked; the unit system travels in the validation
context.
"""

from __future__ import annotations

import math
from typing import Annotated, Any

from pydantic import BeforeValidator, Field, ValidationInfo, WithJsonSchema

from earthwork.units import METRIC, US, UnitSystem, parse_quantity

#: A dry density in this range [kg/m³] is believed; outside it, the likely slip of unit is named.
_DENSITY_RANGE_KG_M3 = (500.0, 3500.0)


def _number(value: Any) -> float | None:
    """The finite float of a TOML number, None for anything else."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    if not math.isfinite(value):
        raise ValueError("it must be a finite number")
    return float(value)


def _converter(
    dimension: str, low: float | None = None, high: float | None = None, above: float | None = None
):
    def convert(value: Any, info: ValidationInfo) -> float:
        units: UnitSystem = (info.context or {}).get("units", METRIC)
        number = _number(value)
        if number is not None:
            si = units.to_si(number, dimension)
        elif isinstance(value, str):
            si = parse_quantity(value, dimension)
        else:
            raise ValueError(f"it must be a number in {units.label(dimension)}, or a string with its unit")
        for bound, broken, word in (
            (low, low is not None and si < low, "at least"),
            (high, high is not None and si > high, "at most"),
            (above, above is not None and si <= above, "more than"),
        ):
            if broken and bound is not None:
                raise ValueError(
                    f"it must be {word} {units.from_si(bound, dimension):g} {units.label(dimension)}"
                )
        return si

    return convert


def _quantity(dimension: str, what: str, **bounds: float | None) -> Any:
    schema = {
        "anyOf": [{"type": "number"}, {"type": "string"}],
        "description": what,
        "x-unit": [METRIC.unit(dimension), US.unit(dimension)],
    }
    return Annotated[float, BeforeValidator(_converter(dimension, **bounds)), WithJsonSchema(schema)]


Elevation = _quantity("length", "Elevation")
Shift = _quantity("length", "Vertical shift, + up")
Thickness = _quantity("length", "Thickness or depth, 0 or more", low=0.0)
Length = _quantity("length", "Length, more than 0", above=0.0)
Distance = _quantity("length", "Distance, 0 or more", low=0.0)
SoilVolume = _quantity("soil_volume", "Soil volume")
PositiveSoilVolume = _quantity("soil_volume", "Soil volume, more than 0", above=0.0)
GroundArea = _quantity("area", "Area, 0 or more", low=0.0)
Mass = _quantity("mass", "Mass, more than 0", above=0.0)
WaterVolume = _quantity("water_volume", "Volume of water, 0 or more", low=0.0)
PositiveWaterVolume = _quantity("water_volume", "Volume of water, more than 0", above=0.0)
WaterDepth = _quantity("water_depth", "Water on an area, 0 or more", low=0.0)
Flow = _quantity("flow", "Flow, 0 or more", low=0.0)
PositiveFlow = _quantity("flow", "Flow, more than 0", above=0.0)
Speed = _quantity("speed", "Speed, more than 0", above=0.0)
Power = _quantity("power", "Power, more than 0", above=0.0)
Minutes = _quantity("minutes", "Duration in minutes, 0 or more", low=0.0)
PositiveHours = _quantity("hours", "Duration in hours, more than 0 and at most 24", above=0.0, high=24.0)
Percent = _quantity("percent", "Percent, 0 to 100", low=0.0, high=100.0)
AnyPercent = _quantity("percent", "Percent")
Stress = _quantity("stress", "Stress, 0 or more", low=0.0)
PositiveStress = _quantity("stress", "Stress, more than 0", above=0.0)


def _evaporation(value: Any, info: ValidationInfo) -> float:
    try:
        return _converter("evaporation", low=0.0, high=30.0)(value, info)
    except ValueError as error:
        units: UnitSystem = (info.context or {}).get("units", METRIC)
        number = _number(value)
        if number is not None and units.name == "us" and 0 < number <= 30:
            raise ValueError(
                f'{error}; the number looks like mm/day: then write "{number:g} mm/day"'
            ) from None
        raise


def _density(value: Any, info: ValidationInfo) -> float:
    units: UnitSystem = (info.context or {}).get("units", METRIC)
    si = _converter("density", above=0.0)(value, info)
    low, high = _DENSITY_RANGE_KG_M3
    if low <= si <= high:
        return si
    least, most = units.from_si(low, "density"), units.from_si(high, "density")
    rule = f"it must be {least:.0f} to {most:.0f} {units.label('density')}"
    number = _number(value)
    if number is not None:
        for other, unit in (("lb/ft3", "lb/ft³"), ("kg/m3", "kg/m³"), ("t/m3", "t/m³"), ("kN/m3", "kN/m³")):
            if low <= parse_quantity(f"{number} {other}", "density") <= high and other != units.unit(
                "density"
            ):
                rule += f'; the number looks like {unit}: then write "{number:g} {other}"'
                break
    raise ValueError(rule)


def _water_content(value: Any, info: ValidationInfo) -> float:
    si = _converter("percent", low=0.0, high=300.0)(value, info)
    number = _number(value)
    if number is not None and 0 < number < 0.5:
        raise ValueError(
            "it must be percent of dry mass, and looks like a fraction: "
            f'write {number * 100:g} (or "{number:g} %" if it really is that dry)'
        )
    return si


_DENSITY_SCHEMA = {
    "anyOf": [{"type": "number"}, {"type": "string"}],
    "description": "Density, 500 to 3500 kg/m³",
    "x-unit": [METRIC.unit("density"), US.unit("density")],
}
_EVAPORATION_SCHEMA = {
    "anyOf": [{"type": "number"}, {"type": "string"}],
    "description": "Evaporation, 0 to 30 mm/day",
    "x-unit": [METRIC.unit("evaporation"), US.unit("evaporation")],
}
_WATER_SCHEMA = {
    "anyOf": [{"type": "number"}, {"type": "string"}],
    "description": "Water content, percent of dry mass",
    "x-unit": ["%", "%"],
}
Evaporation = Annotated[float, BeforeValidator(_evaporation), WithJsonSchema(_EVAPORATION_SCHEMA)]
Density = Annotated[float, BeforeValidator(_density), WithJsonSchema(_DENSITY_SCHEMA)]
WaterContent = Annotated[float, BeforeValidator(_water_content), WithJsonSchema(_WATER_SCHEMA)]


class InputFile:
    """Marks a value as the name of a file that the site reads (:func:`earthwork.site.inputs.named_files`)."""


Text = Annotated[str, Field(strict=True, min_length=1, pattern=r"\S")]
FileName = Annotated[str, Field(strict=True, min_length=1), InputFile()]
Whole = Annotated[int, Field(strict=True, ge=1)]
Coordinate = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Point = tuple[Coordinate, Coordinate]
Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
PositiveNumber = Annotated[float, Field(strict=True, gt=0, allow_inf_nan=False)]
#: H:V. A steeper face than the lowest is a wall, a flatter one than the highest a slip of the pen.
SlopeRatio = Annotated[float, Field(strict=True, ge=0.05, le=100, allow_inf_nan=False)]
NotNegative = Annotated[float, Field(strict=True, ge=0, allow_inf_nan=False)]

"""The only place where a foot, a yard, a pound or a gallon appears.

Inside the library every quantity is SI (m, m², m³, kg, kg/m³, L, L/s, m/s); evaporation stays in mm/day and
durations are named (minutes, hours). :class:`UnitSystem` turns numbers of a site file into SI and back for
display.

Factors are exact definitions (NIST Special Publication 811, appendix B.8; the US survey foot is 1200/3937 m).
"""

from __future__ import annotations

import re
from dataclasses import dataclass

FOOT_M = 0.3048
US_SURVEY_FOOT_M = 1200 / 3937
POUND_KG = 0.45359237
GALLON_L = 3.785411784
WATER_DENSITY_KG_M3 = 1000.0
STANDARD_GRAVITY_M_S2 = 9.80665

_YARD_M = 3 * FOOT_M
_LB_FT3 = POUND_KG / FOOT_M**3

#: dimension → unit symbol → SI value of one unit
UNITS: dict[str, dict[str, float]] = {
    "length": {
        "m": 1.0,
        "mm": 0.001,
        "cm": 0.01,
        "km": 1000.0,
        "in": FOOT_M / 12,
        "ft": FOOT_M,
        "ftUS": US_SURVEY_FOOT_M,
        "yd": _YARD_M,
        "mi": 5280 * FOOT_M,
        "mile": 5280 * FOOT_M,
    },
    "area": {
        "m2": 1.0,
        "ha": 10_000.0,
        "km2": 1e6,
        "ft2": FOOT_M**2,
        "yd2": _YARD_M**2,
        "acre": 43_560 * FOOT_M**2,
    },
    "soil_volume": {"m3": 1.0, "yd3": _YARD_M**3, "ft3": FOOT_M**3, "in3": (FOOT_M / 12) ** 3, "L": 0.001, "cm3": 1e-6},
    "density": {
        "kg/m3": 1.0,
        "t/m3": 1000.0,
        "g/cm3": 1000.0,
        "Mg/m3": 1000.0,
        "lb/ft3": _LB_FT3,
        "pcf": _LB_FT3,
        "lb/yd3": POUND_KG / _YARD_M**3,
        "kN/m3": 1000.0 / STANDARD_GRAVITY_M_S2,
    },
    "mass": {"kg": 1.0, "t": 1000.0, "lb": POUND_KG, "short ton": 2000 * POUND_KG, "ton": 2000 * POUND_KG},
    "water_volume": {"L": 1.0, "m3": 1000.0, "gal": GALLON_L, "ft3": 1000 * FOOT_M**3},
    "water_depth": {"L/m2": 1.0, "mm": 1.0, "gal/yd2": GALLON_L / _YARD_M**2, "in": 25.4},
    "flow": {"L/s": 1.0, "L/min": 1 / 60, "m3/h": 1000 / 3600, "gal/min": GALLON_L / 60, "gpm": GALLON_L / 60},
    "speed": {"m/s": 1.0, "km/h": 1 / 3.6, "mph": 5280 * FOOT_M / 3600},
    # The mechanical horsepower is 550 ft·lbf/s.
    "power": {"W": 1.0, "kW": 1000.0, "hp": 550 * FOOT_M * POUND_KG * STANDARD_GRAVITY_M_S2},
    "evaporation": {"mm/day": 1.0, "in/day": 25.4},
    "percent": {"%": 1.0},
    "stress": {
        "kPa": 1.0,
        "MPa": 1000.0,
        "kN/m2": 1.0,
        "lb/ft2": POUND_KG * STANDARD_GRAVITY_M_S2 / FOOT_M**2 / 1000,
        "psf": POUND_KG * STANDARD_GRAVITY_M_S2 / FOOT_M**2 / 1000,
        "psi": POUND_KG * STANDARD_GRAVITY_M_S2 / FOOT_M**2 * 144 / 1000,
    },
    "minutes": {"min": 1.0, "s": 1 / 60, "h": 60.0},
    "hours": {"h": 1.0, "min": 1 / 60, "day": 24.0, "days": 24.0},
    "days": {"day": 1.0, "days": 1.0, "h": 1 / 24},
}

_METRIC = {
    "length": "m", "area": "m2", "soil_volume": "m3", "density": "kg/m3", "mass": "t", "water_volume": "L",
    "water_depth": "L/m2", "flow": "L/min", "speed": "km/h", "road": "km", "evaporation": "mm/day",
    "percent": "%", "stress": "kPa", "minutes": "min", "hours": "h", "days": "days", "power": "kW",
}  # fmt: skip
_US = {
    "length": "ft", "area": "ft2", "soil_volume": "yd3", "density": "lb/ft3", "mass": "short ton",
    "water_volume": "gal", "water_depth": "gal/yd2", "flow": "gal/min", "speed": "mph", "road": "mile",
    "evaporation": "in/day", "percent": "%", "stress": "lb/ft2", "minutes": "min", "hours": "h", "days": "days", "power": "hp",
}  # fmt: skip

_PRINTED = {
    "m2": "m²", "m3": "m³", "ft2": "ft²", "yd3": "yd³", "ft3": "ft³", "kg/m3": "kg/m³", "lb/ft3": "lb/ft³",
    "lb/ft2": "lb/ft²",
    "L/m2": "L/m²", "gal/yd2": "gal/yd²", "short ton": "ton",
}  # fmt: skip

_QUANTITY = re.compile(r"^\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(\S.*?)?\s*$")


def parse_quantity(text: str, dimension: str) -> float:
    """SI value of a string that carries its own unit.

    Args:
        text: a number and a unit, such as ``"8 in"`` or ``"120 lb/ft³"``.
        dimension: a key of :data:`UNITS`.

    Raises:
        ValueError: not a number with a unit, or a unit of another dimension.

    >>> round(parse_quantity("8 in", "length"), 6)
    0.2032
    >>> round(parse_quantity("110 pcf", "density"), 2)
    1762.03
    """
    table = UNITS[dimension]
    match = _QUANTITY.match(text)
    if match is None or match.group(2) is None:
        raise ValueError(f'it must be a number, or a number with its unit such as "1.5 {next(iter(table))}"')
    unit = _spell(match.group(2))
    if unit not in table:
        raise ValueError(f"unit {match.group(2)!r} is not one of {', '.join(table)}")
    return float(match.group(1)) * table[unit]


def _spell(unit: str) -> str:
    """The ASCII spelling of a unit: ``m³`` → ``m3``, ``kg/m^3`` → ``kg/m3``, ``liter`` → ``L``."""
    unit = unit.replace("²", "2").replace("³", "3").replace("^", "").replace(" per ", "/").strip()
    same = {"l": "L", "litre": "L", "liter": "L", "l/min": "L/min", "l/s": "L/s", "l/m2": "L/m2", "US gal": "gal",
            "ft/US": "ftUS", "us-ft": "ftUS", "hr": "h", "hours": "h", "minutes": "min", "kph": "km/h",
            "tonne": "t", "tonnes": "t", "percent": "%"}  # fmt: skip
    return same.get(unit, unit)


@dataclass(frozen=True)
class UnitSystem:
    """The units in which a site's numbers are written and shown.

    ``foot_m`` is the foot of the site: international, or US survey where the CRS says so. It holds for
    lengths and elevations only; areas, volumes and densities always use the international foot.
    """

    name: str
    foot_m: float = FOOT_M

    def unit(self, dimension: str) -> str:
        """Symbol of the unit of a dimension (``"road"`` is a distance along roads)."""
        return (_US if self.name == "us" else _METRIC)[dimension]

    def label(self, dimension: str) -> str:
        """Symbol as printed, ``m³`` for ``m3``."""
        unit = self.unit(dimension)
        return _PRINTED.get(unit, unit)

    def factor(self, dimension: str) -> float:
        """SI value of one unit of the site.

        >>> round(UnitSystem("us").factor("soil_volume"), 12)
        0.764554857984
        """
        unit = self.unit(dimension)
        if dimension == "length" and unit == "ft":
            return self.foot_m
        return UNITS["length" if dimension == "road" else dimension][unit]

    def to_si(self, value: float, dimension: str) -> float:
        """SI value of a number in the site's unit."""
        return value * self.factor(dimension)

    def from_si(self, value: float, dimension: str) -> float:
        """Number in the site's unit of an SI value.

        >>> round(UnitSystem("us").from_si(0.3048, "length"), 9)
        1.0
        """
        return value / self.factor(dimension)


METRIC = UnitSystem("metric")
US = UnitSystem("us")

"""From SI to the units of the site: tables by the unit in their column names, and single numbers as text."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from earthwork.units import UnitSystem

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True)
class Suffix:
    """A unit at the end of a key: what it is in SI (see :mod:`earthwork.units`), and its dimensions.

    ``over`` is the dimension that the first is divided by, ``times`` the one that it is multiplied with.
    """

    text: str
    dimension: str
    si: float = 1.0
    over: str | None = None
    times: str | None = None


#: Longest first: ``_kg_m3`` is a density, and no volume.
_SUFFIXES = (
    Suffix("_l_per_m3", "water_volume", over="soil_volume"),
    Suffix("_kg_m3", "density"),
    Suffix("_l_min", "flow", 1 / 60),
    Suffix("_l_m2", "water_depth"),
    Suffix("_t_km", "mass", 1000.0 * 1000.0, times="road"),
    Suffix("_km_h", "speed", 1 / 3.6),
    Suffix("_m3", "soil_volume"),
    Suffix("_m2", "area"),
    Suffix("_km", "road", 1000.0),
    Suffix("_mm_day", "evaporation"),
    Suffix("_m", "length"),
    Suffix("_t", "mass", 1000.0),
    Suffix("_l", "water_volume"),
)
#: One centimetre of grade; its neighbour in US practice is a tenth of a foot.
_PER_CM = "_per_cm_m3"

_ASCII_UNIT = {"short ton": "ton", "L/m2": "l_m2", "L": "l", "L/min": "l_min"}


def suffix_of(key: str) -> Suffix | None:
    """The unit at the end of a key of a result; None for counts, names, factors, percentages and times.

    >>> suffix_of("fill_dry_density_kg_m3").dimension, suffix_of("zone"), suffix_of("shift_m").dimension
    ('density', None, 'length')
    """
    return next((s for s in _SUFFIXES if key.endswith(s.text) and len(key) > len(s.text)), None)


def factor_of(suffix: Suffix, units: UnitSystem) -> float:
    """What a number with this unit is multiplied by to show it in the site's units."""
    factor = suffix.si / units.factor(suffix.dimension)
    if suffix.over:
        factor *= units.factor(suffix.over)
    if suffix.times:
        factor /= units.factor(suffix.times)
    return factor


def _ascii_unit(units: UnitSystem, dimension: str) -> str:
    unit = units.unit(dimension)
    return _ASCII_UNIT.get(unit, unit.replace("/", "_"))


def display_key(key: str, units: UnitSystem) -> tuple[str, float]:
    """The key in the site's units, and what its numbers are multiplied by.

    >>> from earthwork.units import METRIC, US
    >>> display_key("cut_m3", METRIC)
    ('cut_m3', 1.0)
    >>> name, factor = display_key("cut_m3", US)
    >>> name, round(factor, 6)
    ('cut_yd3', 1.307951)
    >>> display_key("water_to_add_l_per_m3", US)[0], display_key("total_t_km", US)[0]
    ('water_to_add_gal_per_yd3', 'total_ton_mile')
    """
    if key.endswith(_PER_CM) and units.name == "us":
        tenth_ft_cm = units.factor("length") * 0.1 / 0.01
        return key.removesuffix(_PER_CM) + "_per_tenth_ft_yd3", tenth_ft_cm / units.factor("soil_volume")
    suffix = suffix_of(key)
    if suffix is None:
        return key, 1.0
    name = _ascii_unit(units, suffix.dimension)
    if suffix.over:
        name += "_per_" + _ascii_unit(units, suffix.over)
    if suffix.times:
        name += "_" + _ascii_unit(units, suffix.times)
    return f"{key.removesuffix(suffix.text)}_{name}", factor_of(suffix, units)


def display_table(table: pandas.DataFrame, units: UnitSystem) -> pandas.DataFrame:
    """A table of a result in the site's units; the unit stands in each column name.

    Columns without a unit (names, counts, factors, percentages, hours) stay as they are. In US units the
    grade shift of 1 cm becomes one of a tenth of a foot.
    """
    shown = {}
    for column in table.columns:
        name, factor = display_key(str(column), units)
        values = table[column]
        shown[name] = values if factor == 1.0 else values.map(lambda v, f=factor: _scaled(v, f))
    return type(table)(shown)


def _scaled(value: Any, factor: float) -> Any:
    return None if value is None else value * factor


#: Decimals for a column whose greatest number is at least the first figure; surveys deserve no more.
_DECIMALS: dict[str, tuple[tuple[float, int], ...]] = {
    "soil_volume": ((100, 0), (1, 1), (0, 2)),
    "area": ((100, 0), (1, 1), (0, 2)),
    "mass": ((100, 0), (1, 1), (0, 2)),
    "water_volume": ((10, 0), (0, 1)),
    "length": ((0, 2),),
    "density": ((200, 0), (0, 1)),
    "percent": ((0, 1),),
    "factor": ((0, 3),),
}


def decimals(values: Iterable[float | None], dimension: str) -> int:
    """Decimals that numbers shown in one column get, so that they line up and add up.

    >>> decimals([12345.678, 3.2], "soil_volume"), decimals([0.456], "soil_volume")
    (0, 2)
    """
    greatest = max((abs(v) for v in values if v is not None and math.isfinite(v)), default=0.0)
    if greatest == 0.0 and dimension not in ("length", "factor"):
        return 0
    return next(d for bound, d in _DECIMALS[dimension] if greatest >= bound)


def plain(value: float | None, places: int, *, sign: bool = False) -> str:
    """A number with grouped digits; ``–`` for what is absent, and no minus in front of a zero.

    >>> plain(-1234.5, 0), plain(None, 1), plain(-0.001, 2), plain(12, 0, sign=True)
    ('−1,234', '–', '0.00', '+12')
    """
    if value is None or not math.isfinite(value):
        return "–"
    text = f"{abs(value):,.{places}f}"
    if not text.strip("0.,"):
        return text
    return ("−" if value < 0 else "+" if sign else "") + text


def show(
    value: float | None,
    dimension: str,
    units: UnitSystem,
    *,
    sign: bool = False,
    unit: bool = True,
    si: float = 1.0,
) -> str:
    """An SI number as people read it, in the site's units.

    Args:
        value: the number; ``si`` is its unit as a multiple of the SI unit of the dimension (1000 for tonnes).
        sign: show a plus too.
        unit: add the unit.

    >>> from earthwork.units import METRIC, US
    >>> show(1234.56, "soil_volume", METRIC), show(0.3048, "length", US)
    ('1,235 m³', '1.00 ft')
    >>> show(2.5, "mass", US, si=1000.0)
    '2.8 ton'
    """
    shown = None if value is None else units.from_si(value * si, dimension)
    text = plain(shown, decimals([shown], dimension), sign=sign)
    return f"{text} {units.label(dimension)}" if unit and shown is not None else text

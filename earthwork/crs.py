"""What a CRS says: its length unit, its vertical datum, and whether two CRS are the same place.

A CRS in US survey feet is not one in feet: at 2,000,000 ft the two lie 4 ft apart [FR-2020-21902]. The vertical part
of a compound CRS is kept apart from the horizontal one throughout.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

from pyproj import CRS, Proj, Transformer
from pyproj.exceptions import CRSError, ProjError

from earthwork.errors import GroundError
from earthwork.units import FOOT_M, US_SURVEY_FOOT_M

#: Two spellings of a unit differ by less than this; the two feet differ by 2e-6.
_SAME_UNIT = 1e-9

#: Spellings of length units in band descriptions, lower case without full stops → metres.
_UNIT_WORDS = {
    "m": 1.0, "metre": 1.0, "metres": 1.0, "meter": 1.0, "meters": 1.0, "mt": 1.0, "mts": 1.0,
    "cm": 0.01, "centimetre": 0.01, "centimeter": 0.01, "centimetres": 0.01, "centimeters": 0.01,
    "mm": 0.001, "millimetre": 0.001, "millimeter": 0.001, "millimetres": 0.001, "millimeters": 0.001,
    "ft": FOOT_M, "foot": FOOT_M, "feet": FOOT_M, "international foot": FOOT_M, "international feet": FOOT_M,
    "ftus": US_SURVEY_FOOT_M, "us-ft": US_SURVEY_FOOT_M, "us ft": US_SURVEY_FOOT_M, "ft-us": US_SURVEY_FOOT_M,
    "us survey foot": US_SURVEY_FOOT_M, "us survey feet": US_SURVEY_FOOT_M, "foot_us": US_SURVEY_FOOT_M,
    "sft": US_SURVEY_FOOT_M, "us_survey_foot": US_SURVEY_FOOT_M,
}  # fmt: skip


def parse_crs(text: str) -> CRS:
    """A CRS from an authority code, WKT or PROJ text.

    Raises:
        ValueError: not understood; the message gives the text and what is expected.

    >>> parse_crs("EPSG:32611").name
    'WGS 84 / UTM zone 11N'
    """
    try:
        return CRS.from_user_input(text)
    except CRSError:
        raise ValueError(f'"{text}" is not a CRS; write an authority code such as "EPSG:32611", or WKT') from None


def snap_unit(metres: float) -> float:
    """The exact value of a length unit that a file gives rounded (0.304800609601219 → 1200/3937)."""
    for exact in (1.0, FOOT_M, US_SURVEY_FOOT_M):
        if abs(metres / exact - 1.0) < _SAME_UNIT:
            return exact
    return metres


def unit_from_text(text: str) -> float | None:
    """Metres of a length unit as a band's description spells it, None when the words are not known.

    >>> unit_from_text("US survey foot") == 1200 / 3937
    True
    """
    return _UNIT_WORDS.get(" ".join(text.strip().lower().replace(".", "").split()))


def unit_label(metres: float) -> str:
    """``m``, ``ft`` (international), ``ft (US survey)``, or the length in metres.

    >>> unit_label(0.3048), unit_label(1200 / 3937)
    ('ft', 'ft (US survey)')
    """
    known = {1.0: "m", FOOT_M: "ft", US_SURVEY_FOOT_M: "ft (US survey)", 0.01: "cm", 0.001: "mm"}
    return known.get(snap_unit(metres), f"units of {metres:g} m")


def horizontal(crs: CRS) -> CRS:
    """The horizontal part of a compound or three-dimensional CRS."""
    if crs.is_compound:
        return horizontal(crs.sub_crs_list[0])
    if crs.is_bound and crs.source_crs is not None:
        return horizontal(crs.source_crs) if crs.source_crs.is_compound else crs
    return crs.to_2d() if len(crs.axis_info) == 3 else crs


def tied_to_earth(crs: CRS | None) -> bool:
    """False for no CRS, and for a local one of which only the unit is known.

    >>> tied_to_earth(CRS("EPSG:32611")), tied_to_earth(None)
    (True, False)
    """
    if crs is None:
        return False
    flat = horizontal(crs)
    return flat.is_projected or flat.is_geographic or flat.is_geocentric or flat.is_bound


def horizontal_unit_m(crs: CRS | None) -> float | None:
    """Metres of the unit of a projected or local CRS; None for degrees, or when there is none."""
    if crs is None or crs.is_geographic or crs.is_geocentric:
        return None
    axes = horizontal(crs).axis_info
    return snap_unit(axes[0].unit_conversion_factor) if axes else None


@dataclass(frozen=True)
class VerticalReference:
    """The vertical part of a CRS: name, datum, metres of its unit, and whether heights count upwards."""

    name: str
    datum: str
    unit_m: float
    upwards: bool = True


def vertical_reference(crs: CRS | None) -> VerticalReference | None:
    """The vertical part of a compound or three-dimensional CRS; None where the CRS says nothing of heights.

    >>> vertical_reference(CRS("EPSG:32611+5703")).datum
    'North American Vertical Datum 1988'
    """
    if crs is None:
        return None
    if crs.is_compound:
        for part in crs.sub_crs_list:
            if part.is_vertical:
                axis = part.axis_info[0]
                datum = part.datum.name if part.datum is not None else part.name
                return VerticalReference(
                    part.name, datum, snap_unit(axis.unit_conversion_factor), axis.direction.lower() != "down"
                )
        return vertical_reference(crs.sub_crs_list[0])
    if len(crs.axis_info) == 3 and not crs.is_geocentric:
        axis = crs.axis_info[2]
        ellipsoid = crs.ellipsoid.name if crs.ellipsoid is not None else "unknown"
        return VerticalReference(
            f"{crs.name} (height)",
            f"ellipsoid {ellipsoid}",
            snap_unit(axis.unit_conversion_factor),
            axis.direction.lower() != "down",
        )
    return None


def is_web_mercator(crs: CRS) -> bool:
    """True for the Mercator of web maps: a sphere's formulas fed with the latitudes of an ellipsoid."""
    flat = horizontal(crs)
    if flat.is_bound and flat.source_crs is not None:
        flat = flat.source_crs
    method = flat.coordinate_operation.method_name.lower() if flat.coordinate_operation is not None else ""
    if "pseudo mercator" in method:
        return True
    body = flat.ellipsoid
    sphere = body is not None and not body.inverse_flattening and abs(body.semi_major_metre - 6378137.0) < 0.5
    return sphere and "mercator" in method and "transverse" not in method


def describe(crs: CRS | None) -> str:
    """``EPSG:32611 (WGS 84 / UTM zone 11N)``, or the name alone, or ``local grid``."""
    if crs is None:
        return "local grid"
    code = crs.to_authority(min_confidence=70)
    return f"{code[0]}:{code[1]} ({crs.name})" if code else crs.name


def transformer(source: CRS, target: CRS) -> Transformer:
    """Transformation of (easting, northing), or (longitude, latitude), between two horizontal CRS."""
    try:
        return Transformer.from_crs(horizontal(source), horizontal(target), always_xy=True)
    except ProjError:
        raise GroundError(
            f"no way is known from {describe(source)} to {describe(target)}; both CRS must be tied to places on earth. "
            "Name the right ones, or reproject the files first"
        ) from None


@lru_cache(maxsize=64)
def same_place(a: CRS, b: CRS, bounds: tuple[float, float, float, float], tolerance_m: float = 1e-3) -> bool:
    """True when coordinates of one CRS can be used in the other within a rectangle.

    Files spell one CRS in many ways, so names decide nothing: corners and centre are transformed and compared.

    Args:
        bounds: (west, south, east, north) in ``a`` [CRS unit].
        tolerance_m: the greatest shift that counts as none [m]; spellings of one CRS differ by 0.1 mm in feet.

    Raises:
        GroundError: no transformation between the two is known.
    """
    first, second = horizontal(a), horizontal(b)
    if first.equals(second, ignore_axis_order=True):
        return True
    if first.is_geographic != second.is_geographic:
        return False
    unit = horizontal_unit_m(first)
    other = horizontal_unit_m(second)
    if unit is None or other is None or snap_unit(unit) != snap_unit(other):
        return False
    west, south, east, north = bounds
    xs = [west, east, east, west, (west + east) / 2]
    ys = [south, south, north, north, (south + north) / 2]
    there_x, there_y = transformer(a, b).transform(xs, ys)
    shifts = [math.hypot(u - x, v - y) * unit for x, y, u, v in zip(xs, ys, there_x, there_y, strict=True)]
    return all(shift <= tolerance_m for shift in shifts)


def longitude_latitude(crs: CRS, easting: float, northing: float) -> tuple[float, float]:
    """(longitude, latitude) [°] of a place on the CRS's own ellipsoid."""
    flat = horizontal(crs)
    if flat.is_geographic:
        return easting, northing
    return Proj(flat)(easting, northing, inverse=True)


def utm_code(longitude: float, latitude: float) -> str:
    """Authority code of the UTM zone of a place, as a hint where to reproject to.

    >>> utm_code(-97.3, 32.7)
    'EPSG:32614'
    """
    zone = min(max(int((longitude + 180.0) // 6.0) + 1, 1), 60)
    return f"EPSG:{32600 + zone if latitude >= 0 else 32700 + zone}"


def shift_doubt(source: CRS, target: CRS, easting: float, northing: float) -> str | None:
    """Why coordinates of one CRS cannot be brought into another to survey precision; None when they can.

    Args:
        easting, northing: a place in ``source`` [CRS unit].
    """
    there = transformer(source, target)
    there.transform(easting, northing)
    used = there.get_last_used_operation().description
    if "ballpark" not in used.lower():
        return None
    return f"no datum shift from {describe(source)} to {describe(target)} is known here; it may be off by metres"


def from_wkt(wkt: str) -> CRS | None:
    """A CRS from the WKT that a file carries; None when it cannot be understood at all."""
    try:
        return CRS.from_wkt(wkt)
    except CRSError:
        return None

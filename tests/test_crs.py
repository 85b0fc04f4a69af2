"""What a CRS says: its unit, its heights, and whether two are the same place."""

from __future__ import annotations

import math

import pytest
from pyproj import CRS

from earthwork import crs as crs_module
from earthwork.crs import (
    describe,
    horizontal,
    horizontal_unit_m,
    is_web_mercator,
    parse_crs,
    same_place,
    shift_doubt,
    tied_to_earth,
    transformer,
    unit_from_text,
    unit_label,
    utm_code,
    vertical_reference,
)
from earthwork.errors import GroundError
from earthwork.units import FOOT_M, US_SURVEY_FOOT_M

UTM_BOX = (500_000.0, 4_100_000.0, 501_000.0, 4_101_000.0)
LOCAL = CRS('LOCAL_CS["shop floor",UNIT["metre",1]]')


@pytest.mark.parametrize(
    ("code", "unit"),
    [
        ("EPSG:32611", 1.0),
        ("EPSG:2230", US_SURVEY_FOOT_M),  # California zone 6, US survey feet
        ("EPSG:2223", FOOT_M),  # Arizona East, international feet
        ("EPSG:32611+5703", 1.0),
        ("EPSG:2230+6360", US_SURVEY_FOOT_M),
        ("EPSG:4326", None),
    ],
)
def test_horizontal_unit(code, unit):
    assert horizontal_unit_m(CRS(code)) == unit


def test_the_two_feet_are_four_feet_apart_at_two_million():
    # 2,000,000 ft × (1 − 0.3048 / (1200/3937)) = 4.000 ft, Federal Register 2020-21902
    assert pytest.approx(4.0, abs=1e-6) == 2_000_000 * (1 - FOOT_M / US_SURVEY_FOOT_M)
    assert unit_label(horizontal_unit_m(CRS("EPSG:2230"))) != unit_label(horizontal_unit_m(CRS("EPSG:2223")))


@pytest.mark.parametrize(
    ("text", "metres"),
    [
        ("m", 1.0),
        ("Metre", 1.0),
        (" metres ", 1.0),
        ("US survey foot", US_SURVEY_FOOT_M),
        ("ft.", FOOT_M),
        ("feet", FOOT_M),
        ("cm", 0.01),
        ("K", None),
        ("fathom", None),
    ],
)
def test_band_units(text, metres):
    assert unit_from_text(text) == metres


def test_vertical_parts():
    navd = vertical_reference(CRS("EPSG:32611+5703"))
    feet = vertical_reference(CRS("EPSG:2230+6360"))
    assert (navd.datum, navd.unit_m, navd.upwards) == ("North American Vertical Datum 1988", 1.0, True)
    assert (feet.datum, feet.unit_m) == (navd.datum, US_SURVEY_FOOT_M)
    assert vertical_reference(CRS("EPSG:32611")) is None
    assert not vertical_reference(CRS("EPSG:32611+5715")).upwards  # mean sea level depth
    ellipsoidal = vertical_reference(CRS("EPSG:32611").to_3d())
    assert ellipsoidal.datum == "ellipsoid WGS 84"
    assert horizontal(CRS("EPSG:32611").to_3d()) == CRS("EPSG:32611")


@pytest.mark.parametrize(
    ("code", "expected"),
    [
        ("EPSG:3857", True),
        ("ESRI:102100", True),
        ("+proj=merc +a=6378137 +b=6378137 +nadgrids=@null +units=m +wktext +no_defs", True),
        ("+proj=merc +a=6378137 +b=6378137 +units=m", True),
        ("EPSG:3395", False),  # World Mercator, on the ellipsoid
        ("EPSG:32611", False),
        ("+proj=tmerc +a=6378137 +b=6378137", False),
    ],
)
def test_web_mercator_is_told_from_other_mercators(code, expected):
    assert is_web_mercator(CRS(code)) is expected


def test_same_place():
    utm = CRS("EPSG:32611")
    assert same_place(utm, CRS("EPSG:32611+5703"), UTM_BOX)
    assert same_place(utm, CRS(utm.to_wkt("WKT1_ESRI")), UTM_BOX)  # another spelling of the same
    assert not same_place(utm, CRS("EPSG:32612"), UTM_BOX)
    assert not same_place(utm, CRS("EPSG:4326"), UTM_BOX)
    assert not same_place(utm, CRS("EPSG:3857"), UTM_BOX)


def test_state_plane_in_metres_is_another_place_than_in_feet():
    feet, metres = CRS("EPSG:2230"), CRS("EPSG:26946")
    assert not same_place(feet, metres, (6_500_000.0, 2_000_000.0, 6_501_000.0, 2_001_000.0))
    # and the transformation between them is the unit alone, but for false eastings rounded to 0.001 ft
    east, north = transformer(feet, metres).transform(6_500_000.0, 2_000_000.0)
    assert east == pytest.approx(6_500_000.0 * US_SURVEY_FOOT_M, abs=2e-4)
    assert north == pytest.approx(2_000_000.0 * US_SURVEY_FOOT_M, abs=2e-4)


def test_a_local_crs_has_no_place():
    assert not tied_to_earth(LOCAL)
    assert horizontal_unit_m(LOCAL) == 1.0
    with pytest.raises(GroundError, match="no way is known from shop floor to EPSG:32611"):
        transformer(LOCAL, CRS("EPSG:32611"))


def test_unknown_text_is_refused():
    with pytest.raises(ValueError, match=r'"EPSG:99999999" is not a CRS; write an authority code'):
        parse_crs("EPSG:99999999")


def test_descriptions():
    assert describe(None) == "local grid"
    assert describe(CRS("EPSG:32611")) == "EPSG:32611 (WGS 84 / UTM zone 11N)"


@pytest.mark.parametrize(
    ("longitude", "latitude", "code"),
    [
        (-180.0, 1.0, "EPSG:32601"),
        (180.0, 1.0, "EPSG:32660"),
        (145.0, -38.0, "EPSG:32755"),
        (-0.001, 51.5, "EPSG:32630"),
    ],
)
def test_utm_zone_of_a_place(longitude, latitude, code):
    assert utm_code(longitude, latitude) == code


def test_unknown_datum_shift_is_told(monkeypatch):
    assert shift_doubt(CRS("EPSG:32755"), CRS("EPSG:32754"), 300_000.0, 5_773_000.0) is None
    # a datum of nobody's: only a ballpark transformation exists
    odd = CRS(
        'PROJCS["x",GEOGCS["y",DATUM["nobody",SPHEROID["z",6378000,299]],PRIMEM["Greenwich",0],'
        'UNIT["degree",0.0174532925199433]],PROJECTION["Transverse_Mercator"],PARAMETER["central_meridian",-117],'
        'PARAMETER["scale_factor",0.9996],PARAMETER["false_easting",500000],UNIT["metre",1]]'
    )
    assert "may be off by metres" in shift_doubt(odd, CRS("EPSG:32611"), 500_000.0, 4_100_000.0)


def test_snapping_keeps_the_feet_apart():
    assert crs_module.snap_unit(0.304800609601219) == US_SURVEY_FOOT_M
    assert crs_module.snap_unit(0.3048) == FOOT_M
    assert crs_module.snap_unit(0.30480030) == 0.30480030
    assert math.isclose(crs_module.snap_unit(1.0 + 1e-12), 1.0, rel_tol=0, abs_tol=0)

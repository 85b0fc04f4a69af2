"""Who is believed about the unit of elevations."""

from __future__ import annotations

import pytest
from pyproj import CRS

from earthwork.errors import GroundError
from earthwork.files.rasters import raster_info
from earthwork.ground.vertical import VerticalFacts, one_sided_datum, refuse_other_datum, vertical_facts
from earthwork.site.model import RasterSurface
from earthwork.units import FOOT_M, METRIC, US_SURVEY_FOOT_M, UnitSystem
from tests.rasters import write_raster

US = UnitSystem("us")
SURVEY = UnitSystem("us", US_SURVEY_FOOT_M)


def facts_of(tmp_path, *, crs="EPSG:32611", unit="", stated=None, units=METRIC):
    info = raster_info(write_raster(tmp_path / "v.tif", [[100.0, 101.0]], crs=crs, unit=unit))
    spec = RasterSurface(file="v.tif", vertical_unit=stated)
    return vertical_facts(spec, info, info.crs, units, "ground.existing")


@pytest.mark.parametrize(
    ("options", "unit_m", "source"),
    [
        # each row takes away the first of the row before
        ({"stated": "ft", "unit": "m", "crs": "EPSG:2230+5703"}, FOOT_M, "site file"),
        ({"unit": "m", "crs": "EPSG:2230+6360"}, 1.0, "band"),
        ({"crs": "EPSG:2230"}, US_SURVEY_FOOT_M, "horizontal CRS"),
        ({"crs": None}, 1.0, "site units"),
        ({"crs": None, "units": US}, FOOT_M, "site units"),
        ({"crs": None, "units": SURVEY}, US_SURVEY_FOOT_M, "site units"),
        ({"stated": "ftUS", "crs": None}, US_SURVEY_FOOT_M, "site file"),
    ],
)
def test_the_first_that_speaks_is_believed(tmp_path, options, unit_m, source):
    facts, _ = facts_of(tmp_path, **options)
    assert (facts.unit_m, facts.source) == (unit_m, source)


def test_the_vertical_crs_speaks_before_the_horizontal_one(tmp_path):
    """A GeoTIFF gives the unit of its vertical CRS as the band's; other formats do not."""
    info = raster_info(write_raster(tmp_path / "v.tif", [[100.0, 101.0]], crs=None))
    crs = CRS("EPSG:32611+6360")
    facts, _ = vertical_facts(RasterSurface(file="v.tif"), info, crs, METRIC, "ground.existing")
    assert (facts.unit_m, facts.source, facts.datum) == (
        US_SURVEY_FOOT_M,
        "vertical CRS",
        "North American Vertical Datum 1988",
    )


@pytest.mark.parametrize(
    ("options", "warned"),
    [
        ({"unit": "ft"}, True),
        ({"unit": "m"}, False),
        ({"crs": "EPSG:2230"}, True),
        ({"crs": "EPSG:2230", "units": SURVEY}, False),
        ({"crs": "EPSG:2223", "units": US}, False),
        ({"units": US}, True),
        ({"stated": "ft"}, False),  # the user knows
    ],
)
def test_a_unit_of_the_other_system_is_warned_of(tmp_path, options, warned):
    _, warnings = facts_of(tmp_path, **options)
    assert [w.code for w in warnings] == (["vertical-unit"] if warned else [])


def test_an_unknown_unit_is_refused(tmp_path):
    with pytest.raises(GroundError, match=r"the unit of its band is 'K'; it must be a unit of length.*vertical_unit"):
        facts_of(tmp_path, unit="K")


def test_a_horizontal_unit_that_no_height_is_given_in(tmp_path):
    kilometres = "+proj=utm +zone=11 +datum=WGS84 +units=km"
    with pytest.raises(GroundError, match=r"counts in units of 1000 m.*state vertical_unit"):
        facts_of(tmp_path, crs=kilometres)


def test_depths_are_refused(tmp_path):
    with pytest.raises(GroundError, match="counts depths downwards; it must give elevations upwards"):
        facts_of(tmp_path, crs="EPSG:32611+5715")


def test_datums():
    def facts(name, datum):
        return VerticalFacts(name, 1.0, "m", "band", datum)

    refuse_other_datum([facts("a", "X"), facts("b", None), facts("c", "X")])
    with pytest.raises(GroundError, match="a is in the vertical datum 'X', c in 'Y'; they must be the same"):
        refuse_other_datum([facts("a", "X"), facts("b", None), facts("c", "Y")])


def test_a_datum_that_only_one_surface_names_is_a_doubt():
    def facts(name, datum):
        return VerticalFacts(name, 1.0, "m", "band", datum)

    (doubt,) = one_sided_datum([facts("a", None), facts("b", "X")])
    assert doubt.code == "vertical-datum"
    assert doubt.message.startswith("b is in the vertical datum 'X', a names none and is taken to be in the same")
    assert one_sided_datum([facts("a", None), facts("b", None)]) == []
    assert one_sided_datum([facts("a", "X"), facts("b", "X")]) == []

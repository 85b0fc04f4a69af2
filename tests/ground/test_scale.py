"""Ground length / map length: closed forms, published factors, and geodesics as a second opinion."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
import rasterio
from hypothesis import given
from hypothesis import strategies as st
from pyproj import CRS, Geod, Proj

from earthwork.errors import GroundError
from earthwork.ground.scale import (
    combined_factor,
    elevation_factor,
    grid_scale_factor,
    ground_scale,
    refuse_geographic,
    scale_warnings,
    web_mercator_factor,
)
from tests.published.grid_scale import CENTRAL_SCALE, COMBINED_FACTOR, ELEVATION_FACTOR, SPHERE_MERCATOR

BAY = Path(__file__).parents[2] / "../shared/data/dem_web_mercator/elev.tif"
PLOTS = Path(__file__).parents[2] / "../shared/data/zones_bubenec_plots/bubenec.gpkg"


@pytest.mark.parametrize("row", ELEVATION_FACTOR)
def test_published_elevation_factors(row):
    assert elevation_factor(*row.arguments) == pytest.approx(row.value, abs=row.tolerance)


@pytest.mark.parametrize("row", COMBINED_FACTOR)
def test_published_combined_factors(row):
    assert combined_factor(*row.arguments) == pytest.approx(row.value, abs=row.tolerance)


@pytest.mark.parametrize("row", SPHERE_MERCATOR)
def test_web_mercator_is_the_sphere_s_but_for_the_ellipsoid(row):
    """cos φ is the published number; M and N of the ellipsoid, by their own formulas, make up the rest."""
    assert math.cos(math.radians(*row.arguments)) == pytest.approx(row.value, abs=row.tolerance)
    sin2 = math.sin(math.radians(*row.arguments)) ** 2
    e2 = 0.00669437999014  # WGS 84
    along, across = (1 - e2) / (1 - e2 * sin2) ** 1.5, 1 / math.sqrt(1 - e2 * sin2)  # M/a and N/a
    ground_per_map = row.value * math.sqrt(along * across)
    assert 1 / web_mercator_factor(*row.arguments) == pytest.approx(ground_per_map, rel=2e-8)
    assert 1 / web_mercator_factor(*row.arguments) == pytest.approx(row.value, rel=2e-3)


@pytest.mark.parametrize(("code", "easting", "northing", "factor", "source"), CENTRAL_SCALE)
def test_scale_on_central_meridians(code, easting, northing, factor, source):
    assert grid_scale_factor(CRS(code), easting, northing) == pytest.approx(factor, abs=1e-9), source


@pytest.mark.parametrize(
    ("code", "easting", "northing"),
    [
        ("EPSG:32611", 650_000.0, 4_100_000.0),
        ("EPSG:2230", 6_500_000.0, 2_000_000.0),
        ("EPSG:3857", -1.363e7, 4.551e6),
        ("EPSG:3857", 0.0, 8_400_000.0),
        ("EPSG:5514", -744_000.0, -1_041_000.0),
        ("EPSG:3035", 5_321_000.0, 4_210_000.0),
    ],
)
def test_area_of_a_cell_is_its_geodesic_area(code, easting, northing):
    """A square of 100 units on the ellipsoid, by geodesics, against its map area × ground_scale²."""
    crs = CRS(code)
    corners = [(easting + i, northing + j) for i, j in ((-50, -50), (50, -50), (50, 50), (-50, 50))]
    lon, lat = zip(*(Proj(crs)(*c, inverse=True) for c in corners), strict=True)
    area, _ = crs.get_geod().polygon_area_perimeter(lon, lat)
    unit = crs.axis_info[0].unit_conversion_factor
    scale = ground_scale(crs, easting, northing, 0.0)
    assert (100 * unit * scale) ** 2 == pytest.approx(abs(area), rel=2e-7)


@pytest.mark.skipif(not BAY.is_file(), reason="the folder of open data is not here")
def test_bay_area_in_web_mercator():
    """Geodesic area of every row against the raster's map area: 1.604457 (README of the data)."""
    with rasterio.open(BAY) as file:
        west, south, east, north = file.bounds
        crs = CRS.from_wkt(file.crs.to_wkt())
    scale = ground_scale(crs, (west + east) / 2, (south + north) / 2, 0.0)
    assert 1 / scale**2 == pytest.approx(1.604457, abs=1e-6)


@pytest.mark.skipif(not PLOTS.is_file(), reason="the folder of open data is not here")
def test_plots_in_web_mercator():
    """407 parcels: 677,215.823 map units², 278,938.239 m² on the ellipsoid (README of the data)."""
    from earthwork.files.vectors import read_polygons
    from earthwork.site.model import AreaSpec

    crs = CRS("EPSG:3857")
    plots = read_polygons(AreaSpec(file=PLOTS.name, layer="plots"), PLOTS.parent, crs=crs)
    map_area = sum(p.polygon.area for p in plots)
    assert map_area == pytest.approx(677_215.823, abs=1e-3)
    bounds = np.array([p.polygon.bounds for p in plots])
    centre = bounds.mean(axis=0)
    scale = ground_scale(crs, (centre[0] + centre[2]) / 2, (centre[1] + centre[3]) / 2, 0.0)
    assert map_area * scale**2 == pytest.approx(278_938.239, rel=2e-5)


@given(st.floats(-84, 84))
def test_web_mercator_area_by_geodesics(latitude):
    """A small square of the map, measured on the ellipsoid."""
    projection = Proj("EPSG:3857")
    x, y = projection(10.0, latitude)
    half = 20.0
    lon, lat = zip(
        *(projection(x + i * half, y + j * half, inverse=True) for i, j in ((-1, -1), (1, -1), (1, 1), (-1, 1))),
        strict=True,
    )
    area, _ = Geod(ellps="WGS84").polygon_area_perimeter(lon, lat)
    assert (2 * half / web_mercator_factor(latitude)) ** 2 == pytest.approx(abs(area), rel=1e-5)


@given(st.floats(-100, 6000), st.floats(200_000, 800_000), st.floats(10_000, 9_000_000))
def test_higher_ground_is_longer(height, easting, northing):
    crs = CRS("EPSG:32633")
    low, high = ground_scale(crs, easting, northing, height), ground_scale(crs, easting, northing, height + 100.0)
    assert high / low == pytest.approx(1 + 100.0 / (6_371_000.0 + height), rel=1e-12)


def test_local_grids_have_scale_one_and_say_so():
    assert ground_scale(None, 1.0, 2.0, 3000.0) == 1.0
    assert [w.code for w in scale_warnings(None, 1.0, 2.0)] == ["no-crs"]
    local = CRS('LOCAL_CS["shop floor",UNIT["metre",1]]')
    assert ground_scale(local, 1.0, 2.0, 3000.0) == 1.0
    assert "shop floor is tied to no place on earth" in scale_warnings(local, 1.0, 2.0)[0].message


def test_warnings_of_map_projections():
    assert scale_warnings(CRS("EPSG:32611"), 500_000.0, 4_100_000.0) == ()
    (warning,) = scale_warnings(CRS("EPSG:3857"), -13_628_435.77, 4_551_483.64)
    assert warning.code == "web-mercator"
    assert "1.604 times too large" in warning.message
    assert "EPSG:32610" in warning.message


def test_degrees_are_refused_with_a_way_out():
    with pytest.raises(GroundError, match=r"old\.tif: CRS is EPSG:4326 \(WGS 84\), in degrees.*-t_srs EPSG:32614"):
        refuse_geographic(CRS("EPSG:4326"), -97.3, 32.7, "old.tif")
    with pytest.raises(GroundError, match="in degrees"):
        ground_scale(CRS("EPSG:4326"), -97.3, 32.7, 0.0)
    with pytest.raises(GroundError, match="geocentric"):
        ground_scale(CRS("EPSG:4978"), 0.0, 0.0, 0.0)


def test_a_place_outside_the_projection_is_refused():
    with pytest.raises(
        GroundError, match=r"lies outside what .* can show; check the CRS, or state ground\.ground_scale"
    ):
        ground_scale(CRS("EPSG:3035"), 9e9, 9e9, 0.0)

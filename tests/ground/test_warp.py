"""Rasters of another CRS: places against pyproj point by point, values against closed forms and scipy."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from pyproj import CRS, Transformer
from scipy.interpolate import RegularGridInterpolator

from earthwork.errors import GroundError
from earthwork.files.rasters import RasterSource, raster_info
from earthwork.ground.grid import Grid, Window
from earthwork.ground.warp import bilinear, footprint, warped_raster
from earthwork.units import US_SURVEY_FOOT_M
from tests.rasters import write_raster

UTM10, UTM11 = CRS("EPSG:32610"), CRS("EPSG:32611")
# 300 × 400 m in zone 10, seen from zone 11 across the meridian between them, where the two grids turn against each other
EAST, NORTH = 760_000.0, 4_100_000.0


def grid_in_zone_11(rows=120, columns=150, cell=1.0):
    east, north = Transformer.from_crs(UTM10, UTM11, always_xy=True).transform(EAST + 200, NORTH - 150)
    return Grid(rows, columns, east - columns * cell / 2, north + rows * cell / 2, cell, cell, crs=UTM11)


def centres(grid):
    column, row = np.meshgrid(np.arange(grid.columns) + 0.5, np.arange(grid.rows) + 0.5)
    return grid.west + column * grid.cell_east, grid.north - row * grid.cell_north


def source_of(tmp_path, function, *, cell=1.0, rows=300, columns=400, dtype="float64", **options):
    east = EAST + (np.arange(columns) + 0.5) * cell
    north = NORTH - (np.arange(rows) + 0.5) * cell
    values = function(*np.meshgrid(east - EAST, north - NORTH))
    path = write_raster(
        tmp_path / "zone10.tif", values, west=EAST, north=NORTH, cell=cell, crs="EPSG:32610", dtype=dtype, **options
    )
    return RasterSource(raster_info(path), what="ground.finished")


def read(surface, window=None):
    reader = surface.reader()
    values = reader.read(window or surface.grid.window)
    reader.close()
    return values


def test_a_plane_in_another_zone(tmp_path):
    """A plane of zone 10 has, at each centre of zone 11, the value of the place that pyproj gives for it."""
    source = source_of(tmp_path, lambda e, n: 100 + 0.05 * e - 0.08 * n)
    grid = grid_in_zone_11()
    surface = warped_raster(source, UTM10, grid)
    assert (surface.resampling, surface.dtype) == ("bilinear", np.float64)
    assert surface.spacing > 1
    east, north = Transformer.from_crs(UTM11, UTM10, always_xy=True).transform(*centres(grid))
    expected = 100 + 0.05 * (east - EAST) - 0.08 * (north - NORTH)
    # places may be 1/1000 cell off: 1 mm on slopes of 5 and 8 %
    assert read(surface) == pytest.approx(expected, abs=1.3e-4)


def test_a_second_opinion_on_curved_ground(tmp_path):
    """scipy's interpolator at the places that pyproj gives for every single cell."""

    def ground(e, n):
        return 100 + 3 * np.sin(e / 15) * np.cos(n / 11)

    source = source_of(tmp_path, ground)
    grid = grid_in_zone_11()
    samples = np.arange(300) + 0.5, np.arange(400) + 0.5
    z = ground(*np.meshgrid(samples[1], -samples[0]))
    east, north = Transformer.from_crs(UTM11, UTM10, always_xy=True).transform(*centres(grid))
    expected = RegularGridInterpolator(samples, z)((NORTH - north, east - EAST))
    # places to 1/1000 cell on slopes of up to 3 / 11
    assert read(warped_raster(source, UTM10, grid)) == pytest.approx(expected, abs=3e-4)


def test_feet_of_two_kinds_are_another_place(tmp_path):
    """California zone 6 in US survey feet against metres: 2 m cells on a plane, no offset of 4 ft."""
    feet, metres = CRS("EPSG:2230"), CRS("EPSG:26946")
    west, north = 6_500_000.0, 2_000_000.0
    east_ft, north_ft = np.meshgrid(west + 0.5 + np.arange(200.0), north - 0.5 - np.arange(200.0))
    path = write_raster(
        tmp_path / "ft.tif", 0.1 * (east_ft - west) - 0.2 * (north_ft - north), west=west, north=north, crs="EPSG:2230",
        dtype="float64",
    )  # fmt: skip
    grid = Grid(20, 20, west * US_SURVEY_FOOT_M + 10, north * US_SURVEY_FOOT_M - 10, 2.0, 2.0, crs=metres)
    surface = warped_raster(RasterSource(raster_info(path)), feet, grid)
    e, n = centres(grid)
    expected = 0.1 * (e / US_SURVEY_FOOT_M - west) - 0.2 * (n / US_SURVEY_FOOT_M - north)
    assert surface.resampling == "average"  # a foot is finer than two metres
    assert read(surface) == pytest.approx(expected, abs=1e-3)


def test_what_lies_outside_or_is_missing_has_no_data(tmp_path):
    hole = (EAST + 200.5, NORTH - 150.5)

    def ground(e, n):
        z = np.full(e.shape, 100.0)
        z[(np.abs(e - 200.5) < 0.6) & (np.abs(n + 150.5) < 0.6)] = np.nan
        return z

    source = source_of(tmp_path, ground)
    grid = grid_in_zone_11(rows=500, columns=500)
    values = read(warped_raster(source, UTM10, grid))
    east, north = Transformer.from_crs(UTM11, UTM10, always_xy=True).transform(*centres(grid))
    u, v = east - EAST - 0.5, NORTH - north - 0.5
    inside = (u >= 0) & (u <= 399) & (v >= 0) & (v <= 299)
    holed = (np.abs(east - hole[0]) < 1) & (np.abs(north - hole[1]) < 1)
    edge = (np.abs(u) < 0.01) | (np.abs(u - 399) < 0.01) | (np.abs(v) < 0.01) | (np.abs(v - 299) < 0.01)
    certain = ~edge
    assert np.array_equal(np.isfinite(values)[certain], (inside & ~holed)[certain])
    assert holed.sum() >= 2


def test_windows_and_reads_in_parts_change_no_digit(tmp_path, monkeypatch):
    import earthwork.ground.warp as module

    source = source_of(tmp_path, lambda e, n: 100 + 3 * np.sin(e / 15) * np.cos(n / 11))
    grid = grid_in_zone_11(rows=60, columns=70, cell=2.5)
    surface = warped_raster(source, UTM10, grid)
    assert surface.parts == 3
    whole = read(surface)
    for window in (Window(0, 0, 13, 70), Window(31, 17, 9, 40), Window(59, 69, 1, 1)):
        part = whole[window.row : window.row + window.height, window.column : window.column + window.width]
        assert np.array_equal(read(surface, window), part)
    monkeypatch.setattr(module, "_READ_AT_ONCE", 500)
    assert np.array_equal(read(surface), whole)


@pytest.mark.parametrize("cell", [1.0, 2.5])
def test_the_compiled_kernel_gives_the_same_digits(tmp_path, cell):
    rng = np.random.default_rng(5)

    def ground(e, n):
        return np.where(rng.random(e.shape) < 0.02, np.nan, rng.normal(100, 5, e.shape))

    for dtype in ("float32", "float64"):
        source = source_of(tmp_path, ground, dtype=dtype)
        surface = warped_raster(source, UTM10, grid_in_zone_11(rows=330, columns=420, cell=cell))
        assert not surface.compiled
        plain, compiled = read(surface), read(replace(surface, compiled=True))
        assert np.isnan(plain).any()
        assert np.array_equal(plain, compiled, equal_nan=True)


def test_averaging_takes_the_mean_of_a_plane(tmp_path):
    source = source_of(tmp_path, lambda e, n: 0.3 * e + 0.1 * n)
    grid = grid_in_zone_11(rows=20, columns=20, cell=7.0)
    east, north = Transformer.from_crs(UTM11, UTM10, always_xy=True).transform(*centres(grid))
    expected = 0.3 * (east - EAST) + 0.1 * (north - NORTH)
    assert read(warped_raster(source, UTM10, grid)) == pytest.approx(expected, abs=1e-3)


def test_bilinear_by_hand():
    z = np.array([[0.0, 10.0, np.nan], [20.0, 30.0, 40.0]])
    row, column = np.array([0.0, 0.5, 1.0, 0.25, 0.5, 1.1, -0.1]), np.array([0.0, 0.5, 2.0, 0.75, 1.5, 0.0, 0.0])
    assert np.array_equal(bilinear(z, row, column), [0.0, 15.0, 40.0, 12.5, np.nan, np.nan, np.nan], equal_nan=True)


def test_the_footprint_of_a_raster(tmp_path):
    source = source_of(tmp_path, lambda e, n: e)
    polygon = footprint(source, UTM10, UTM11)
    back = Transformer.from_crs(UTM11, UTM10, always_xy=True)
    east, north = back.transform(*np.array(polygon.exterior.coords).T)
    assert (east.min(), east.max()) == pytest.approx((EAST + 0.5, EAST + 399.5), abs=1e-3)
    assert (north.min(), north.max()) == pytest.approx((NORTH - 299.5, NORTH - 0.5), abs=1e-3)


def test_a_site_that_the_file_s_crs_cannot_show(tmp_path):
    source = source_of(tmp_path, lambda e, n: e)
    nowhere = Grid(4, 4, 1e12, 1e12, 1.0, 1.0, crs=CRS("EPSG:3035"))
    with pytest.raises(GroundError, match=r"ground\.finished: .*zone10\.tif: the site cannot be expressed in its CRS"):
        warped_raster(source, UTM10, nowhere)

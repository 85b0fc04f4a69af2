"""Odd and broken rasters from other projects' test suites: each is one trap (README of the data)."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from earthwork.errors import FileError, GroundError
from earthwork.files.rasters import RasterSource, raster_info
from earthwork.ground.surfaces import open_ground
from earthwork.site import site_from_files

ODD = Path(__file__).parents[2] / "../shared/data/rasters_odd"
pytestmark = pytest.mark.skipif(not ODD.is_dir(), reason="the folder of open data is not here")


def read(name, band=1):
    info = raster_info(ODD / name, band=band)
    reader = RasterSource(info).reader()
    values = reader.read(0, 0, info.rows, info.columns)
    reader.close()
    return info, values


# name, rows, columns, cells with data, least and greatest elevation: the table of the README
READABLE = [
    ("byte.tif", 20, 20, 400, 74.0, 255.0),
    ("float.tif", 2, 3, 6, -1.8799999952316284, 1.409999966621399),
    ("float_nan.tif", 2, 3, 5, -1.8799999952316284, 1.409999966621399),
    ("float_raster_with_nodata.tif", 12, 13, 98, None, 0.25),
    ("float_raster_with_extra_nodata.tif", 22, 28, 98, None, 0.25),
    ("all-nodata.tif", 2475, 71, 0, None, None),
    ("goes.tif", 542, 542, 230052, 0.0, 162.0),
    ("cog_uint8_rgb_mask.tif", 256, 256, 49152, 1.0, 1.0),
    ("cog_scale.tif", 256, 256, 65530, 1000 - 894e-4, 1000 + 13413e-4),
    ("test_esri_wkt.tif", 2, 2, 4, 1.0, 4.0),
    ("N10W110.hgt.zip", 1201, 1201, 1442401, 0.0, 9.0),
]


@pytest.mark.parametrize(("name", "rows", "columns", "cells", "low", "high"), READABLE)
def test_what_holds_data(name, rows, columns, cells, low, high):
    info, values = read(name)
    assert (info.rows, info.columns) == values.shape == (rows, columns)
    known = values[np.isfinite(values)]
    assert known.size == cells
    if high is not None:
        assert known.max() == pytest.approx(high, rel=1e-7)
    if low is not None:
        assert known.min() == pytest.approx(low, rel=1e-7, abs=1e-12)


def test_the_masked_image_has_ones_where_the_mask_lets_them_through():
    _, values = read("cog_uint8_rgb_mask.tif")
    assert np.nanmin(values) == 1.0  # its zeros lie under the mask


@pytest.mark.parametrize("name", ["float.tif", "float_nan.tif"])
def test_south_up_files_are_turned(name):
    info, values = read(name)
    assert (info.south_up, info.bounds) == (True, (0.0, 0.0, 300.0, 200.0))
    import rasterio

    with rasterio.open(ODD / name) as file:
        assert np.array_equal(values, file.read(1)[::-1].astype(values.dtype), equal_nan=True)


def test_two_files_that_hold_the_same_cells_in_other_frames():
    """One has ten more rows and fifteen more columns of nodata around it."""
    _, small = read("float_raster_with_nodata.tif")
    _, large = read("float_raster_with_extra_nodata.tif")
    assert np.nansum(small) == np.nansum(large)


def test_a_scale_of_its_own_for_each_band():
    _, first = read("cog_scale.tif")
    info, second = read("cog_scale.tif", band=2)
    assert (info.scale, info.offset) == (0.001, 2000.0)
    assert np.nanmean(first) < 1100 < np.nanmean(second)


def test_corrupt_data_name_the_block():
    with pytest.raises(
        FileError, match=r"corrupt\.tif: data are damaged or cut off in the block at row 512, column 512"
    ):
        read("corrupt.tif")


def test_corrupt_data_are_refused_when_surfaces_meet():
    with pytest.raises(FileError, match=r"ground\.existing: .*corrupt\.tif: data are damaged"):
        open_ground(site_from_files(ODD / "corrupt.tif", ODD / "corrupt.tif"))


def test_a_rotated_grid_is_refused_with_the_reason():
    assert raster_info(ODD / "rotated.tif").rotated
    with pytest.raises(GroundError, match=r"rotated or sheared \(one column is 17\.32\d* east and 10 north"):
        open_ground(site_from_files(ODD / "rotated.tif", ODD / "rotated.tif"))


@pytest.mark.parametrize("name", ["cog_uint8_rgb_mask.tif", "N10W110.hgt.zip"])
def test_degrees_are_refused(name):
    with pytest.raises(GroundError, match="in degrees"):
        open_ground(site_from_files(ODD / name, ODD / name))


def test_all_nodata_opens_and_says_that_it_found_none():
    ground = open_ground(site_from_files(ODD / "all-nodata.tif", ODD / "all-nodata.tif"))
    assert [w.code for w in ground.warnings] == ["elevation-unknown"]


def test_a_band_that_is_not_there():
    with pytest.raises(FileError, match="band is 4; it must be 1 to 3, since the file has 3 bands"):
        raster_info(ODD / "goes.tif", band=4)


@pytest.mark.parametrize("name", ["byte.tif", "cog_scale.tif", "test_esri_wkt.tif", "float_raster_with_nodata.tif"])
def test_odd_crs_have_a_ground_scale(name):
    ground = open_ground(site_from_files(ODD / name, ODD / name))
    assert 0.9 < ground.grid.ground_scale < 1.1


def test_a_projection_that_shows_half_the_earth():
    """A satellite's view: its scale at the centre is 1, for the point below it."""
    ground = open_ground(site_from_files(ODD / "goes.tif", ODD / "goes.tif"))
    assert ground.grid.ground_scale == pytest.approx(1.0, abs=0.01)

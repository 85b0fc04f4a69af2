"""Surfaces on a grid: read as they are, interpolated, averaged, as nodes, level and tilted."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from rasterio.transform import Affine

from earthwork.errors import GroundError
from earthwork.files.rasters import RasterSource, raster_info
from earthwork.ground.grid import Grid, Window
from earthwork.ground.surfaces import (
    AlignedRaster,
    LevelGround,
    PlaneGround,
    SurfaceReader,
    aligned_offset,
    raster_on_grid,
)
from tests.rasters import write_raster

WEST, NORTH = 500_000.0, 4_100_000.0


def grid(rows, columns, *, west=WEST, north=NORTH, cell=1.0, **more):
    east, tall = (cell, cell) if isinstance(cell, int | float) else cell
    return Grid(rows, columns, west, north, east, tall, **more)


def surface_of(path, on, *, nodes=False, **source):
    return raster_on_grid(RasterSource(raster_info(path), **source), on, nodes=nodes)


def values_of(surface, on, window=None):
    reader = surface.reader()
    assert isinstance(reader, SurfaceReader)
    values = reader.read(window or on.window)
    reader.close()
    assert values.dtype == surface.dtype
    return values


HILL = np.arange(20.0).reshape(4, 5)


# --- as it is ------------------------------------------------------------------------------------------------------


def test_an_aligned_raster_is_read_as_it_is(tmp_path):
    path = write_raster(tmp_path / "hill.tif", HILL)
    on = grid(2, 3, west=WEST + 1, north=NORTH - 1)
    surface = surface_of(path, on)
    assert (surface.resampling, surface.dtype) == ("none", np.float32)
    assert values_of(surface, on).tolist() == HILL[1:3, 1:4].tolist()


def test_ground_beyond_the_file_has_no_data(tmp_path):
    path = write_raster(tmp_path / "hill.tif", HILL)
    on = grid(6, 7, west=WEST - 1, north=NORTH + 1)
    expected = np.full((6, 7), np.nan)
    expected[1:5, 1:6] = HILL
    assert np.array_equal(values_of(surface_of(path, on), on), expected, equal_nan=True)
    assert np.isnan(values_of(surface_of(path, on), on, Window(5, 0, 1, 7))).all()


@pytest.mark.parametrize(
    ("west", "cell", "aligned"),
    [
        (WEST, 1.0, True),
        (WEST + 3e-4, 1.0, True),  # 0.3 mm off: written by another program
        (WEST + 0.01, 1.0, False),
        (WEST, 1.0 + 1e-7, True),
        (WEST, 1.001, False),  # half a hundredth of a cell over the grid
        (WEST - 2.0, 1.0, True),
        (WEST, 2.0, False),
        (WEST, 0.5, False),
    ],
)
def test_what_counts_as_aligned(tmp_path, west, cell, aligned):
    info = raster_info(write_raster(tmp_path / "hill.tif", HILL))
    assert (aligned_offset(info, grid(4, 5, west=west, cell=cell)) is not None) is aligned


def test_blocks_are_counted_in_cells_of_the_grid(tmp_path):
    options = {"tiled": True, "blockxsize": 32, "blockysize": 16}
    path = write_raster(tmp_path / "t.tif", np.zeros((64, 96)), **options)
    surface = surface_of(path, grid(40, 60, west=WEST + 10, north=NORTH - 5))
    # blocks begin at file rows 0, 16, 32 …, which are grid rows −5, 11, 27 …; columns −10, 22, 54
    assert (surface.block, surface.block_start) == ((16, 32), (11, 22))
    turned = write_raster(tmp_path / "s.tif", np.zeros((70, 96)), south_up=True, **options)
    # stored from the south: block edges lie 16, 32 … rows above the southern edge, at rows 6, 22 … from the north
    assert surface_of(turned, grid(70, 96)).block_start == (6, 0)
    coarse = surface_of(path, grid(32, 48, cell=2.0))
    assert (coarse.block, coarse.block_start) == ((8, 16), (0, 0))


# --- interpolated --------------------------------------------------------------------------------------------------


def test_half_a_cell_further_is_the_mean_of_four(tmp_path):
    path = write_raster(tmp_path / "v.tif", [[0.0, 4.0, 8.0], [100.0, 104.0, 108.0], [200.0, 204.0, np.nan]])
    on = grid(2, 2, west=WEST + 0.5, north=NORTH - 0.5)
    surface = surface_of(path, on)
    assert surface.resampling == "bilinear"
    values = values_of(surface, on)
    assert values[0].tolist() == [52.0, 56.0]
    assert values[1, 0] == 152.0
    assert np.isnan(values[1, 1])  # one of its four is missing


def test_interpolation_of_a_coarse_non_square_raster(tmp_path):
    # samples 4 m apart in east and 2 m in north, on a plane: z = 3 e − 5 n from the corner
    east, north = np.meshgrid(2.0 + 4.0 * np.arange(5), -1.0 - 2.0 * np.arange(6))
    path = write_raster(tmp_path / "plane.tif", 3 * east - 5 * north, cell=(4.0, 2.0), dtype="float64")
    on = grid(24, 40, cell=0.5)
    values = values_of(surface_of(path, on), on)
    e, n = np.meshgrid(0.25 + 0.5 * np.arange(40), -0.25 - 0.5 * np.arange(24))
    inside = (e >= 2) & (e <= 18) & (n <= -1) & (n >= -11)  # between the outermost samples
    assert np.array_equal(np.isfinite(values), inside)
    assert values[inside] == pytest.approx((3 * e - 5 * n)[inside], abs=1e-12)


def test_averaging_of_a_finer_raster(tmp_path):
    path = write_raster(tmp_path / "v.tif", np.arange(16.0).reshape(4, 4))
    on = grid(2, 2, cell=2.0)
    surface = surface_of(path, on)
    assert surface.resampling == "average"
    # means of the 2 × 2 blocks of 0 … 15
    assert values_of(surface, on).tolist() == [[2.5, 4.5], [10.5, 12.5]]


def test_a_cell_of_five_thousand_squared_samples_is_read_in_parts(tmp_path, monkeypatch):
    import earthwork.ground.surfaces as module

    path = write_raster(tmp_path / "v.tif", np.arange(64.0 * 64).reshape(64, 64), dtype="float64")
    on = grid(4, 4, cell=16.0)
    whole = values_of(surface_of(path, on), on)
    monkeypatch.setattr(module, "_READ_AT_ONCE", 300)  # one target cell alone takes 256
    assert values_of(surface_of(path, on), on).tolist() == whole.tolist()
    assert whole[0, 0] == np.arange(64.0 * 64).reshape(64, 64)[:16, :16].mean()


# --- nodes ---------------------------------------------------------------------------------------------------------


def test_nodes_are_corners_of_patches(tmp_path):
    path = write_raster(tmp_path / "v.tif", [[0.0, 1.0, 4.0], [2.0, 3.0, 5.0]])
    # the nodes lie at the centres of the file's cells; one row of two patches lies between them
    on = grid(1, 2, west=WEST + 0.5, north=NORTH - 0.5)
    surface = surface_of(path, on, nodes=True)
    assert surface.resampling == "nodes"
    assert values_of(surface, on).tolist() == [[1.5, 3.25]]


def test_nodes_on_coarser_cells_are_averaged_along_their_broken_lines(tmp_path):
    # a ridge of height 1 at the middle node: between nodes 0, 1, 2 its mean is 1/2, by cells it would be 1/3
    path = write_raster(tmp_path / "v.tif", [[0.0, 1.0, 0.0]] * 3)
    on = grid(1, 1, west=WEST + 0.5, north=NORTH - 0.5, cell=2.0)
    surface = surface_of(path, on, nodes=True)
    assert surface.resampling == "average"
    assert values_of(surface, on).item() == pytest.approx(0.5, rel=1e-15)


# --- without a file ------------------------------------------------------------------------------------------------


def test_a_level(tmp_path):
    surface = LevelGround(102.5)
    on = grid(2, 2)
    assert (surface.resampling, surface.block) == ("exact", None)
    values = values_of(surface, on)
    values[0, 0] = 7.0  # the caller owns what it is given
    assert values_of(surface, on).tolist() == [[102.5, 102.5], [102.5, 102.5]]


def test_a_plane_rises_per_ground_length():
    # map unit 0.3048 m, ground scale 1.5: a cell of 2 units is 0.9144 m; 1 % east, −2 % north
    on = grid(3, 3, west=0.0, north=6.0, cell=2.0, unit_m=0.3048, ground_scale=1.5)
    surface = PlaneGround(on, (0.0, 0.0), 100.0, (0.01, -0.02))
    values = values_of(surface, on)
    # centre of the southwestern cell: 0.4572 m east and north of the point
    assert values[2, 0] == pytest.approx(100.0 + 0.4572 * 0.01 - 0.4572 * 0.02, abs=1e-13)
    assert np.diff(values[0]) == pytest.approx([0.009144, 0.009144], abs=1e-13)
    assert np.diff(values[:, 0]) == pytest.approx([0.018288, 0.018288], abs=1e-13)


@settings(max_examples=40)
@given(st.data(), st.sampled_from(["aligned", "half", "fine", "coarse", "nodes", "plane"]))
def test_any_window_is_a_part_of_the_whole(tmp_path_factory, data, kind):
    path = write_raster(
        tmp_path_factory.mktemp("s") / "v.tif", np.random.default_rng(3).normal(100, 1, (13, 17)), dtype="float64"
    )
    on = {
        "aligned": grid(11, 12, west=WEST - 2),
        "half": grid(11, 12, west=WEST + 0.3, north=NORTH - 0.7),
        "fine": grid(40, 50, cell=0.3),
        "coarse": grid(5, 6, cell=2.6),
        "nodes": grid(12, 16, west=WEST + 0.5, north=NORTH - 0.5),
        "plane": grid(11, 12),
    }[kind]
    surface = (
        PlaneGround(on, (WEST + 3, NORTH), 10.0, (0.013, 0.07))
        if kind == "plane"
        else surface_of(path, on, nodes=kind == "nodes")
    )
    whole = values_of(surface, on)
    row, column = data.draw(st.integers(0, on.rows - 1)), data.draw(st.integers(0, on.columns - 1))
    height, width = data.draw(st.integers(1, on.rows - row)), data.draw(st.integers(1, on.columns - column))
    part = values_of(surface, on, Window(row, column, height, width))
    assert np.array_equal(part, whole[row : row + height, column : column + width], equal_nan=True)


# --- refused -------------------------------------------------------------------------------------------------------


def test_rotated_and_placeless_rasters_are_refused(tmp_path):
    rotated = write_raster(tmp_path / "r.tif", HILL, transform=Affine(1, 0.2, WEST, 0.2, -1, NORTH))
    with pytest.raises(
        GroundError, match=r"r\.tif: its grid is rotated or sheared .* gdalwarp -r bilinear in\.tif out\.tif"
    ):
        surface_of(rotated, grid(2, 2))


def test_surfaces_travel_to_other_processes(tmp_path):
    import pickle

    path = write_raster(tmp_path / "hill.tif", HILL)
    on = grid(2, 2, west=WEST + 0.5, north=NORTH - 0.5)
    for surface in (surface_of(path, on), AlignedRaster(RasterSource(raster_info(path)), 0, 0), LevelGround(1.0)):
        again = pickle.loads(pickle.dumps(surface))
        assert np.array_equal(values_of(again, on), values_of(surface, on))

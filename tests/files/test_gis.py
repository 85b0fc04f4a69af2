"""Depth rasters and GeoPackages, read back with other tools than wrote them."""

from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pandas as pd
import pyogrio
import pyogrio.raw
import pyproj
import pytest
import rasterio
import shapely

from earthwork.errors import OutputError
from earthwork.files import gis
from earthwork.files.gis import DepthRasterWriter, overview_levels, write_shapes
from earthwork.ground.grid import Grid, Window

GRID = Grid(1100, 1300, 500_000.0, 4_100_000.0, 2.0, 2.0, crs=pyproj.CRS("EPSG:32611"))


def _depth():
    rows, columns = np.mgrid[0 : GRID.rows, 0 : GRID.columns]
    depth = rows * 0.01 - columns * 0.003
    depth[:50, :70] = np.nan
    return depth


def _write(path, depth, height, width, threads, factor=1.0):
    writer = DepthRasterWriter(path, GRID, description="depth", unit="m", factor=factor)
    windows = [
        Window(r, c, min(height, GRID.rows - r), min(width, GRID.columns - c))
        for r in range(0, GRID.rows, height)
        for c in range(0, GRID.columns, width)
    ]
    with ThreadPoolExecutor(threads) as pool:
        part = [depth[w.row : w.row + w.height, w.column : w.column + w.width] for w in windows]
        list(pool.map(writer.write, windows, part))
    writer.finish()


@pytest.mark.parametrize(
    ("height", "width", "threads", "pending"), [(512, 512, 1, None), (97, 333, 3, None), (97, 333, 2, 0)]
)
def test_any_windows_in_any_order_give_the_same_raster(tmp_path, monkeypatch, height, width, threads, pending):
    if pending is not None:
        monkeypatch.setattr(gis, "_PENDING_BYTES", pending)
    depth = _depth()
    _write(tmp_path / "d.tif", depth, height, width, threads)
    with rasterio.open(tmp_path / "d.tif") as file:
        assert file.crs.to_epsg() == 32611
        assert file.transform.to_gdal() == (500_000.0, 2.0, 0.0, 4_100_000.0, 0.0, -2.0)
        assert (file.profile["tiled"], file.profile["compress"], file.nodata) == (True, "deflate", -9999.0)
        assert file.descriptions == ("depth",)
        assert file.units == ("m",)
        assert file.overviews(1) == [2, 4]
        np.testing.assert_array_equal(file.read(1, masked=True).filled(np.nan), depth.astype(np.float32))


def test_overviews_are_means_of_what_is_known(tmp_path):
    depth = np.full((GRID.rows, GRID.columns), 3.0)
    depth[:, : GRID.columns // 2] = np.nan
    _write(tmp_path / "d.tif", depth, 256, 256, 1)
    with rasterio.open(tmp_path / "d.tif", overview_level=0) as file:
        small = file.read(1, masked=True)
    assert small.shape == (550, 650)
    assert set(np.unique(small.compressed())) == {3.0}
    assert small.mask[:, :324].all()


def test_depths_in_the_units_of_the_site(tmp_path):
    _write(tmp_path / "d.tif", np.full((GRID.rows, GRID.columns), 0.3048), 512, 512, 1, factor=1 / 0.3048)
    with rasterio.open(tmp_path / "d.tif") as file:
        assert np.allclose(file.read(1), 1.0)


def test_cells_that_nobody_wrote_are_no_data(tmp_path):
    writer = DepthRasterWriter(tmp_path / "d.tif", GRID, description="depth", unit="m")
    writer.write(Window(0, 0, 10, 10), np.ones((10, 10)))
    writer.finish()
    with rasterio.open(tmp_path / "d.tif") as file:
        assert file.read(1, masked=True).count() == 100


@pytest.mark.parametrize("kept", [0.0, 0.1, 0.9, 0.99])
def test_a_raster_that_was_cut_off_is_no_success(tmp_path, kept):
    path = tmp_path / "d.tif"
    writer = DepthRasterWriter(path, GRID, description="depth", unit="m")
    writer.write(GRID.window, _depth())
    writer.finish()
    with path.open("r+b") as file:
        file.truncate(int(path.stat().st_size * kept))
    with pytest.raises(OutputError, match=r"d\.tif: cannot be written"):
        writer._verify([2, 4])


def test_a_grid_without_crs(tmp_path):
    grid = Grid(4, 5, 0.0, 4.0, 1.0, 1.0)
    writer = DepthRasterWriter(tmp_path / "d.tif", grid, description="depth", unit="ft")
    writer.write(grid.window, np.arange(20.0).reshape(4, 5))
    writer.finish()
    with rasterio.open(tmp_path / "d.tif") as file:
        assert file.crs is None
        assert file.overviews(1) == []
        np.testing.assert_array_equal(file.read(1), np.arange(20).reshape(4, 5))


def test_overview_levels():
    assert overview_levels(512, 512) == []
    assert overview_levels(513, 10) == [2]
    assert overview_levels(20_000, 20_000) == [2, 4, 8, 16, 32, 64]


def test_shapes_come_back_with_their_results(tmp_path):
    names = ["=cmd", "a'b\"; DROP TABLE zones", "Hügel 🏔", "x" * 300]
    shapes = [shapely.box(i, 0, i + 1, 1) for i in range(3)]
    shapes.append(shapely.MultiPolygon([shapely.box(5, 5, 6, 6), shapely.box(8, 8, 9, 9)]))
    table = pd.DataFrame({"zone": names, "cut_m3": [1.5, None, 3.0, -4.0], "count": [1, 2, 3, 4]})
    write_shapes(tmp_path / "z.gpkg", "zones", shapes, table, crs=pyproj.CRS("EPSG:32611"))
    write_shapes(tmp_path / "z.gpkg", "one", shapes[:1], table[:1], append=True)
    assert sorted(name for name, _ in pyogrio.list_layers(tmp_path / "z.gpkg")) == ["one", "zones"]
    meta, _, geometry, fields = pyogrio.raw.read(tmp_path / "z.gpkg", layer="zones")
    assert meta["crs"] == "EPSG:32611"
    assert meta["geometry_type"] == "MultiPolygon"
    columns = dict(zip(meta["fields"], fields, strict=True))
    assert list(columns["zone"]) == names
    assert list(columns["count"]) == [1, 2, 3, 4]
    np.testing.assert_array_equal(columns["cut_m3"], [1.5, np.nan, 3.0, -4.0])
    assert [shapely.from_wkb(g).area for g in geometry] == [1.0, 1.0, 1.0, 2.0]

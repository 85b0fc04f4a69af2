"""The depth raster holds what a plain difference of the two rasters gives, however the ground is cut into tiles."""

import geopandas
import numpy as np
import pytest
import rasterio
from rasterio.features import geometry_mask
from rasterio.transform import from_origin
from shapely.geometry import Polygon

from earthwork.files.output import OutputFolder
from earthwork.quantities.site_ground import open_site
from earthwork.quantities.volumes import count_volumes
from earthwork.reporting.depth_raster import DepthRasterTally, ThicknessRasterTally
from earthwork.reporting.maps import map_tallies
from earthwork.site import check_site
from earthwork.units import METRIC

ROWS, COLUMNS = 83, 61
PLACE = from_origin(500_000, 4_400_000, 1, 1)


@pytest.fixture
def ground():
    x, y = np.meshgrid(np.arange(COLUMNS), np.arange(ROWS))
    existing = (100 + np.sin(x / 9) + np.cos(y / 7)).astype("float32")
    finished = (100 + 0.01 * x).astype("float32")
    existing[30:33, 20:40] = np.nan
    return existing, finished


def site_of(folder, surfaces, *, ground=None, **tables):
    for name, values in zip(("existing", "finished"), surfaces, strict=True):
        profile = {"driver": "GTiff", "height": ROWS, "width": COLUMNS, "count": 1, "dtype": "float32",
                   "crs": "EPSG:32614", "transform": PLACE}  # fmt: skip
        with rasterio.open(folder / f"{name}.tif", "w", **profile) as file:
            file.write(values, 1)
    files = {"existing": "existing.tif", "finished": "finished.tif", "ground_scale": 1.0, **(ground or {})}
    return check_site({"site": {"name": "test", "units": "metric"}, "ground": files, **tables}, folder)


def written(folder, site, tally, **walk):
    count_volumes(site, open_site(site), tallies=[tally], **walk)
    tally.finish()
    with rasterio.open(tally.path) as file:
        return file.read(1, masked=True).filled(np.nan)


@pytest.mark.parametrize("walk", [{}, {"threads": 3, "tile_cells": 90, "band_rows": 7}, {"band_rows": 3}])
def test_depths_are_the_difference_of_the_rasters(tmp_path, ground, walk):
    site = site_of(tmp_path, ground)
    found = written(tmp_path, site, DepthRasterTally(tmp_path / "d.tif", METRIC), **walk)
    np.testing.assert_array_equal(found, ground[1] - ground[0])


@pytest.mark.parametrize("walk", [{}, {"threads": 2, "tile_cells": 90, "band_rows": 7}])
def test_cells_outside_the_limits_are_no_data(tmp_path, ground, walk):
    limits = Polygon([(500_003.5, 4_399_930.25), (500_050.5, 4_399_950.5), (500_020.5, 4_399_993.75)])
    geopandas.GeoDataFrame(geometry=[limits], crs="EPSG:32614").to_file(tmp_path / "limits.gpkg")
    site = site_of(tmp_path, ground, ground={"limits": "limits.gpkg"})
    found = written(tmp_path, site, DepthRasterTally(tmp_path / "d.tif", METRIC), **walk)
    outside = geometry_mask([limits], (ROWS, COLUMNS), PLACE, all_touched=True)
    inside = np.where(outside, np.nan, ground[1] - ground[0])
    # the grid is as large as the limits are: rows 6 to 69, columns 3 to 50
    np.testing.assert_array_equal(found, inside[6:70, 3:51])


@pytest.mark.parametrize("walk", [{}, {"threads": 2, "tile_cells": 90, "band_rows": 7}])
def test_thickness_has_the_refill_of_what_is_dug_out(tmp_path, ground, walk):
    site = site_of(tmp_path, ground, over_excavation=[{"name": "all", "depth": 0.5}])
    found = written(tmp_path, site, ThicknessRasterTally(tmp_path / "t.tif", METRIC), **walk)
    depth = ground[1] - ground[0]
    # what lies within 1 cm of the grade is not disturbed, and nothing is dug there
    thickness = np.maximum(depth, 0) + np.where(abs(depth) <= 0.01, 0.0, 0.5)
    np.testing.assert_allclose(found, thickness, atol=1e-5)


def test_an_interrupted_run_closes_its_raster_and_leaves_nothing(tmp_path, ground):
    site = site_of(tmp_path, ground)
    rasters = []

    class Stop:
        depth_only = True

        def empty(self):
            return self

        def add(self, tile):
            raise KeyboardInterrupt

        def merge(self, other):
            pass

    def run():
        with OutputFolder(tmp_path / "out", patterns=("*.tif",), overwrite=False) as folder:
            _, raster = map_tallies(site, folder, "volumes")
            rasters.append(raster)
            count_volumes(site, open_site(site), tallies=[raster, Stop()])

    with pytest.raises(KeyboardInterrupt):
        run()
    assert rasters[0]._shared.writer._file.closed
    assert not (tmp_path / "out").exists()

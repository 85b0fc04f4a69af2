"""Small sites on disk: two rasters and a site document."""

from __future__ import annotations

import numpy as np
import pytest
import rasterio
from rasterio.transform import from_origin

from earthwork.site import check_site

LOESS = {
    "use": "fill",
    "specific_gravity": 2.7,
    "bank": {"dry_density": 1600.0, "water_content": 10.0},
    "loose": {"swell_percent": 25.0},
    "proctor": {"method": "ASTM D698", "max_dry_density": 1800.0, "optimum_water_content": 14.0},
}
FILL = {"relative_compaction": 95.0, "expected_compaction": 100.0}


def write_raster(path, values, cell=1.0):
    values = np.asarray(values, dtype=np.float64)
    transform = from_origin(500_000, 4_000_000, cell, cell)
    profile = {"driver": "GTiff", "width": values.shape[1], "height": values.shape[0], "count": 1, "dtype": "float64"}
    with rasterio.open(path, "w", transform=transform, **profile) as file:
        file.write(values, 1)


@pytest.fixture
def make_site(tmp_path):
    """A site of two arrays; further tables of the site file as keywords. No CRS: a local grid of scale 1."""

    def make(existing, finished, *, cell=1.0, units="metric", **tables):
        write_raster(tmp_path / "existing.tif", existing, cell)
        write_raster(tmp_path / "finished.tif", finished, cell)
        ground = {"existing": "existing.tif", "finished": "finished.tif", **tables.pop("ground", {})}
        return check_site({"site": {"name": "test", "units": units}, "ground": ground, **tables}, tmp_path)

    return make

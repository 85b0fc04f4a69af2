"""Surfaces that meet on one grid: which grid, which cells, which way of resampling, and what is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from earthwork.ground.surfaces import open_ground
from earthwork.site import site_from_files

BEACH = Path(__file__).parents[2] / "../shared/data/pair_beach_leo"

# first date, second date, valid cells, cut m³, fill m³: numpy, bilinear, by another hand (README of the data)
BEACH_PAIRS = [
    ("20180606", "20180713", 140535, 45187.6119, 20000.7717),
    ("20180713", "20190211", 92682, 25552.0326, 44933.7618),
    ("20190211", "20190731", 85183, 11955.3179, 30313.8588),
    ("20180606", "20190731", 82019, 15872.9308, 31297.2944),
]


@pytest.mark.skipif(not BEACH.is_dir(), reason="the folder of open data is not here")
@pytest.mark.parametrize(("before", "after", "cells", "cut", "fill"), BEACH_PAIRS)
def test_beach_surveys_on_grids_that_never_coincide(before, after, cells, cut, fill):
    names = [BEACH / f"leo_{date}_dsm_resampled_1m.tif" for date in (before, after)]
    ground = open_ground(site_from_files(*names, nodata=-10000))
    old, new = (s.reader().read(ground.grid.window) for s in (ground.existing, ground.finished))
    depth = new.astype(np.float64) - old
    depth = depth[np.isfinite(depth)]
    map_area = ground.grid.cell_east * ground.grid.cell_north
    assert (ground.existing.resampling, ground.finished.resampling) == ("none", "bilinear")
    assert depth.size == cells
    assert -np.minimum(depth, 0).sum() * map_area == pytest.approx(cut, abs=1e-3)
    assert np.maximum(depth, 0).sum() * map_area == pytest.approx(fill, abs=1e-3)

"""Ground without data is named with its place, and apart from what lies beyond the surfaces."""

import geopandas
import numpy as np
import pytest
import rasterio
from rasterio.transform import from_origin
from shapely.geometry import box

import earthwork
from earthwork.site import check_site


def missing_of(folder, hole, limits):
    level = np.full((100, 180), 10.0, "float32")
    if hole:
        level[40:46, 40:60] = np.nan  # 120 cells of 1 m²
    for name, values in (("existing", level), ("finished", np.full((100, 180), 11.0, "float32"))):
        profile = {"driver": "GTiff", "height": 100, "width": 180, "count": 1, "dtype": "float32",
                   "crs": "EPSG:32614", "transform": from_origin(500_000, 4_400_000, 1, 1)}  # fmt: skip
        with rasterio.open(folder / f"{name}.tif", "w", **profile) as file:
            file.write(values, 1)
    geopandas.GeoDataFrame(geometry=[limits], crs="EPSG:32614").to_file(folder / "limits.gpkg")
    ground = {"existing": "existing.tif", "finished": "finished.tif", "limits": "limits.gpkg", "ground_scale": 1.0}
    found = earthwork.volumes(check_site({"site": {"name": "t", "units": "metric"}, "ground": ground}, folder))
    return found.total.missing_area_m2, [w.message for w in found.warnings if w.code == "missing-data"]


INSIDE = box(500_010, 4_399_910, 500_170, 4_399_990)
BEYOND = box(500_010, 4_399_910, 500_185, 4_399_990)  # 5 m × 80 m more than there is


@pytest.mark.parametrize(
    ("hole", "limits", "area", "text"),
    [
        (True, INSIDE, 120.0, "120 m² of the site have no data, within easting 500040.00 to 500060.00, northing "
         "4399954.00 to 4399960.00; they count neither as cut nor as fill"),
        (True, BEYOND, 520.0, "520 m² of the site have no data: 120 m² within easting 500040.00 to 500060.00, northing "
         "4399954.00 to 4399960.00, and 400 m² beyond what the surfaces cover; they count neither as cut nor as fill"),
        (False, BEYOND, 400.0, "400 m² of the site have no data: they lie beyond what the surfaces cover; they count "
         "neither as cut nor as fill"),
    ],
)  # fmt: skip
def test_missing_ground_is_named_where_it_lies(tmp_path, hole, limits, area, text):
    found, messages = missing_of(tmp_path, hole, limits)
    assert found == pytest.approx(area, abs=1e-6)
    assert messages == [text]


def test_nothing_missing_is_not_spoken_of(tmp_path):
    assert missing_of(tmp_path, False, INSIDE) == (0.0, [])

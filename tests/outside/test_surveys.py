"""Real surveys of others through the command line, against figures that were worked out with plain numpy.

The figures of the tables are plain sums of depth × area over whole cells, as the notes beside each data set give them
(recipes there), so they are compared with ``unsplit``, on the map: ground quantities divided by the ground scale.
"""

import numpy as np
import pyogrio
import pytest
import rasterio
import shapely

from tests.outside.conftest import data, write_polygons, write_raster, write_site

# --- beach: four drone surveys of one beach, about 1 m, no nodata tag, grids that never coincide ---

BEACH = "leo_{}_dsm_resampled_1m.tif"
#: before, after, zone?, cells, cut, fill [m³]: bilinear, then cut and fill by the nearest cell, which shows what the
#: choice of resampling is worth. Recipe: depths on the grid of the survey before; zone by cell centres.
BEACH_FIGURES = [
    ("20180606", "20180713", False, 140535, 45187.6119, 20000.7717, 46172.6565, 20254.2026),
    ("20180606", "20180713", True, 103820, 33620.9176, 13646.9848, 34261.1713, 13457.1837),
    ("20180713", "20190211", False, 92682, 25552.0326, 44933.7618, 25908.4585, 45737.0104),
    ("20180713", "20190211", True, 57239, 1101.6634, 42459.8806, 1526.1309, 43021.1003),
    ("20190211", "20190731", False, 85183, 11955.3179, 30313.8588, 12103.5291, 30606.0177),
    ("20190211", "20190731", True, 46787, 8875.0280, 1926.6736, 8829.3297, 2207.1746),
    ("20180606", "20190731", False, 82019, 15872.9308, 31297.2944, 16576.5182, 31473.8864),
    ("20180606", "20190731", True, 47202, 1588.0936, 21985.4244, 2132.3168, 21879.7213),
]


@pytest.mark.parametrize(("before", "after", "zone", "cells", "cut", "fill", "other_cut", "other_fill"), BEACH_FIGURES)
def test_beach(tmp_path, volumes, before, after, zone, cells, cut, fill, other_cut, other_fill):
    folder = data("pair_beach_leo")
    surfaces = {"existing": folder / BEACH.format(before), "finished": folder / BEACH.format(after)}
    found = volumes("--nodata", -10000, *(["--limits", beach_zone(tmp_path)] if zone else []), **surfaces)
    scale = found["grid"]["ground_scale"]
    map_cut, map_fill = (found["unsplit"][key] / scale**2 for key in ("cut_m3", "fill_m3"))
    with rasterio.open(surfaces["existing"]) as source:
        cell = abs(source.transform.a * source.transform.e)
    if (before, after, zone) == ("20180713", "20190211", False):
        # The survey before is the finer one: the same grid and the same resampling as the recipe's.
        assert map_cut == pytest.approx(cut, rel=1e-6)
        assert map_fill == pytest.approx(fill, rel=1e-6)
        assert found["total"]["area_m2"] / scale**2 == pytest.approx(cells * cell, rel=1e-9)
        return
    # Another grid, or whole cells by their centres: within what bilinear and nearest differ by.
    assert map_cut == pytest.approx(cut, abs=abs(cut - other_cut) + 0.005 * cut)
    assert map_fill == pytest.approx(fill, abs=abs(fill - other_fill) + 0.005 * fill)
    assert found["total"]["area_m2"] / scale**2 == pytest.approx(cells * cell, rel=0.012)


def beach_zone(tmp_path):
    """The polygon of this beach out of a file of two, left in its own CRS, which is not that of the surveys."""
    meta, _, geometry, columns = pyogrio.raw.read(data("pair_beach_leo") / "shoremasks.gpkg")
    names = list(columns[list(meta["fields"]).index("location")])
    polygons = [shapely.force_2d(g) for g, n in zip(shapely.from_wkb(geometry), names, strict=True) if n == "leo"]
    parts = [part for polygon in polygons for part in shapely.get_parts(polygon)]
    return write_polygons(tmp_path / "zone.gpkg", parts, crs=meta["crs"])


def test_beach_without_its_nodata_value_is_refused(earthwork):
    """-10000 is not tagged: depths of ten kilometres are no ground, and the message says what to state."""
    folder = data("pair_beach_leo")
    files = ["--existing", folder / BEACH.format("20180606"), "--finished", folder / BEACH.format("20180713")]
    ran = earthwork("volumes", *files, "--json")
    assert (ran.code, ran.stdout) == (2, "")
    assert "nodata = -10000" in ran.stderr


def test_beach_zone_area(tmp_path, volumes):
    """139,015.067 m² after reprojection of the polygon's corners to the CRS of the surveys."""
    folder = data("pair_beach_leo")
    found = volumes(
        "--nodata", -10000, "--limits", beach_zone(tmp_path),
        existing=folder / BEACH.format("20180606"), finished=folder / BEACH.format("20180713"),
    )  # fmt: skip
    total, scale = found["total"], found["grid"]["ground_scale"]
    assert (total["area_m2"] + total["missing_area_m2"]) / scale**2 == pytest.approx(139_015.067, rel=1e-5)


# --- landslide: 10 m ASCII grids without CRS; the observed difference exists in 224 of 9760 cells ---


@pytest.fixture
def landslide(tmp_path):
    """The ground before, and before + observed difference where that is known."""
    folder = data("pair_landslide_helens")
    with rasterio.open(folder / "pre_runout_DEM.asc") as source:
        before, corner = source.read(1).astype(float), (source.transform.c, source.transform.f)
    with rasterio.open(folder / "DEM_of_Difference.asc") as source:
        difference = source.read(1).astype(float)
    known = (before != -9999) & (difference != -9999)
    after = np.where(known, before + difference, -9999)
    finished = write_raster(tmp_path / "after.tif", after, cell=10.0, corner=corner, nodata=-9999)
    return folder / "pre_runout_DEM.asc", finished


def test_landslide(landslide, earthwork):
    existing, finished = landslide
    ran = earthwork("volumes", "--existing", existing, "--finished", finished, "--json")
    found = ran.result
    assert found["unsplit"]["cut_m3"] == pytest.approx(26406.6031, rel=1e-5)
    assert found["unsplit"]["fill_m3"] == pytest.approx(22542.7702, rel=1e-5)
    total = found["total"]
    assert total["cut_minus_fill_m3"] == pytest.approx(3863.8329, rel=1e-4)
    assert total["area_m2"] == pytest.approx(22_400, rel=1e-9)
    assert total["missing_area_m2"] == pytest.approx((9760 - 224) * 100, rel=1e-9)
    assert found["grid"]["ground_scale"] == 1.0
    assert "missing-data" in ran.warning_codes


def test_landslide_scar(tmp_path, landslide, volumes):
    """The 30 cells of the scar, as polygons of cells: cut 21,280.7270 m³, fill 210.7610 m³."""
    from rasterio.features import shapes

    existing, finished = landslide
    with rasterio.open(data("pair_landslide_helens") / "landslide_polygon.asc") as source:
        inside = (source.read(1) == 1).astype(np.uint8)
        parts = [shapely.geometry.shape(s) for s, _ in shapes(inside, inside == 1, transform=source.transform)]
    limits = write_polygons(tmp_path / "scar.geojson", parts)
    found = volumes("--limits", limits, existing=existing, finished=finished)
    assert found["total"]["area_m2"] == pytest.approx(3000, rel=1e-9)
    assert found["unsplit"]["cut_m3"] == pytest.approx(21280.7270, rel=1e-5)
    assert found["unsplit"]["fill_m3"] == pytest.approx(210.7610, rel=1e-4)


# --- level pads on single elevation models ---


def level_pad(tmp_path, volumes, file, level, **keys):
    more = "".join(f", {key} = {value}" for key, value in keys.items())
    text = f'[ground]\nexisting = {{ file = "{file}"{more} }}\nfinished = {{ level = {level} }}'
    return volumes(write_site(tmp_path, text))


@pytest.mark.parametrize(
    ("file", "level", "cells", "cell", "cut", "fill"),
    [
        ("west_bijou_gully.asc", 1700.0, 1088, 3.0, 107514.0330, 24502.2045),  # nodata 0
        ("DEM-kootenai_37x50_1x1.asc", 540.0, 1850, 1.0, 1462.5900, 1748.0390),
    ],
)
def test_level_pad(tmp_path, volumes, file, level, cells, cell, cut, fill):
    found = level_pad(tmp_path, volumes, data("dem_singles") / file, level)
    assert found["unsplit"]["cut_m3"] == pytest.approx(cut, rel=1e-7)
    assert found["unsplit"]["fill_m3"] == pytest.approx(fill, rel=1e-7)
    assert found["total"]["area_m2"] == pytest.approx(cells * cell**2, rel=1e-12)
    assert found["total"]["cut_minus_fill_m3"] == pytest.approx(cut - fill, rel=1e-7)


def test_web_mercator_pad(tmp_path, volumes, earthwork):
    """A level of 20 m in San Francisco Bay in EPSG:3857: geodesic cell areas give cut 125,073,857, fill 50,007,318 m³.

    In Web Mercator "metres" both would be 1.604457 times as large. One scale at the middle serves the whole site:
    over these 3 km it is right within a part in a thousand.
    """
    path = data("dem_web_mercator") / "elev.tif"
    found = level_pad(tmp_path, volumes, path, 20.0)
    assert found["total"]["area_m2"] == pytest.approx(6_654_276.828, rel=1e-3)
    assert found["unsplit"]["cut_m3"] == pytest.approx(125_073_857.06, rel=1e-3)
    assert found["unsplit"]["fill_m3"] == pytest.approx(50_007_318.45, rel=1e-3)
    assert found["grid"]["ground_scale"] ** -2 == pytest.approx(1.604457, rel=1e-3)
    assert earthwork("volumes", tmp_path / "site.toml", "--json").warning_codes == ["web-mercator"]


@pytest.mark.parametrize(
    ("sample", "volume", "area"), [("cell", 19_204_900.0, 530_700), ("node", 19_049_000.0, 516_000)]
)
def test_volcano_as_cells_and_as_nodes(tmp_path, volumes, sample, volume, area):
    """Maunga Whau above 94 m: the values as 10 m cells, or as grid nodes with patches between them."""
    heights = np.loadtxt(data("survey_davis_volcano") / "volcano.csv", delimiter=",", skiprows=1, dtype=str)
    heights = np.array([[float(v.strip('"')) for v in row] for row in heights])
    heights = heights[:, -61:]
    assert heights.shape == (87, 61)
    write_raster(tmp_path / "hill.tif", heights, cell=10.0)
    found = level_pad(tmp_path, volumes, "hill.tif", 94.0, sample=f'"{sample}"')
    assert found["total"]["cut_minus_fill_m3"] == pytest.approx(volume, rel=1e-12)
    assert found["unsplit"] == {"cut_m3": pytest.approx(volume, rel=1e-12), "fill_m3": 0.0}
    assert found["total"]["area_m2"] == pytest.approx(area, rel=1e-12)
    assert found["grid"]["sample"] == sample

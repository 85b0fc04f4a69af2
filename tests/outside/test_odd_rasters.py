"""Odd and broken rasters, through the command line: each is read right, or refused with the reason."""

import numpy as np
import pytest
import rasterio

from tests.outside.conftest import data, run_process, write_raster, write_site


def against_level(folder, file, level, **keys):
    more = "".join(f", {key} = {value}" for key, value in keys.items())
    return write_site(folder, f'[ground]\nexisting = {{ file = "{file}"{more} }}\nfinished = {{ level = {level} }}')


def refused(tmp_path, file, **keys):
    ran = run_process("volumes", against_level(tmp_path, data("rasters_odd") / file, 1.0, **keys), cwd=tmp_path)
    assert ran.code == 2, ran.stdout + ran.stderr
    assert "Traceback" not in ran.stderr
    assert ran.stdout == ""
    return ran.stderr


@pytest.mark.parametrize(
    ("file", "says"),
    [
        ("rotated.tif", "rotated"),
        ("corrupt.tif", "corrupt.tif"),
        ("all-nodata.tif", "no.*data"),
        ("cog_uint8_rgb_mask.tif", "EPSG:4326.*geographic|geographic.*EPSG:4326|degrees"),
        ("N10W110.hgt.zip", "geographic|degrees"),
    ],
)
def test_refused_with_the_reason(tmp_path, file, says):
    import re

    assert re.search(says, refused(tmp_path, file), re.IGNORECASE | re.DOTALL)


@pytest.mark.parametrize(("file", "cells"), [("float.tif", 6), ("float_nan.tif", 5)])
def test_south_up(tmp_path, volumes, file, cells):
    """Two rows of three cells of 100 m whose first row is the southern one; in float_nan.tif one is NaN."""
    path = data("rasters_odd") / file
    with rasterio.open(path) as source:
        values = source.read(1).astype(float)
        assert source.transform.e > 0
    found = volumes(against_level(tmp_path, path, 0.0))
    assert found["total"]["area_m2"] == cells * 10_000
    assert found["total"]["missing_area_m2"] == (6 - cells) * 10_000
    assert found["unsplit"]["cut_m3"] == pytest.approx(np.nansum(np.clip(values, 0, None)) * 10_000, rel=1e-6)
    assert found["unsplit"]["fill_m3"] == pytest.approx(np.nansum(np.clip(-values, 0, None)) * 10_000, rel=1e-6)


def test_south_up_lies_where_it_says(tmp_path, volumes):
    """The same ground north-up and south-up: nothing is moved between the two."""
    ground = np.arange(12.0).reshape(3, 4)
    up = write_raster(tmp_path / "up.tif", ground, cell=5.0)
    with rasterio.open(
        tmp_path / "down.tif", "w", driver="GTiff", height=3, width=4, count=1, dtype="float64",
        transform=rasterio.Affine(5.0, 0.0, 500.0, 0.0, 5.0, 885.0),
    ) as target:  # fmt: skip
        target.write(ground[::-1], 1)
    total = volumes(existing=up, finished=tmp_path / "down.tif")["total"]
    assert (total["area_m2"], total["cut_m3"], total["fill_m3"]) == (300, 0, 0)


def test_scale_and_offset(tmp_path, volumes):
    """int16 with scale 0.0001 and offset 1000: band 1 against 1000 m."""
    path = data("rasters_odd") / "cog_scale.tif"
    with rasterio.open(path) as source:
        raw, cell = source.read(1), abs(source.transform.a * source.transform.e)
        depth = 1000 - (raw[raw != source.nodata] * source.scales[0] + source.offsets[0])
    found = volumes(against_level(tmp_path, path, 1000.0))
    scale = found["grid"]["ground_scale"]
    assert found["total"]["area_m2"] == pytest.approx(depth.size * cell * scale**2, rel=1e-9)
    assert found["unsplit"]["cut_m3"] == pytest.approx(-depth[depth < 0].sum() * cell * scale**2, rel=1e-9)
    assert found["unsplit"]["fill_m3"] == pytest.approx(depth[depth > 0].sum() * cell * scale**2, rel=1e-9)


@pytest.mark.parametrize(
    "file",
    ["float_raster_with_nodata.tif", "float_raster_with_extra_nodata.tif", "goes.tif", "byte.tif", "test_esri_wkt.tif"],
)
def test_nodata_mask_and_crs_of_others(tmp_path, volumes, file):
    """A nodata value near float32's lowest, a mask band, bytes, and a CRS that only its WKT tells."""
    path = data("rasters_odd") / file
    with rasterio.open(path) as source:
        values, cell = source.read(1, masked=True).astype(float), abs(source.transform.a * source.transform.e)
    depth = 10.0 - values.compressed()
    found = volumes(against_level(tmp_path, path, 10.0))
    scale = found["grid"]["ground_scale"]
    assert found["total"]["area_m2"] == pytest.approx(depth.size * cell * scale**2, rel=1e-9)
    assert found["unsplit"]["cut_m3"] == pytest.approx(-depth[depth < 0].sum() * cell * scale**2, rel=1e-9)
    assert found["unsplit"]["fill_m3"] == pytest.approx(depth[depth > 0].sum() * cell * scale**2, rel=1e-9)


def test_ascii_grid_without_nodata_line(tmp_path, volumes):
    """4 × 3 cells of 10 m, 0 to 11 m, all valid: mean 5.5 m over level 0."""
    found = volumes(against_level(tmp_path, data("dem_singles") / "4_x_3_no_nodata_value.asc", 0.0))
    assert found["unsplit"]["cut_m3"] == pytest.approx(66 * 100, rel=1e-12)
    assert found["total"]["cut_minus_fill_m3"] == pytest.approx(66 * 100, rel=1e-12)
    assert found["total"]["area_m2"] == 1200


@pytest.mark.parametrize("dtype", ["uint8", "int16", "int32", "float32"])
def test_number_types(tmp_path, volumes, dtype):
    ground = np.array([[3, 5, 7], [11, 13, 17]])
    path = write_raster(tmp_path / "ground.tif", ground, cell=2.0, dtype=dtype, nodata=13)
    found = volumes(against_level(tmp_path, path, 7.0))
    assert found["unsplit"] == {"cut_m3": (4 + 10) * 4.0, "fill_m3": (4 + 2) * 4.0}
    assert found["total"]["missing_area_m2"] == 4.0


def test_vrt_and_stated_nodata(tmp_path, volumes):
    """A virtual raster, and a hole of 0 that only the site file tells."""
    import rasterio.shutil

    write_raster(tmp_path / "ground.tif", np.array([[10.0, 0.0], [12.0, 14.0]]), cell=10.0)
    rasterio.shutil.copy(tmp_path / "ground.tif", tmp_path / "ground.vrt", driver="VRT")
    total = volumes(against_level(tmp_path, "ground.vrt", 10.0, nodata=0))["total"]
    assert (total["cut_minus_fill_m3"], total["area_m2"], total["missing_area_m2"]) == (600, 300, 100)


@pytest.mark.parametrize(("unit", "refused_"), [("ft", False), ("m", True)])
def test_ground_at_9999(tmp_path, earthwork, unit, refused_):
    """9,999 ft is ground in many mountain counties; 9,999 m is above every summit, and so a marker."""
    path = write_raster(tmp_path / "high.tif", np.array([[9999.0, 9998.0], [9997.0, 9996.0]]), cell=10.0)
    site = against_level(tmp_path, path, 3000.0, vertical_unit=f'"{unit}"')
    ran = earthwork("volumes", site, "--json")
    assert ran.code == (2 if refused_ else 0), ran.stderr
    if refused_:
        assert "9999" in ran.stderr
        assert "nodata" in ran.stderr
    else:
        assert ran.result["total"]["cut_minus_fill_m3"] == pytest.approx((39990 * 0.3048 - 12000) * 100, rel=1e-9)

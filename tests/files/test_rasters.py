"""Rasters as users have them: facts, windows in metres, missing data in all its spellings, and what is refused."""

from __future__ import annotations

import subprocess
import sys
import zipfile

import numpy as np
import pytest
import rasterio
from hypothesis import given, settings
from hypothesis import strategies as st
from rasterio.transform import Affine

from earthwork.errors import FileError
from earthwork.files.raster_open import CACHE_BYTES
from earthwork.files.rasters import RasterSource, foot_of_site, raster_info
from earthwork.units import FOOT_M, US_SURVEY_FOOT_M
from tests.rasters import write_raster

HILL = np.array([[101.0, 102.0, 103.0], [104.0, 105.0, 106.0]])


def read(path, window=None, **options):
    info = raster_info(path)
    reader = RasterSource(info, **options).reader()
    try:
        return reader.read(*(window or (0, 0, info.rows, info.columns)))
    finally:
        reader.close()


# --- facts ---------------------------------------------------------------------------------------------------------


def test_facts_of_a_file(tmp_path):
    path = write_raster(tmp_path / "hill.tif", HILL, cell=(2.0, 3.0), nodata=-9999, crs="EPSG:32611+5703")
    info = raster_info(path)
    assert (info.rows, info.columns, info.dtype, info.nodata) == (2, 3, "float32", -9999.0)
    assert (info.west, info.north, info.cell_east, info.cell_north) == (500_000.0, 4_100_000.0, 2.0, 3.0)
    assert info.bounds == (500_000.0, 4_099_994.0, 500_006.0, 4_100_000.0)
    assert (info.south_up, info.rotated, info.placed, info.masked) == (False, False, True, False)
    assert info.vertical.datum == "North American Vertical Datum 1988"
    assert info.crs.sub_crs_list[0].to_epsg() == 32611


def test_blocks_are_the_file_s(tmp_path):
    tiled = write_raster(tmp_path / "t.tif", np.zeros((64, 64)), tiled=True, blockxsize=32, blockysize=16)
    strips = write_raster(tmp_path / "s.tif", np.zeros((64, 64)), blockysize=8)
    assert raster_info(tiled).block == (16, 32)
    assert raster_info(strips).block == (8, 64)


@pytest.mark.parametrize(
    ("transform", "rotated"),
    [(Affine(1, 0, 0, 0, -1, 0), False), (Affine(1, 0.1, 0, 0, -1, 0), True), (Affine(0, 1, 0, 1, 0, 0), True),
     (Affine(1, 0, 0, 1e-12, -1, 0), False)],
)  # fmt: skip
def test_rotation_is_seen(tmp_path, transform, rotated):
    assert raster_info(write_raster(tmp_path / "r.tif", HILL, transform=transform)).rotated is rotated


# --- windows -------------------------------------------------------------------------------------------------------


def test_a_window_is_rows_from_the_north(tmp_path):
    path = write_raster(tmp_path / "hill.tif", HILL)
    assert read(path, (0, 1, 2, 2)).tolist() == [[102.0, 103.0], [105.0, 106.0]]


def test_south_up_files_are_turned(tmp_path):
    north_up = write_raster(tmp_path / "n.tif", HILL)
    south_up = write_raster(tmp_path / "s.tif", HILL, south_up=True)
    assert raster_info(south_up).south_up
    assert raster_info(south_up).bounds == raster_info(north_up).bounds
    for window in [(0, 0, 2, 3), (1, 0, 1, 3), (0, 2, 1, 1)]:
        turned = read(south_up, window)
        assert turned.tolist() == read(north_up, window).tolist()
        assert turned.flags.c_contiguous


def test_mirrored_files_are_turned(tmp_path):
    mirrored = write_raster(tmp_path / "m.tif", HILL, transform=Affine(-1, 0, 500_003, 0, -1, 4_100_000))
    info = raster_info(mirrored)
    assert (info.west, info.cell_east, info.rotated) == (500_000.0, 1.0, False)
    assert read(mirrored, (0, 0, 2, 2)).tolist() == [[103.0, 102.0], [106.0, 105.0]]


@settings(max_examples=30)
@given(st.data(), st.booleans(), st.booleans())
def test_any_window_is_a_part_of_the_whole(tmp_path_factory, data, south_up, mirrored):
    rows, columns = 7, 9
    values = np.arange(rows * columns, dtype=float).reshape(rows, columns)
    transform = Affine(-1 if mirrored else 1, 0, 9 if mirrored else 0, 0, 1 if south_up else -1, 0)
    path = write_raster(tmp_path_factory.mktemp("w") / "w.tif", values, transform=transform)
    whole = read(path)
    row, column = data.draw(st.integers(0, rows - 1)), data.draw(st.integers(0, columns - 1))
    height, width = data.draw(st.integers(1, rows - row)), data.draw(st.integers(1, columns - column))
    part = read(path, (row, column, height, width))
    assert part.tolist() == whole[row : row + height, column : column + width].tolist()


# --- types and units -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("stored", "given"),
    [("uint8", "float32"), ("int16", "float32"), ("uint16", "float32"), ("float32", "float32"),
     ("int32", "float64"), ("uint32", "float64"), ("float64", "float64")],
)  # fmt: skip
def test_single_precision_only_where_it_is_exact(tmp_path, stored, given):
    values = read(write_raster(tmp_path / "v.tif", HILL, dtype=stored))
    assert values.dtype == given
    assert values.tolist() == HILL.tolist()


def test_large_integers_keep_every_digit(tmp_path):
    # 2^24 + 1 is no float32; millimetres
    path = write_raster(tmp_path / "v.tif", [[16_777_217]], dtype="int32")
    assert read(path, unit_m=0.0001).item() == pytest.approx(1677.7217, abs=1e-12)


def test_scale_and_offset(tmp_path):
    # stored 1234 → 1234 × 0.01 + 100 = 112.34 m
    path = write_raster(tmp_path / "v.tif", [[1234, -9]], dtype="int16", scale=0.01, offset=100.0, nodata=-9)
    values = read(path)
    assert values.dtype == np.float64
    assert values[0, 0] == pytest.approx(112.34, abs=1e-12)
    assert np.isnan(values[0, 1])


@pytest.mark.parametrize("foot", [FOOT_M, US_SURVEY_FOOT_M])
def test_feet_become_metres_in_double_precision(tmp_path, foot):
    values = read(write_raster(tmp_path / "v.tif", [[1000.0]]), unit_m=foot)
    assert values.dtype == np.float64
    assert values.item() == 1000.0 * foot


# --- missing data --------------------------------------------------------------------------------------------------


def missing(values):
    return np.isnan(values).tolist()


@pytest.mark.parametrize("dtype", ["float32", "float64", "int16", "int32"])
def test_a_tagged_value_is_missing(tmp_path, dtype):
    path = write_raster(tmp_path / "v.tif", [[1, -9999, 3]], dtype=dtype, nodata=-9999)
    assert missing(read(path)) == [[False, True, False]]


def test_a_stated_value_is_missing_beside_the_tagged_one(tmp_path):
    path = write_raster(tmp_path / "v.tif", [[1, -9999, -500]], nodata=-9999)
    assert missing(read(path)) == [[False, True, False]]
    assert missing(read(path, nodata=-500)) == [[False, True, True]]


@pytest.mark.parametrize("marker", [-9999.0, -10000.0, -32768.0, 65535.0, 1e20, -3.4028235e38])
def test_a_marker_that_nothing_declares_is_refused_with_its_place(tmp_path, marker):
    path = write_raster(tmp_path / "v.tif", [[1, 2], [3, marker]])
    with pytest.raises(
        FileError, match=r"it holds the value .* at easting 500001, northing 4099999, which is no elevation"
    ):
        read(path)
    assert missing(read(path, nodata=marker)) == [[False, False], [False, True]]


def test_markers_are_looked_for_among_stored_values(tmp_path):
    """A stored 9999 at a scale of 1 mm is 10 m of ground; −32768 at the same is 33 m below the sea."""
    path = write_raster(tmp_path / "v.tif", [[9999, -32768]], dtype="int16", scale=0.001)
    assert read(path)[0].tolist() == pytest.approx([9.999, -32.768], abs=1e-12)
    # 9,999 ft is a mountain of 3,048 m, −9999 ft is nowhere
    assert read(write_raster(tmp_path / "a.tif", [[9999.0]]), unit_m=FOOT_M).item() == 9999 * FOOT_M
    with pytest.raises(FileError, match="it holds the value -9999"):
        read(write_raster(tmp_path / "b.tif", [[-9999.0]]), unit_m=FOOT_M)


def test_high_numbers_that_are_no_markers_are_let_pass(tmp_path):
    assert read(write_raster(tmp_path / "v.tif", [[12_345.0]])).item() == 12_345.0


def test_nan_and_infinities_are_missing(tmp_path):
    path = write_raster(tmp_path / "v.tif", [[1, np.nan, np.inf, -np.inf]])
    assert missing(read(path)) == [[False, True, True, True]]


def test_a_nodata_tag_of_nan(tmp_path):
    assert missing(read(write_raster(tmp_path / "v.tif", [[1, np.nan]], nodata=np.nan))) == [[False, True]]


def test_the_lowest_float32_as_programs_round_it(tmp_path):
    lowest = float(np.finfo(np.float32).min)
    path = write_raster(tmp_path / "v.tif", [[1, lowest]])
    assert missing(read(path, nodata=-3.40282347e38)) == [[False, True]]  # below the range once it is rounded up
    assert missing(read(path, nodata=-3.4028234663852886e38)) == [[False, True]]


def test_a_stated_fraction_is_compared_as_the_file_stores_it(tmp_path):
    """−9999.9 is no float32; read in double precision for its feet, the cell must still be missing."""
    path = write_raster(tmp_path / "v.tif", [[1, -9999.9]])
    assert missing(read(path, nodata=-9999.9, unit_m=FOOT_M)) == [[False, True]]


def test_a_mask_band(tmp_path):
    path = write_raster(tmp_path / "v.tif", [[1, 2, 3]], mask=[[True, False, True]])
    assert raster_info(path).masked
    assert missing(read(path)) == [[False, True, False]]


def test_a_mask_in_a_south_up_file(tmp_path):
    path = write_raster(
        tmp_path / "v.tif", HILL, transform=Affine(1, 0, 0, 0, 1, 0.5), mask=[[True, True, True], [False, True, True]]
    )
    assert missing(read(path)) == [[True, False, False], [False, False, False]]


def test_an_alpha_band(tmp_path):
    path = write_raster(
        tmp_path / "v.tif", [[[1, 2]], [[255, 0]]], dtype="uint8", photometric="MINISBLACK", alpha="YES"
    )
    assert missing(read(path)) == [[False, True]]


def test_zero_is_ground_unless_it_is_tagged(tmp_path):
    assert missing(read(write_raster(tmp_path / "a.tif", [[0.0, 1.0]]))) == [[False, False]]
    assert missing(read(write_raster(tmp_path / "b.tif", [[0.0, 1.0]], nodata=0))) == [[True, False]]


# --- other formats -------------------------------------------------------------------------------------------------

ASCII = "ncols 2\nnrows 2\nxllcorner 10\nyllcorner 20\ncellsize 5\nNODATA_value -9999\n1.5 2.5\n3.5 -9999\n"


def test_an_ascii_grid(tmp_path):
    (tmp_path / "g.asc").write_text(ASCII)
    info = raster_info(tmp_path / "g.asc")
    assert (info.bounds, info.crs) == ((10.0, 20.0, 20.0, 30.0), None)
    assert read(tmp_path / "g.asc")[0].tolist() == [1.5, 2.5]
    assert missing(read(tmp_path / "g.asc")) == [[False, False], [False, True]]


def test_a_virtual_raster(tmp_path):
    write_raster(tmp_path / "hill.tif", HILL)
    (tmp_path / "hill.vrt").write_text(
        '<VRTDataset rasterXSize="2" rasterYSize="2"><GeoTransform>500001, 1, 0, 4100000, 0, -1</GeoTransform>'
        '<VRTRasterBand dataType="Float32" band="1"><SimpleSource><SourceFilename relativeToVRT="1">hill.tif'
        '</SourceFilename><SrcRect xOff="1" yOff="0" xSize="2" ySize="2"/>'
        '<DstRect xOff="0" yOff="0" xSize="2" ySize="2"/></SimpleSource></VRTRasterBand></VRTDataset>'
    )
    assert read(tmp_path / "hill.vrt").tolist() == [[102.0, 103.0], [105.0, 106.0]]


def test_a_raster_in_a_zip(tmp_path):
    (tmp_path / "g.asc").write_text(ASCII)
    with zipfile.ZipFile(tmp_path / "g.zip", "w") as archive:
        archive.write(tmp_path / "g.asc", "deep/g.asc")
        archive.writestr("readme.txt", "a survey")
    assert read(tmp_path / "g.zip")[0].tolist() == [1.5, 2.5]
    assert read(f"/vsizip/{tmp_path}/g.zip/deep/g.asc")[0].tolist() == [1.5, 2.5]


def test_a_zip_of_two_rasters_is_ambiguous(tmp_path):
    with zipfile.ZipFile(tmp_path / "g.zip", "w") as archive:
        archive.writestr("a.asc", ASCII)
        archive.writestr("b.asc", ASCII)
    with pytest.raises(FileError, match=r"the zip holds 2 rasters; name one of them: /vsizip/.*a\.asc, .*b\.asc"):
        raster_info(tmp_path / "g.zip")


def test_another_band(tmp_path):
    path = write_raster(tmp_path / "v.tif", [[[1.0]], [[2.0]]])
    info = raster_info(path, band=2)
    reader = RasterSource(info).reader()
    assert reader.read(0, 0, 1, 1).item() == 2.0
    reader.close()


# --- what is refused -----------------------------------------------------------------------------------------------


def test_a_missing_file_names_the_nearest(tmp_path):
    write_raster(tmp_path / "existing.tif", HILL)
    with pytest.raises(
        FileError, match=r"ground\.existing: .*exsting\.tif: no such file; did you mean 'existing\.tif'"
    ):
        raster_info(tmp_path / "exsting.tif", what="ground.existing")
    with pytest.raises(FileError, match=r"its folder .*surveys does not exist either"):
        raster_info(tmp_path / "surveys" / "existing.tif")
    with pytest.raises(FileError, match=r"no such file; paths are relative to the site file's folder"):
        raster_info(tmp_path / "qqqqqqqqqqq.zzz")


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("notes.tif", b"not an image at all", "not a raster"),
        ("notes.txt", b"hello", "not a raster"),
        ("empty.tif", b"", "the file is empty; copy it anew"),
        ("cut.tif", b"II*\x00\x08\x00\x00\x00", "corrupt or cut off"),
        ("cut.asc", ASCII[:40].encode(), "not a raster|corrupt or cut off"),
    ],
)
def test_no_raster(tmp_path, name, content, message):
    (tmp_path / name).write_bytes(content)
    with pytest.raises(FileError, match=message):
        raster_info(tmp_path / name)


def test_a_truncated_header(tmp_path):
    whole = write_raster(tmp_path / "whole.tif", HILL).read_bytes()
    (tmp_path / "cut.tif").write_bytes(whole[:150])
    with pytest.raises(FileError, match=r"corrupt or cut off .*; copy it anew"):
        raster_info(tmp_path / "cut.tif")


def test_a_folder(tmp_path):
    with pytest.raises(FileError, match="this is a folder; name the raster in it"):
        raster_info(tmp_path)


def test_a_vector_file(tmp_path):
    (tmp_path / "plan.geojson").write_text('{"type":"FeatureCollection","features":[]}')
    with pytest.raises(FileError, match=r"not a raster|not one raster"):
        raster_info(tmp_path / "plan.geojson")


@pytest.mark.parametrize("band", [0, 2, -1])
def test_a_band_that_is_not_there(tmp_path, band):
    path = write_raster(tmp_path / "v.tif", HILL)
    with pytest.raises(FileError, match=f"band is {band}; it must be 1 to 1, since the file has 1 band"):
        raster_info(path, band=band)


def test_complex_numbers(tmp_path):
    path = write_raster(tmp_path / "v.tif", HILL, dtype="complex64")
    with pytest.raises(FileError, match=r"complex numbers \(complex64\); elevations must be real"):
        raster_info(path)


def test_data_cut_off_name_the_block_and_its_place(tmp_path):
    noise = np.random.default_rng(7).normal(100, 1, (512, 512))
    options = {"tiled": True, "blockxsize": 256, "blockysize": 256, "compress": "deflate"}
    whole = write_raster(tmp_path / "whole.tif", noise, **options).read_bytes()
    (tmp_path / "cut.tif").write_bytes(whole[: len(whole) * 3 // 5])
    info = raster_info(tmp_path / "cut.tif")
    reader = RasterSource(info, what="ground.finished").reader()
    with pytest.raises(FileError) as caught:
        reader.read(0, 0, 512, 512)
    reader.close()
    message = str(caught.value)
    assert message.startswith(
        f"ground.finished: {tmp_path / 'cut.tif'}: data are damaged or cut off in the block at row "
    )
    # the place that is named is the corner of a block, and its coordinates agree with its row and column
    row, column = (int(message.split(f"{w} ")[1].split()[0].rstrip(",")) for w in ("at row", "column"))
    assert (row % 256, column % 256) == (0, 0)
    assert f"easting {500_000 + column}, northing {4_100_000 - row}" in message
    with pytest.raises(Exception, match=r"."), rasterio.open(tmp_path / "cut.tif") as file:
        file.read(1, window=rasterio.windows.Window(column, row, 256, 256))


def test_damage_is_told_in_one_message_and_nowhere_else(tmp_path):
    """Neither GDAL nor rasterio may write to stderr on their own."""
    noise = np.random.default_rng(7).normal(100, 1, (64, 64))
    whole = write_raster(tmp_path / "whole.tif", noise, compress="deflate").read_bytes()
    (tmp_path / "cut.tif").write_bytes(whole[: len(whole) // 2])
    code = (
        "from earthwork.files.rasters import *\n"
        f"info = raster_info({str(tmp_path / 'cut.tif')!r})\n"
        "try: RasterSource(info).reader().read(0, 0, 64, 64)\n"
        "except FileError as error: print('refused')\n"
        "try: raster_info('/nowhere.tif')\n"
        "except FileError: print('refused')\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert (done.stdout, done.stderr) == ("refused\nrefused\n", "")


def test_the_block_cache_is_small(tmp_path, monkeypatch):
    monkeypatch.delenv("GDAL_CACHEMAX", raising=False)
    read(write_raster(tmp_path / "v.tif", HILL))
    assert rasterio.env.get_gdal_config("GDAL_CACHEMAX") == CACHE_BYTES <= 64 * 2**20


# --- the foot of a site --------------------------------------------------------------------------------------------


def document(**ground):
    return {"site": {"name": "x", "units": "us"}, "ground": ground}


def test_the_foot_is_that_of_the_crs(tmp_path):
    write_raster(tmp_path / "survey.tif", HILL, crs="EPSG:2230")
    write_raster(tmp_path / "international.tif", HILL, crs="EPSG:2223")
    write_raster(tmp_path / "metres.tif", HILL)
    write_raster(tmp_path / "none.tif", HILL, crs=None)
    feet = {
        name: foot_of_site(document(existing=f"{name}.tif"), tmp_path)
        for name in ("survey", "international", "metres", "none")
    }
    assert feet == {"survey": US_SURVEY_FOOT_M, "international": FOOT_M, "metres": FOOT_M, "none": FOOT_M}


def test_the_foot_is_looked_for_in_order(tmp_path):
    write_raster(tmp_path / "survey.tif", HILL, crs="EPSG:2230")
    write_raster(tmp_path / "none.tif", HILL, crs=None)
    both = document(existing={"file": "none.tif"}, finished={"file": "survey.tif"})
    assert foot_of_site(both, tmp_path) == US_SURVEY_FOOT_M
    stated = document(existing="none.tif", finished={"level": 100.0})
    stated["site"]["crs"] = "EPSG:2230"
    assert foot_of_site(stated, tmp_path) == US_SURVEY_FOOT_M


@pytest.mark.parametrize(
    "broken",
    [{}, {"ground": 3}, {"ground": {"existing": 4}}, {"ground": {"existing": "nowhere.tif"}}, {"site": {"crs": "nonsense"}},
     {"site": {"crs": 7}}, {"site": [], "ground": {"existing": {"file": ["x"]}}}, {"ground": {"existing": "a\0b"}}],
)  # fmt: skip
def test_the_foot_never_fails(tmp_path, broken):
    assert foot_of_site(broken, tmp_path) == FOOT_M
